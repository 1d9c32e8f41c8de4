/* Between lines: how long, how often and at what power the source may work on; a small source in place of a
 * silence; the way from the soft start to the line. */
#include "base/time.h"
#include "rule/condition.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

static void say(struct watch *watch, const char *code, const struct why *why)
{
    struct why with = *why;
    why_add_cause(&with, watch->phase_id);
    watch_say_finding(watch, code, "firm", &with);
}

/* In a line turn: when it has lasted, or will last, too long. */
static enum permit_action asks(const struct watch *watch, struct why *why)
{
    const struct permit_turn *turn = &watch->permit->turn;
    const struct permit_mitigation_source *small = &watch->permit->mitigation_source;
    const struct turn_state *state = &watch->turn;
    if (turn->stated && watch->phase == PHASE_LINE_TURN) {
        bool expected = state->expected_minutes > turn->longest_minutes;
        if (!turn->reduced)
            why_reset(why, turn->clause, "no working on in a line turn");
        else if (expected)
            why_reset(why, turn->clause, "the turn is expected to last %g min, more than %g",
                      state->expected_minutes, turn->longest_minutes);
        else if (watch->now_ns - watch->phase_since_ns > time_from_minutes(turn->longest_minutes))
            why_reset(why, turn->clause, "the turn has lasted more than %g min", turn->longest_minutes);
        else
            return ACTION_LOG;
        why_add_cause(why, state->id);
        return ACTION_STOP;
    }
    if (small->stated && watch->phase == PHASE_REDUCED &&
        watch->now_ns - watch->phase_since_ns > time_from_minutes(small->longest_minutes)) {
        why_reset(why, small->clause, "the small source has worked for more than %g min",
                  small->longest_minutes);
        return ACTION_STOP;
    }
    return ACTION_LOG;
}

static int64_t due_ns(const struct watch *watch)
{
    const struct permit_turn *turn = &watch->permit->turn;
    const struct permit_mitigation_source *small = &watch->permit->mitigation_source;
    int64_t due = INT64_MAX;
    if (turn->stated && watch->phase == PHASE_LINE_TURN)
        due = watch->phase_since_ns + time_from_minutes(turn->longest_minutes) + TIME_NS_PER_US;
    if (small->stated && watch->phase == PHASE_REDUCED && small->longest_minutes < 1e6)
        due = watch->phase_since_ns + time_from_minutes(small->longest_minutes) + TIME_NS_PER_US;
    const struct permit_soft_start *soft = &watch->permit->soft_start;
    bool on_way = watch->turn.soft_ns >= 0 && soft->longest_to_line_minutes < 1e6;
    int64_t late_ns = watch->turn.soft_ns + time_from_minutes(soft->longest_to_line_minutes) + TIME_NS_PER_US;
    int64_t early_ns = watch->turn.up_ns + time_from_minutes(turn->step_up_minutes) + TIME_NS_PER_US;
    due = on_way && late_ns < due ? late_ns : due;
    return watch->turn.up_ns >= 0 && early_ns < due ? early_ns : due;
}

static void take_note(struct watch *watch, const struct note *note)
{
    struct turn_state *state = &watch->turn;
    if (note->kind == NOTE_SOURCE && strcmp(note->source_state, "line turn") == 0) {
        state->expected_minutes = note->minutes;
        memcpy(state->id, watch->recent.causes[0], sizeof state->id);
    }
    if (note->kind == NOTE_JOB && strcmp(note->answer, "begin") == 0)
        state->soft_ns = state->up_ns = -1; /* the line has begun */
}

/* Shots of a turn, or of a small source, that are too far apart are silence. */
static void take_impulse(struct watch *watch, const struct event *event)
{
    const struct permit_turn *turn = &watch->permit->turn;
    const struct permit_mitigation_source *small = &watch->permit->mitigation_source;
    struct turn_state *state = &watch->turn;
    double longest_s = turn->stated && watch->phase == PHASE_LINE_TURN  ? turn->longest_interval_s
                       : small->stated && watch->phase == PHASE_REDUCED ? small->longest_interval_s
                                                                        : INFINITY;
    double apart_s = state->last_ns < 0 ? 0 : time_to_s(event->as.impulse.time_ns - state->last_ns);
    state->last_ns = event->as.impulse.time_ns;
    if (!(apart_s > longest_s) || state->said_apart)
        return;
    struct why why;
    state->said_apart = true;
    why_reset(&why, watch->phase == PHASE_LINE_TURN ? turn->clause : small->clause,
              "%.0f s between two impulses, more than %g", apart_s, longest_s);
    why_add_cause(&why, watch->source.impulse_id);
    say(watch, "impulses too far apart", &why);
}

static void enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    struct turn_state *state = &watch->turn;
    const struct permit_mitigation_source *small = &watch->permit->mitigation_source;
    state->said_apart = false;
    if (to == PHASE_LINE_TURN || to == PHASE_REDUCED)
        state->last_ns = -1;
    if (to == PHASE_SOFT_START && !source_sounds(from) && from != PHASE_BREAK)
        state->soft_ns = watch->now_ns;
    if (!source_sounds(to) && to != PHASE_BREAK)
        state->soft_ns = -1;
    if (from == PHASE_LINE_TURN && source_sounds(to) && watch->permit->turn.step_up_minutes > 0)
        state->up_ns = watch->now_ns;
    if (to == PHASE_LINE_TURN || to == PHASE_REDUCED || !source_sounds(to))
        state->up_ns = -1;
    if (from == PHASE_REDUCED && to == PHASE_FULL_POWER && small->stated && small->soft_start_after) {
        struct why why;
        why_reset(&why, small->clause, "full power again without a soft start");
        say(watch, "soft start missing", &why);
    }
}

/* The power is to go up again within the last minutes of the turn, and has been up for longer. */
static void find_early(struct watch *watch)
{
    const struct permit_turn *turn = &watch->permit->turn;
    struct turn_state *state = &watch->turn;
    struct why why;
    if (state->up_ns < 0 || watch->now_ns - state->up_ns <= time_from_minutes(turn->step_up_minutes))
        return;
    state->up_ns = -1;
    why_reset(&why, turn->clause,
              "more than %g min since the power went up in the turn, and no line has begun",
              turn->step_up_minutes);
    say(watch, "power up too early for the line", &why);
}

static void settle(struct watch *watch)
{
    const struct permit_soft_start *soft = &watch->permit->soft_start;
    struct turn_state *state = &watch->turn;
    struct why why;
    find_early(watch);
    if (state->soft_ns < 0 ||
        watch->now_ns - state->soft_ns <= time_from_minutes(soft->longest_to_line_minutes))
        return;
    state->soft_ns = -1;
    why_reset(&why, soft->clause, "more than %g min from the begin of the soft start, and no line has begun",
              soft->longest_to_line_minutes);
    say(watch, "soft start too long to the line", &why);
}

const struct condition condition_turn = {.asks = asks,
                                         .due_ns = due_ns,
                                         .take_note = take_note,
                                         .take_impulse = take_impulse,
                                         .enter_phase = enter_phase,
                                         .settle = settle};
