/* Whether a charge was of high or of low order, by its measured peak: the loudest blow of its job. */
#include "base/time.h"
#include "level/charge.h"
#include "rule/condition.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

/* So long after its first blow the charge is judged: bubbles, echoes and other streams have come by then (own
 * choice). */
#define JUDGED_AFTER_NS (2 * TIME_NS_PER_S)

static void take_note(struct watch *watch, const struct note *note)
{
    struct charge_state *state = &watch->charge;
    if (note->kind != NOTE_JOB || strcmp(note->answer, "open") != 0)
        return;
    *state =
        (struct charge_state){.due_ns = -1, .peak_db = NAN, .range_m = NAN, .largest_kg = state->largest_kg};
    state->charge_kg = note->charge_kg;
    state->donor_kg = note->donor_kg;
    memcpy(state->id, watch->recent.causes[0], sizeof state->id);
}

static void find_larger_first(struct watch *watch)
{
    const struct permit_soft_start *rule = &watch->permit->soft_start;
    struct charge_state *state = &watch->charge;
    struct why why;
    if (rule->smallest_charge_first && state->charge_kg < state->largest_kg) {
        why_reset(&why, rule->clause, "%g kg after %g kg: the smallest charge is to go first",
                  state->charge_kg, state->largest_kg);
        why_add_cause(&why, state->impulse_id);
        why_add_cause(&why, state->id);
        watch_say_finding(watch, "larger charge first", "firm", &why);
    }
    if (state->charge_kg > state->largest_kg)
        state->largest_kg = state->charge_kg;
}

/* Another pre-watch is another series of charges. */
static void enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    (void)from;
    if (to == PHASE_PRE_WATCH || to == PHASE_OFF)
        watch->charge.largest_kg = 0;
}

static void take_impulse(struct watch *watch, const struct event *event)
{
    struct charge_state *state = &watch->charge;
    const struct impulse *impulse = &event->as.impulse;
    if (!(state->charge_kg > 0) || state->judged)
        return;
    if (state->due_ns < 0) {
        state->due_ns = watch->now_ns + JUDGED_AFTER_NS;
        memcpy(state->impulse_id, watch->source.impulse_id, sizeof state->impulse_id);
        find_larger_first(watch);
    }
    if (impulse->relative || impulse->refused || !isfinite(impulse->peak_db) ||
        impulse->peak_db <= state->peak_db)
        return;
    state->peak_db = impulse->peak_db;
    state->clipped = impulse->clipped;
    state->range_m = watch_range_m(watch, event->stream, impulse);
    memcpy(state->impulse_id, watch->source.impulse_id, sizeof state->impulse_id);
}

static int64_t due_ns(const struct watch *watch)
{
    return watch->charge.due_ns >= 0 && !watch->charge.judged ? watch->charge.due_ns : INT64_MAX;
}

static void settle(struct watch *watch)
{
    struct charge_state *state = &watch->charge;
    struct why why;
    char with[48] = "";
    if (state->due_ns < 0 || state->judged || watch->now_ns < state->due_ns)
        return;
    state->judged = true;
    struct charge_judgement is =
        charge_judge(state->peak_db, state->clipped, state->range_m, state->charge_kg, state->donor_kg);
    if (state->donor_kg > 0)
        snprintf(with, sizeof with, " and the donor's %g", state->donor_kg);
    if (!isfinite(state->peak_db))
        why_reset(&why, "", "cannot be told: the blow has no peak in uPa");
    else if (!isfinite(state->range_m))
        why_reset(&why, "", "cannot be told: peak %.1f dB re 1 uPa, and the range is unknown",
                  state->peak_db);
    else
        why_reset(&why, "",
                  "%s: peak %s%.1f dB re 1 uPa at %.0f m; of %g kg%s %.1f dB is expected in high order, %.1f "
                  "dB in low",
                  charge_order_text(is.order), state->clipped ? "at least " : "", state->peak_db,
                  state->range_m, state->charge_kg, with, is.high_db, is.low_db);
    why_add_cause(&why, state->impulse_id);
    why_add_cause(&why, state->id);
    watch_say_finding(watch, "order of the charge", "indicative", &why);
}

const struct condition condition_charge = {.take_note = take_note,
                                           .take_impulse = take_impulse,
                                           .enter_phase = enter_phase,
                                           .due_ns = due_ns,
                                           .settle = settle};
