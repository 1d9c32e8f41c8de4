/* Rebuilds a watch from its ledger; see restore.h. */
#include "restore.h"
#include "base/time.h"
#include "record/entry.h"
#include "recorder.h"
#include "replay.h"
#include <stdlib.h>
#include <string.h>

struct rebuilding {
    struct restored *restored;
    const struct replay *replay;
    struct text body;
};

static void forget(struct restored_entry *entry)
{
    free(entry->utc);
    free(entry->kind);
    free(entry->body);
}

static enum status make_room(struct restored *restored)
{
    if (restored->n_missing < restored->capacity)
        return STATUS_OK;
    size_t capacity = restored->capacity ? 2 * restored->capacity : 64;
    struct restored_entry *larger = realloc(restored->missing, capacity * sizeof *larger);
    if (!larger)
        return STATUS_NO_MEMORY;
    restored->missing = larger;
    restored->capacity = capacity;
    return STATUS_OK;
}

/* A conclusion of the rebuilt watch waits here until the ledger is seen to hold it. */
static enum status take_outcome(void *context, const struct outcome *outcome)
{
    struct rebuilding *rebuilding = context;
    struct restored *restored = rebuilding->restored;
    struct replay_facts facts;
    char utc[TIME_UTC_SIZE];
    if (!replay_is_conclusion(flow_outcome_kind_text(outcome)) || outcome->stream != 0)
        return STATUS_OK;
    enum status status = make_room(restored);
    replay_get_facts(rebuilding->replay, &facts);
    if (status == STATUS_OK)
        status = entry_body(outcome, facts.zero_unix_ns, &rebuilding->body);
    if (status != STATUS_OK)
        return status;
    time_format_utc(facts.zero_unix_ns + outcome->watch_ns, utc);
    struct restored_entry *entry = &restored->missing[restored->n_missing];
    *entry = (struct restored_entry){strdup(utc), strdup(flow_outcome_kind_text(outcome)),
                                     strdup(rebuilding->body.data)};
    if (!entry->utc || !entry->kind || !entry->body) {
        forget(entry);
        return STATUS_NO_MEMORY;
    }
    restored->n_missing++;
    restored->n_conclusions++;
    return STATUS_OK;
}

/* The ledger holds this conclusion: it is not missing. */
static enum status meet_entry(void *context, const struct entry *entry, int64_t watch_ns,
                              const char *permit_body)
{
    struct restored *restored = ((struct rebuilding *)context)->restored;
    char id[FLOW_ID_SIZE], other[FLOW_ID_SIZE];
    (void)watch_ns;
    (void)permit_body;
    if (!replay_is_conclusion(entry->kind) || recorder_id_of(entry->body, id) != STATUS_OK)
        return STATUS_OK;
    for (size_t i = 0; i < restored->n_missing; i++)
        if (recorder_id_of(restored->missing[i].body, other) == STATUS_OK && strcmp(id, other) == 0) {
            forget(&restored->missing[i]);
            restored->n_missing--;
            memmove(&restored->missing[i], &restored->missing[i + 1],
                    (restored->n_missing - i) * sizeof restored->missing[0]);
            break;
        }
    return STATUS_OK;
}

enum status restore_watch(struct ledger *ledger, struct watch *watch, struct tally *tally,
                          struct restored *out, char problem[LEDGER_PROBLEM_SIZE])
{
    *out = (struct restored){0};
    *problem = '\0';
    struct rebuilding rebuilding = {.restored = out};
    const struct replay_setup setup = {.ledger = ledger,
                                       .watch = watch,
                                       .tally = tally,
                                       .derived = take_outcome,
                                       .met = meet_entry,
                                       .context = &rebuilding};
    struct replay *replay;
    struct replay_facts facts = {0};
    enum status status = replay_create(&setup, &replay);
    if (status != STATUS_OK)
        return status;
    rebuilding.replay = replay;
    status = replay_run(replay, 0, problem);
    replay_get_facts(replay, &facts);
    replay_destroy(replay);
    text_destroy(&rebuilding.body);
    out->last_run = facts.last_run;
    out->zero_unix_ns = facts.zero_unix_ns;
    out->last_ns = facts.last_ns;
    out->n_inputs = facts.n_inputs;
    if (status != STATUS_OK)
        restored_destroy(out);
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
