/* Rebuilds a watch from its ledger; see restore.h. */
#include "restore.h"
#include "base/time.h"
#include "record/entry.h"
#include "recorder.h"
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct rebuilding {
    struct watch *watch;
    struct tally *tally;
    struct restored *restored;
    char *problem;
    bool has_zero;
    int64_t now_ns;     /* how far the rebuilt watch has come */
    enum status status; /* of what the sinks did */
    struct text body;
    struct entry_levels levels; /* of the entry that is being taken */
};

static bool is_conclusion(const char *kind)
{
    return strcmp(kind, "contact") == 0 || strcmp(kind, "phase") == 0 || strcmp(kind, "advice") == 0 ||
           strcmp(kind, "finding") == 0 || strcmp(kind, "correction") == 0;
}

static void forget(struct restored_entry *entry)
{
    free(entry->utc);
    free(entry->kind);
    free(entry->body);
}

/* The tally is silent: what it said of the past is in the ledger. */
static void drop_sums(void *context, const struct outcome *outcome)
{
    (void)context;
    (void)outcome;
}

/* A conclusion of the rebuilt watch waits here until the ledger is seen to hold it. */
static void take_outcome(void *context, const struct outcome *outcome)
{
    struct rebuilding *rebuilding = context;
    struct restored *restored = rebuilding->restored;
    char utc[TIME_UTC_SIZE];
    if (rebuilding->tally)
        tally_take(rebuilding->tally, outcome, &(struct outcome_sink){drop_sums, NULL});
    if (outcome->kind == OUTCOME_EVENT || rebuilding->status != STATUS_OK)
        return;
    if (restored->n_missing == restored->capacity) {
        size_t capacity = restored->capacity ? 2 * restored->capacity : 64;
        struct restored_entry *larger = realloc(restored->missing, capacity * sizeof *larger);
        if (!larger) {
            rebuilding->status = STATUS_NO_MEMORY;
            return;
        }
        restored->missing = larger;
        restored->capacity = capacity;
    }
    rebuilding->status = entry_body(outcome, restored->zero_unix_ns, &rebuilding->body);
    time_format_utc(restored->zero_unix_ns + outcome->watch_ns, utc);
    struct restored_entry *entry = &restored->missing[restored->n_missing];
    *entry = (struct restored_entry){strdup(utc), strdup(flow_outcome_kind_text(outcome)),
                                     strdup(rebuilding->body.data ? rebuilding->body.data : "")};
    if (!entry->utc || !entry->kind || !entry->body) {
        forget(entry);
        rebuilding->status = STATUS_NO_MEMORY;
        return;
    }
    restored->n_missing++;
    restored->n_conclusions++;
}

/* The ledger holds this conclusion: it is not missing. */
static void meet_conclusion(struct rebuilding *rebuilding, const struct entry *entry)
{
    struct restored *restored = rebuilding->restored;
    char id[FLOW_ID_SIZE], other[FLOW_ID_SIZE];
    if (recorder_id_of(entry->body, id) != STATUS_OK)
        return;
    for (size_t i = 0; i < restored->n_missing; i++)
        if (recorder_id_of(restored->missing[i].body, other) == STATUS_OK && strcmp(id, other) == 0) {
            forget(&restored->missing[i]);
            restored->n_missing--;
            memmove(&restored->missing[i], &restored->missing[i + 1],
                    (restored->n_missing - i) * sizeof restored->missing[0]);
            return;
        }
}

/* A conclusion that time alone brought comes out when time has passed to it. */
static enum status pass_time(struct rebuilding *rebuilding, int64_t watch_ns)
{
    const struct outcome_sink sink = {take_outcome, rebuilding};
    if (watch_ns <= rebuilding->now_ns)
        return STATUS_OK;
    rebuilding->now_ns = watch_ns;
    enum status status = watch_advance(rebuilding->watch, watch_ns, &sink);
    return status == STATUS_OK ? rebuilding->status : status;
}

static enum status push_input(struct rebuilding *rebuilding, const struct entry *entry, int64_t watch_ns)
{
    const struct outcome_sink sink = {take_outcome, rebuilding};
    struct event event;
    enum status status = entry_event(entry->kind, entry->body, watch_ns, &event);
    if (status == STATUS_NOT_FOUND)
        return STATUS_OK;
    if (status == STATUS_OK) {
        status = watch_push(rebuilding->watch, &event, &sink);
        rebuilding->now_ns = watch_ns;
    }
    if (status != STATUS_OK)
        snprintf(rebuilding->problem, LEDGER_PROBLEM_SIZE, "entry %lld (%s) cannot be taken again: %s",
                 (long long)entry->seq, entry->kind, status_text(status));
    rebuilding->restored->n_inputs++;
    return status == STATUS_OK ? rebuilding->status : status;
}

/* The sums of continuous sound are those of its seconds, which no rule reads. */
static enum status take_levels(struct rebuilding *rebuilding, const struct entry *entry, int64_t watch_ns)
{
    struct entry_levels *levels = &rebuilding->levels;
    enum status status = entry_levels(entry->body, levels);
    struct outcome outcome = {.kind = OUTCOME_EVENT, .watch_ns = watch_ns};
    struct event *event = &outcome.as.event;
    for (uint32_t i = 0; i < levels->n && status == STATUS_OK; i++) {
        outcome.run = levels->run;
        outcome.stream = levels->stream;
        *event = (struct event){.kind = EVENT_LEVEL, .stream = levels->stream, .known_ns = watch_ns};
        event->as.level = levels->seconds[i];
        watch_set_range(rebuilding->watch, event); /* of the minute's end */
        status = tally_take(rebuilding->tally, &outcome, &(struct outcome_sink){drop_sums, NULL});
    }
    if (status != STATUS_OK)
        snprintf(rebuilding->problem, LEDGER_PROBLEM_SIZE, "entry %lld (level) cannot be taken again: %s",
                 (long long)entry->seq, status_text(status));
    return status;
}

/* What the ledger holds for the tally besides the inputs of the watch. */
static enum status take_for_tally(struct rebuilding *rebuilding, const struct entry *entry, int64_t watch_ns)
{
    struct outcome outcome;
    if (!rebuilding->tally)
        return STATUS_OK;
    if (strcmp(entry->kind, "level") == 0 && tally_wants_levels(rebuilding->tally))
        return take_levels(rebuilding, entry, watch_ns);
    if (strcmp(entry->kind, "finding") == 0 && entry_finding(entry->body, &outcome) == STATUS_OK)
        tally_set_said(rebuilding->tally, &outcome);
    return STATUS_OK;
}

static enum status take_entry(void *context, const struct entry *entry)
{
    struct rebuilding *rebuilding = context;
    struct restored *restored = rebuilding->restored;
    int64_t unix_ns;
    if (time_parse_utc(entry->utc, &unix_ns) != STATUS_OK) {
        snprintf(rebuilding->problem, LEDGER_PROBLEM_SIZE, "entry %lld has no time", (long long)entry->seq);
        return STATUS_BAD_FORMAT;
    }
    if (!rebuilding->has_zero) {
        rebuilding->has_zero = true;
        restored->zero_unix_ns = unix_ns;
        watch_set_clock(rebuilding->watch, unix_ns);
    }
    int64_t watch_ns = unix_ns - restored->zero_unix_ns;
    if (watch_ns > restored->last_ns)
        restored->last_ns = watch_ns;
    if (strcmp(entry->kind, "run") == 0)
        restored->last_run++;
    enum status status = is_conclusion(entry->kind) ? pass_time(rebuilding, watch_ns)
                                                    : push_input(rebuilding, entry, watch_ns);
    if (is_conclusion(entry->kind))
        meet_conclusion(rebuilding, entry);
    return status == STATUS_OK ? take_for_tally(rebuilding, entry, watch_ns) : status;
}

enum status restore_watch(struct ledger *ledger, struct watch *watch, struct tally *tally,
                          struct restored *out, char problem[LEDGER_PROBLEM_SIZE])
{
    *out = (struct restored){0};
    *problem = '\0';
    struct rebuilding rebuilding = {.watch = watch, .tally = tally, .restored = out, .problem = problem};
    if (tally)
        tally_set_silent(tally, true);
    enum status status = ledger_read(ledger, &(struct ledger_query){0}, take_entry, &rebuilding);
    text_destroy(&rebuilding.body);
    if (tally)
        tally_set_silent(tally, false);
    if (status != STATUS_OK) {
        if (*problem == '\0')
            snprintf(problem, LEDGER_PROBLEM_SIZE, "the watch cannot be rebuilt: %s", status_text(status));
        restored_destroy(out);
    }
    return status;
}

void restored_destroy(struct restored *restored)
{
    if (!restored)
        return;
    for (size_t i = 0; i < restored->n_missing; i++)
        forget(&restored->missing[i]);
    free(restored->missing);
    restored->missing = NULL;
    restored->n_missing = restored->capacity = 0;
}
