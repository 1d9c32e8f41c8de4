/* Derives a watch again from its ledger; see replay.h. */
#include "replay.h"
#include "base/time.h"
#include "record/entry.h"
#include "record/marks.h"
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct replay {
    struct replay_setup setup;
    struct replay_facts facts;
    struct watch *watch; /* borrowed or own */
    struct tally *tally;
    bool rebuilds;             /* borrowed ones */
    struct watch_setup final;  /* of the borrowed watch: what holds after the ledger's end */
    struct recorded *recorded; /* in force; NULL where the ledger does not hold them */
    struct text permit_body;   /* in force */
    struct text run_body;      /* a `run` entry that waits for its `permit` entry; empty: none */
    int64_t run_seq, run_ns;
    bool has_zero;
    bool cut;           /* see replay_set_cut */
    int64_t now_ns;     /* how far the watch has come */
    int64_t event_ns;   /* when it took the last event */
    enum status status; /* of the callbacks */
    char *problem;      /* of the call in progress */
    struct text body;
    struct entry_levels levels; /* of the entry that is being taken */
};

enum status replay_create(const struct replay_setup *setup, struct replay **out)
{
    struct replay *replay = calloc(1, sizeof *replay);
    if (!replay)
        return STATUS_NO_MEMORY;
    replay->setup = *setup;
    replay->rebuilds = setup->watch != NULL;
    replay->watch = setup->watch;
    replay->tally = setup->tally;
    if (replay->rebuilds)
        watch_get_setup(setup->watch, &replay->final);
    *out = replay;
    return STATUS_OK;
}

void replay_destroy(struct replay *replay)
{
    if (!replay)
        return;
    if (!replay->rebuilds) {
        watch_destroy(replay->watch);
        tally_destroy(replay->tally);
    }
    recorded_destroy(replay->recorded);
    text_destroy(&replay->permit_body);
    text_destroy(&replay->run_body);
    text_destroy(&replay->body);
    free(replay);
}

bool replay_is_conclusion(const char *kind)
{
    static const char *const kinds[] = {"contact", "phase", "advice", "finding", "correction"};
    for (size_t i = 0; i < sizeof kinds / sizeof kinds[0]; i++)
        if (strcmp(kind, kinds[i]) == 0)
            return true;
    return false;
}

static bool is_sum(const char *kind)
{
    return strcmp(kind, "exposure") == 0 || strcmp(kind, "source") == 0;
}

static enum status say_problem(struct replay *replay, const struct entry *entry, const char *what,
                               enum status status)
{
    snprintf(replay->problem, LEDGER_PROBLEM_SIZE, "entry %lld (%.20s) %.400s", (long long)entry->seq,
             entry->kind, what);
    return status;
}

/* ---- what is derived */

static void give(struct replay *replay, const struct outcome *outcome)
{
    if (replay->status == STATUS_OK && replay->setup.derived)
        replay->status = replay->setup.derived(replay->setup.context, outcome);
}

static void take_sums(void *context, const struct outcome *outcome)
{
    struct replay *replay = context;
    give(replay, outcome);
    if (outcome->kind == OUTCOME_FINDING && replay->watch)
        watch_take_finding(replay->watch, outcome, NULL);
}

static void take_outcome(void *context, const struct outcome *outcome)
{
    struct replay *replay = context;
    const struct outcome_sink sums = {take_sums, replay};
    give(replay, outcome);
    if (replay->tally && replay->status == STATUS_OK)
        replay->status = tally_take(replay->tally, outcome, &sums);
}

/* What time alone brought comes out when time has passed to it. */
static enum status pass_time(struct replay *replay, int64_t watch_ns)
{
    const struct outcome_sink sink = {take_outcome, replay};
    if (watch_ns <= replay->now_ns || !replay->watch)
        return replay->status;
    replay->now_ns = watch_ns;
    enum status status = watch_advance(replay->watch, watch_ns, &sink);
    return status == STATUS_OK ? replay->status : status;
}

static enum status push(struct replay *replay, const struct entry *entry, int64_t watch_ns)
{
    const struct outcome_sink sink = {take_outcome, replay};
    struct event event;
    enum status status = entry_event(entry->kind, entry->body, watch_ns, &event);
    if (status == STATUS_NOT_FOUND)
        return STATUS_OK;
    if (status == STATUS_OK) {
        status = watch_push(replay->watch, &event, &sink);
        replay->now_ns = replay->event_ns = watch_ns;
    }
    if (status != STATUS_OK) {
        char what[80];
        snprintf(what, sizeof what, "cannot be taken again: %s", status_text(status));
        return say_problem(replay, entry, what, status);
    }
    replay->facts.n_inputs++;
    if (replay->status == STATUS_OK && replay->setup.met && event.kind != EVENT_RUN)
        replay->status = replay->setup.met(replay->setup.context, entry, watch_ns, NULL);
    return replay->status;
}

/* ---- rules */

static enum status use_rules(struct replay *replay, struct recorded *recorded)
{
    struct watch_setup setup;
    enum status status = STATUS_OK;
    rules_fill_watch(recorded->rules, recorded->site, recorded->n_streams, recorded->n_channels, &setup);
    if (replay->watch)
        status = watch_change(replay->watch, &setup);
    else
        status = watch_create(&setup, &replay->watch);
    if (status != STATUS_OK)
        return status;
    recorded_destroy(replay->recorded);
    replay->recorded = recorded;
    watch_set_clock(replay->watch, replay->facts.zero_unix_ns);
    return STATUS_OK;
}

/* The tally of a run with other settings than the one before: as that run made it, from the whole ledger. */
static enum status make_tally(struct replay *replay, int64_t before_seq)
{
    const struct recorded *recorded = replay->recorded;
    struct tally *tally;
    enum status status = rules_create_tally(recorded->rules, recorded->site, recorded->n_streams,
                                            recorded->n_channels, &tally);
    if (status != STATUS_OK)
        return status;
    if (tally && replay->facts.n_inputs > 0) {
        struct watch_setup setup;
        struct replay_setup again = {.ledger = replay->setup.ledger, .tally = tally};
        struct replay *first = NULL;
        rules_fill_watch(recorded->rules, recorded->site, recorded->n_streams, recorded->n_channels, &setup);
        status = watch_create(&setup, &again.watch);
        if (status == STATUS_OK)
            status = replay_create(&again, &first);
        if (status == STATUS_OK)
            status = replay_run(first, before_seq, replay->problem);
        replay_destroy(first);
        watch_destroy(again.watch);
    }
    if (status != STATUS_OK) {
        tally_destroy(tally);
        return status;
    }
    tally_destroy(replay->tally);
    replay->tally = tally;
    replay->facts.sums = replay->facts.sums || tally;
    return STATUS_OK;
}

/* Ids differ from run to run; what follows is the permit. */
static const char *after_id(const char *body)
{
    const char *id = body ? strstr(body, "\"id\":") : NULL;
    return id ? id + strcspn(id, ",") : "";
}

/* The run's own rules, where its entries hold them. permit may be NULL: the entry was lost. */
static enum status take_rules(struct replay *replay, const struct entry *permit)
{
    struct recorded *recorded = NULL;
    char problem[RECORDED_PROBLEM_SIZE];
    if (!permit)
        return STATUS_OK;
    enum status status =
        recorded_load(replay->run_body.data, permit->body, replay->setup.permit, &recorded, problem);
    if (status == STATUS_NO_MEMORY)
        return status;
    if (status != STATUS_OK) /* a restart goes by what it has; nothing else can be done */
        return replay->rebuilds ? STATUS_OK : say_problem(replay, permit, problem, status);
    bool other_permit = strcmp(after_id(replay->permit_body.data), after_id(permit->body)) != 0;
    bool same = replay->recorded && !other_permit &&
                strcmp(replay->recorded->settings.data, recorded->settings.data) == 0;
    replay->facts.n_permits += other_permit;
    replay->facts.other_defaults = replay->facts.other_defaults || recorded->other_defaults;
    text_reset(&replay->permit_body);
    text_append(&replay->permit_body, permit->body);
    if (same)
        recorded_destroy(recorded);
    else if ((status = use_rules(replay, recorded)) != STATUS_OK)
        recorded_destroy(recorded);
    bool anew = !replay->rebuilds && !replay->setup.permit && (!same || replay->cut);
    replay->cut = false;
    return status == STATUS_OK && anew ? make_tally(replay, replay->run_seq) : status;
}

static enum status meet_permit(struct replay *replay, const struct entry *entry)
{
    uint32_t run = 0;
    unsigned long long counter = 1;
    const struct recorded *recorded = replay->recorded;
    if (!replay->setup.met || replay->setup.permit || !recorded)
        return STATUS_OK;
    const char *id = strstr(entry->body, "\"id\":\"");
    if (!id || sscanf(id + 6, "%u.0.permit.%llu", &run, &counter) != 2)
        return say_problem(replay, entry, "has no id", STATUS_BAD_FORMAT);
    enum status status = entry_body_permit(run, counter, &recorded->rules->permit,
                                           recorded->rules->permit_text.data, &replay->body);
    return status != STATUS_OK
               ? status
               : replay->setup.met(replay->setup.context, entry, replay->run_ns, replay->body.data);
}

/* A run begins when its permit is known: what was due before it was due under the former. */
static enum status begin_run(struct replay *replay, const struct entry *permit)
{
    if (replay->run_body.length == 0)
        return STATUS_OK;
    const struct entry run = {
        .seq = replay->run_seq, .kind = "run", .body = replay->run_body.data, .utc = "", .hash = ""};
    enum status status = take_rules(replay, permit);
    if (status == STATUS_OK &&
        replay->watch) /* a field check's run has no permit, and nobody keeps a watch */
        status = push(replay, &run, replay->run_ns);
    text_reset(&replay->run_body);
    return status == STATUS_OK && permit ? meet_permit(replay, permit) : status;
}

static enum status take_run(struct replay *replay, const struct entry *entry, int64_t watch_ns)
{
    struct event event;
    enum status status = entry_event(entry->kind, entry->body, watch_ns, &event);
    if (status != STATUS_OK)
        return say_problem(replay, entry, "cannot be read", status);
    status = pass_time(
        replay, event.as.run_mark.outage_start_ns < watch_ns ? event.as.run_mark.outage_start_ns : watch_ns);
    if (status == STATUS_OK && replay->setup.turned)
        status = replay->setup.turned(replay->setup.context, event.run);
    replay->facts.last_run++;
    replay->run_seq = entry->seq;
    replay->run_ns = watch_ns;
    text_reset(&replay->run_body);
    text_append(&replay->run_body, entry->body);
    return replay->run_body.failed ? STATUS_NO_MEMORY : status;
}

/* ---- entries */

/* The sums of continuous sound are those of its seconds, which no rule reads. */
static enum status take_levels(struct replay *replay, const struct entry *entry, int64_t watch_ns)
{
    struct entry_levels *levels = &replay->levels;
    enum status status = entry_levels(entry->body, levels);
    if (status != STATUS_OK)
        return say_problem(replay, entry, "cannot be taken again", status);
    const struct tally_minute minute = {.watch_ns = watch_ns,
                                        .run = levels->run,
                                        .stream = levels->stream,
                                        .n = levels->n,
                                        .seconds = levels->seconds};
    status =
        tally_take_minute(replay->tally, replay->watch, &minute, &(struct outcome_sink){take_sums, replay});
    return status != STATUS_OK ? status : replay->status;
}

/* What the ledger holds for the tally besides the inputs of the watch. */
static enum status take_for_tally(struct replay *replay, const struct entry *entry, int64_t watch_ns)
{
    struct outcome outcome;
    if (!replay->tally || !replay->watch)
        return STATUS_OK;
    if (strcmp(entry->kind, "level") == 0 && tally_wants_levels(replay->tally))
        return take_levels(replay, entry, watch_ns);
    if (replay->rebuilds && strcmp(entry->kind, "finding") == 0 &&
        entry_finding(entry->body, &outcome) == STATUS_OK) {
        const struct outcome_sink sink = {take_outcome, replay};
        tally_set_said(replay->tally, &outcome);
        /* As it was: at the end of the event that brought it, or of the next where time alone did. */
        if (outcome.stream > 0)
            watch_take_finding(replay->watch, &outcome, watch_ns == replay->event_ns ? &sink : NULL);
    }
    return STATUS_OK;
}

static enum status take_known(struct replay *replay, const struct entry *entry, int64_t watch_ns)
{
    bool conclusion = replay_is_conclusion(entry->kind), sum = is_sum(entry->kind);
    if (strcmp(entry->kind, "run") == 0)
        return take_run(replay, entry, watch_ns);
    enum status status = begin_run(replay, strcmp(entry->kind, "permit") == 0 ? entry : NULL);
    if (status != STATUS_OK)
        return status;
    status = conclusion || sum ? pass_time(replay, watch_ns)
             : replay->watch   ? push(replay, entry, watch_ns)
                               : STATUS_OK;
    if (status == STATUS_OK && (conclusion || sum) && replay->setup.met)
        status = replay->setup.met(replay->setup.context, entry, watch_ns, NULL);
    return status == STATUS_OK ? take_for_tally(replay, entry, watch_ns) : status;
}

static enum status take_entry(void *context, const struct entry *entry)
{
    struct replay *replay = context;
    struct replay_facts *facts = &replay->facts;
    int64_t unix_ns;
    if (time_parse_utc(entry->utc, &unix_ns) != STATUS_OK)
        return say_problem(replay, entry, "has no time", STATUS_BAD_FORMAT);
    if (!replay->has_zero) {
        replay->has_zero = true;
        facts->zero_unix_ns = unix_ns;
        if (replay->watch)
            watch_set_clock(replay->watch, unix_ns);
    }
    int64_t watch_ns = unix_ns - facts->zero_unix_ns;
    if (watch_ns > facts->last_ns)
        facts->last_ns = watch_ns;
    return take_known(replay, entry, watch_ns);
}

/* A borrowed watch comes to the ledger's end under its last permit, and goes on under the present one. */
static enum status end(struct replay *replay)
{
    enum status status = begin_run(replay, NULL);
    if (status == STATUS_OK)
        status = pass_time(replay, replay->facts.last_ns);
    if (status == STATUS_OK && replay->setup.turned)
        status = replay->setup.turned(replay->setup.context, 0);
    if (status == STATUS_OK && replay->rebuilds && replay->recorded)
        status = watch_change(replay->watch, &replay->final);
    return status;
}

enum status replay_run(struct replay *replay, int64_t before_seq, char problem[LEDGER_PROBLEM_SIZE])
{
    replay->problem = problem;
    *problem = '\0';
    if (replay->rebuilds && replay->tally)
        tally_set_silent(replay->tally, true);
    enum status status = ledger_read(replay->setup.ledger, &(struct ledger_query){.before_seq = before_seq},
                                     take_entry, replay);
    if (status == STATUS_OK)
        status = end(replay);
    if (replay->tally)
        tally_set_silent(replay->tally, false);
    if (status != STATUS_OK && *problem == '\0')
        snprintf(problem, LEDGER_PROBLEM_SIZE, "the watch cannot be derived again: %s", status_text(status));
    replay->problem = NULL;
    return status;
}

void replay_set_cut(struct replay *replay)
{
    replay->cut = true;
}

void replay_get_facts(const struct replay *replay, struct replay_facts *out)
{
    *out = replay->facts;
}

const char *replay_permit(const struct replay *replay)
{
    return replay->recorded ? replay->recorded->rules->permit.id : "";
}

void replay_say_sums(struct replay *replay, int64_t watch_ns)
{
    if (replay->tally)
        tally_say(replay->tally, watch_ns, &(struct outcome_sink){take_sums, replay});
}
