/* Compares a ledger with what follows from its inputs; see rerun.h. */
#include "rerun.h"
#include "base/time.h"
#include "record/entry.h"
#include "recorder.h"
#include <stdlib.h>
#include <string.h>

/* Derived, and not yet met in the ledger. */
struct waiting {
    uint64_t order;
    char *kind, *body;
    char utc[TIME_UTC_SIZE], id[FLOW_ID_SIZE];
    bool of_watch; /* a conclusion of the watch: a restart writes those that were lost */
};

struct comparing {
    struct rerun_setup setup;
    struct rerun_facts *facts;
    struct replay *replay;
    struct waiting *waiting;
    size_t n, capacity;
    uint64_t n_derived, last_met; /* orders */
    struct text body;
};

static void forget(struct waiting *waiting)
{
    free(waiting->kind);
    free(waiting->body);
}

static bool is_sum(const char *kind)
{
    return strcmp(kind, "exposure") == 0 || strcmp(kind, "source") == 0;
}

/* What is in the ledger as it was derived: all but the marks of runs and the seconds of sound. */
static bool is_compared(const struct outcome *outcome)
{
    return outcome->kind != OUTCOME_EVENT ||
           (outcome->as.event.kind != EVENT_RUN && outcome->as.event.kind != EVENT_LEVEL);
}

static enum status take_outcome(void *context, const struct outcome *outcome)
{
    struct comparing *comparing = context;
    struct replay_facts facts;
    if (comparing->setup.outcome)
        comparing->setup.outcome(comparing->setup.context, outcome);
    if (!is_compared(outcome))
        return STATUS_OK;
    if (comparing->n == comparing->capacity) {
        size_t capacity = comparing->capacity ? 2 * comparing->capacity : 64;
        struct waiting *larger = realloc(comparing->waiting, capacity * sizeof *larger);
        if (!larger)
            return STATUS_NO_MEMORY;
        comparing->waiting = larger;
        comparing->capacity = capacity;
    }
    replay_get_facts(comparing->replay, &facts);
    enum status status = entry_body(outcome, facts.zero_unix_ns, &comparing->body);
    if (status != STATUS_OK)
        return status;
    const char *kind = flow_outcome_kind_text(outcome);
    struct waiting *waiting = &comparing->waiting[comparing->n];
    *waiting = (struct waiting){.order = ++comparing->n_derived,
                                .kind = strdup(kind),
                                .body = strdup(comparing->body.data),
                                .of_watch = replay_is_conclusion(kind) && outcome->stream == 0};
    if (!waiting->kind || !waiting->body) {
        forget(waiting);
        return STATUS_NO_MEMORY;
    }
    time_format_utc(facts.zero_unix_ns + outcome->watch_ns, waiting->utc);
    flow_id(outcome->run, outcome->stream, kind, outcome->counter, waiting->id);
    comparing->n++;
    return STATUS_OK;
}

static void differ(struct comparing *comparing, const struct rerun_difference *difference)
{
    comparing->facts->n_different++;
    comparing->setup.take(comparing->setup.context, difference);
}

static void count_same(struct rerun_facts *facts, const char *kind)
{
    uint32_t i = 0;
    facts->n_same++;
    while (i < facts->n_kinds && strcmp(facts->kinds[i].kind, kind) != 0)
        i++;
    if (i == RERUN_MAX_KINDS)
        return;
    if (i == facts->n_kinds) {
        facts->n_kinds++;
        strncpy(facts->kinds[i].kind, kind, sizeof facts->kinds[i].kind - 1);
    }
    facts->kinds[i].n++;
}

static void compare(struct comparing *comparing, const struct entry *entry, const char *id,
                    const char *derived_utc, const char *derived)
{
    struct event event;
    if (strcmp(entry->utc, derived_utc) == 0 && strcmp(entry->body, derived) == 0) {
        if (entry_event(entry->kind, entry->body, 0, &event) == STATUS_OK)
            comparing->facts->n_inputs_same++;
        else
            count_same(comparing->facts, entry->kind);
        return;
    }
    differ(comparing, &(struct rerun_difference){RERUN_OTHER, entry->seq, entry->kind, id, entry->utc,
                                                 entry->body, derived_utc, derived});
}

static size_t find(const struct comparing *comparing, const char *kind, const char *id)
{
    for (size_t i = 0; i < comparing->n; i++)
        if (strcmp(comparing->waiting[i].id, id) == 0 && strcmp(comparing->waiting[i].kind, kind) == 0)
            return i;
    return comparing->n;
}

static enum status meet_entry(void *context, const struct entry *entry, int64_t watch_ns,
                              const char *permit_body)
{
    struct comparing *comparing = context;
    char id[FLOW_ID_SIZE] = "";
    recorder_id_of(entry->body, id);
    bool of_tally = is_sum(entry->kind) ||
                    (strcmp(entry->kind, "finding") == 0 && *id && strstr(id, ".0.finding.") == NULL);
    if (permit_body) {
        compare(comparing, entry, id, entry->utc, permit_body);
        return STATUS_OK;
    }
    size_t i = find(comparing, entry->kind, id);
    if (i == comparing->n && of_tally) {
        replay_say_sums(comparing->replay, watch_ns); /* it was a second of sound that began the minute */
        i = find(comparing, entry->kind, id);
    }
    if (i == comparing->n) {
        differ(comparing, &(struct rerun_difference){RERUN_NOT_DERIVED, entry->seq, entry->kind, id,
                                                     entry->utc, entry->body, NULL, NULL});
        return STATUS_OK;
    }
    struct waiting *waiting = &comparing->waiting[i];
    compare(comparing, entry, id, waiting->utc, waiting->body);
    if (waiting->order > comparing->last_met)
        comparing->last_met = waiting->order;
    forget(waiting);
    comparing->n--;
    memmove(waiting, waiting + 1, (comparing->n - i) * sizeof *waiting);
    return STATUS_OK;
}

/* What still waits at a run's end was not written. What follows from its last entries only may have been lost
 * with the program; but a restart writes what the watch concluded, so then only sums. */
static enum status turn(void *context, uint32_t run)
{
    struct comparing *comparing = context;
    uint64_t n_cut = 0;
    for (size_t i = 0; i < comparing->n; i++) {
        struct waiting *waiting = &comparing->waiting[i];
        if (waiting->order > comparing->last_met && (run == 0 || !waiting->of_watch))
            n_cut++;
        else
            differ(comparing, &(struct rerun_difference){RERUN_NOT_RECORDED, 0, waiting->kind, waiting->id,
                                                         NULL, NULL, waiting->utc, waiting->body});
        forget(waiting);
    }
    comparing->n = 0;
    comparing->facts->n_cut += n_cut;
    if (n_cut > 0)
        replay_set_cut(comparing->replay);
    return STATUS_OK;
}

enum status rerun_compare(const struct rerun_setup *setup, struct rerun_facts *out,
                          char problem[LEDGER_PROBLEM_SIZE])
{
    *out = (struct rerun_facts){0};
    struct comparing comparing = {.setup = *setup, .facts = out};
    const struct replay_setup replay = {.ledger = setup->ledger,
                                        .derived = take_outcome,
                                        .met = meet_entry,
                                        .turned = turn,
                                        .context = &comparing};
    enum status status = replay_create(&replay, &comparing.replay);
    if (status == STATUS_OK)
        status = replay_run(comparing.replay, 0, problem);
    if (comparing.replay)
        replay_get_facts(comparing.replay, &out->replay);
    replay_destroy(comparing.replay);
    for (size_t i = 0; i < comparing.n; i++)
        forget(&comparing.waiting[i]);
    free(comparing.waiting);
    text_destroy(&comparing.body);
    return status == STATUS_OK && out->n_different ? STATUS_MISMATCH : status;
}
