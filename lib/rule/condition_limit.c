/* What the permit asks for when a limit of noise is passed in a job, until the source stops or another job
 * opens. Whether one is passed is the tally's to find (rule/tally_limits.h). */
#include "rule/condition.h"
#include "rule/tally_limits.h"
#include <stdio.h>
#include <string.h>

static void take_passed(struct watch *watch, const struct limit_finding *finding)
{
    struct limit_state *state = &watch->limit;
    if (watch->permit->limit_action == ACTION_LOG || !source_sounds(watch->phase) ||
        strcmp(finding->job, watch->source.job) != 0)
        return;
    state->passed = *finding;
    state->on = true;
}

/* Another's impulses made it: a person has said so, and the finding is answered. */
static void take_answered(struct watch *watch, const struct limit_finding *finding)
{
    if (strcmp(finding->clause, watch->limit.passed.clause) == 0)
        watch->limit.on = false;
}

bool limit_take_pending(struct watch *watch)
{
    struct limit_state *state = &watch->limit;
    bool any = state->n_pending > 0;
    for (uint32_t i = 0; i < state->n_pending; i++)
        if (state->pending[i].answered)
            take_answered(watch, &state->pending[i]);
        else
            take_passed(watch, &state->pending[i]);
    if (any) {
        why_set(&watch->recent, "", "");
        why_add_cause(&watch->recent, state->pending[state->n_pending - 1].id);
    }
    state->n_pending = 0;
    return any;
}

/* The newest are kept: where a limit is passed again, that is the same. */
void limit_keep(struct watch *watch, const struct outcome *outcome)
{
    struct limit_state *state = &watch->limit;
    const struct finding_outcome *finding = &outcome->as.finding;
    struct limit_finding *kept = &state->pending[state->n_pending];
    bool answered = strcmp(finding->code, "finding answered") == 0;
    if (!answered && strcmp(finding->code, TALLY_LIMIT_PASSED) != 0)
        return;
    if (state->n_pending == LIMIT_MAX_PENDING) {
        memmove(state->pending, state->pending + 1, (LIMIT_MAX_PENDING - 1) * sizeof state->pending[0]);
        kept--;
    } else
        state->n_pending++;
    flow_id(outcome->run, outcome->stream, "finding", outcome->counter, kept->id);
    kept->answered = answered;
    memcpy(kept->job, finding->job, sizeof kept->job);
    memcpy(kept->text, finding->detail, sizeof kept->text);
    memcpy(kept->clause, finding->clause, sizeof kept->clause);
}

static enum permit_action asks(const struct watch *watch, struct why *why)
{
    const struct limit_state *state = &watch->limit;
    enum permit_action action = watch->permit->limit_action;
    bool followed = action == ACTION_REDUCE && watch->phase == PHASE_REDUCED;
    if (!state->on || followed)
        return ACTION_LOG;
    why_reset(why, state->passed.clause, "a limit is passed: %.200s", state->passed.text);
    why_add_cause(why, state->passed.id);
    return action;
}

static void take_note(struct watch *watch, const struct note *note)
{
    if (note->kind == NOTE_JOB && strcmp(note->answer, "open") == 0)
        watch->limit.on = false;
}

static void enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    if (source_sounds(from) && !source_sounds(to))
        watch->limit.on = false;
}

const struct condition condition_limit = {.asks = asks, .take_note = take_note, .enter_phase = enter_phase};
