/* How the soft start rises: first energy, steps, stages, bursts; and whether what is heard rises at all. */
#include "base/median.h"
#include "base/time.h"
#include "rule/condition.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

/* Levels of single impulses scatter by a few decibels (common practice, no source): steps and rises are
 * looked for in medians, and must be this clear. */
/* 'About equal': the longest stage is at most twice the shortest (own choice). */
#define EQUAL_RATIO 2
#define CLEAR_DB 1.5

static void say(struct watch *watch, const char *code, const char *format, double is, double allowed)
{
    struct why why;
    char text[FLOW_TEXT_SIZE];
    snprintf(text, sizeof text, format, is, allowed);
    why_reset(&why, watch->permit->soft_start.clause, "%s", text);
    why_add_cause(&why, watch->recent.causes[0]);
    why_add_cause(&why, watch->phase_id);
    watch_say_finding(watch, code, "firm", &why);
}

static double median_from(const struct rise *rise, uint32_t first, uint32_t n)
{
    double copy[RISE_LEVELS];
    for (uint32_t i = 0; i < n; i++)
        copy[i] = rise->level_db[(first + i) % RISE_LEVELS];
    return median_of(copy, n);
}

/* A stage is over. */
static void end_stage(struct watch *watch)
{
    struct rise *rise = &watch->rise;
    int64_t lasted_ns = watch->now_ns - rise->stage_ns;
    rise->stage_ns = watch->now_ns;
    if (rise->n_stages == 0)
        return;
    rise->shortest_ns = rise->n_stages == 1 || lasted_ns < rise->shortest_ns ? lasted_ns : rise->shortest_ns;
    rise->longest_ns = rise->n_stages == 1 || lasted_ns > rise->longest_ns ? lasted_ns : rise->longest_ns;
}

/* One number that the crew enters: energy in kilojoules, or active elements. */
static void take_stage(struct watch *watch, double number, double planned)
{
    const struct permit_soft_start *rule = &watch->permit->soft_start;
    struct rise *rise = &watch->rise;
    if (isnan(number) || number == rise->number)
        return;
    if (rise->n_stages == 0 && planned > 0 && 100 * number / planned > rule->first_energy_percent)
        say(watch, "soft start too strong at first", "%.0f %% of the planned energy at first; at most %g %%",
            100 * number / planned, rule->first_energy_percent);
    if (rise->n_stages > 0 && rule->step == STEP_DOUBLING && number > 2 * rise->number)
        say(watch, "step too large", "%g active elements after %g; at most twice as many", number,
            rise->number);
    end_stage(watch);
    rise->n_stages++;
    rise->number = number;
}

static void take_note(struct watch *watch, const struct note *note)
{
    struct rise *rise = &watch->rise;
    if (note->kind == NOTE_JOB && strcmp(note->answer, "open") == 0)
        rise->planned_kj = note->energy_kj;
    if (note->kind != NOTE_SOURCE || strcmp(note->source_state, "soft start") != 0)
        return;
    if (!rise->on)
        *rise = (struct rise){.on = true, .planned_kj = rise->planned_kj, .number = NAN, .last_ns = -1};
    take_stage(watch, note->energy_kj, rise->planned_kj);
    take_stage(watch, note->elements, NAN);
}

/* By sound: the median of the last few against that of the few before. */
static void look_at_step(struct watch *watch)
{
    const struct permit_soft_start *rule = &watch->permit->soft_start;
    struct rise *rise = &watch->rise;
    const uint32_t few = RISE_LEVELS / 2;
    if (rule->step != STEP_LEVEL || rise->n_levels < RISE_LEVELS || rise->said_step)
        return;
    uint32_t oldest = rise->n_levels % RISE_LEVELS;
    double step_db = median_from(rise, oldest + few, few) - median_from(rise, oldest, few);
    if (step_db <= rule->largest_step_db + CLEAR_DB)
        return;
    rise->said_step = true;
    struct why why;
    why_reset(&why, rule->clause, "the level rises by %.1f dB from some impulses to the next; at most %g",
              step_db, rule->largest_step_db);
    why_add_cause(&why, watch->source.impulse_id);
    watch_say_finding(watch, "step too large", "indicative", &why);
}

static void take_impulse(struct watch *watch, const struct event *event)
{
    const struct impulse *impulse = &event->as.impulse;
    struct rise *rise = &watch->rise;
    if (!rise->on || watch->phase != PHASE_SOFT_START)
        return;
    if (rise->last_ns >= 0 &&
        time_to_s(impulse->time_ns - rise->last_ns) >= 0.8 * watch->permit->soft_start.pause_s)
        rise->n_bursts++;
    rise->last_ns = impulse->time_ns;
    if (!isfinite(impulse->sel_db))
        return;
    if (rise->n_first < RISE_LEVELS)
        rise->first_db[rise->n_first++] = impulse->sel_db;
    rise->level_db[rise->n_levels++ % RISE_LEVELS] = impulse->sel_db;
    look_at_step(watch);
}

/* The soft start is over: did it do what it is for? */
static void judge(struct watch *watch)
{
    const struct permit_soft_start *rule = &watch->permit->soft_start;
    struct rise *rise = &watch->rise;
    if (rise->n_stages > 0 && rise->n_stages < rule->least_stages)
        say(watch, "soft start with too few stages", "%g stages; at least %g", rise->n_stages,
            rule->least_stages);
    end_stage(watch);
    if (rule->equal_stages && rise->n_stages > 1 && rise->longest_ns > EQUAL_RATIO * rise->shortest_ns)
        say(watch, "stages not of equal length", "the longest stage lasted %.1f min, the shortest %.1f",
            time_to_s(rise->longest_ns) / 60, time_to_s(rise->shortest_ns) / 60);
    if (rule->bursts > 0 && rise->last_ns >= 0 && rise->n_bursts + 1 < rule->bursts)
        say(watch, "soft start with too few bursts", "%g bursts are heard; at least %g", rise->n_bursts + 1,
            rule->bursts);
    if (rise->n_levels < 2 * RISE_LEVELS || rule->bursts > 0)
        return;
    double copy[RISE_LEVELS];
    memcpy(copy, rise->first_db, sizeof copy);
    double first = median_of(copy, RISE_LEVELS);
    double last = median_from(rise, rise->n_levels % RISE_LEVELS, RISE_LEVELS);
    if (last - first >= CLEAR_DB)
        return;
    struct why why;
    why_reset(&why, rule->clause,
              "the level did not rise in the soft start: %.1f dB at first, %.1f dB at its end", first, last);
    why_add_cause(&why, watch->source.impulse_id);
    why_add_cause(&why, watch->phase_id);
    watch_say_finding(watch, "energy not rising", "indicative", &why);
}

static void enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    (void)from;
    if (watch->rise.on && to == PHASE_FULL_POWER)
        judge(watch);
    if (to == PHASE_FULL_POWER || !source_sounds(to))
        watch->rise.on = watch->rise.on && to == PHASE_BREAK;
}

const struct condition condition_soft_start = {
    .take_note = take_note, .take_impulse = take_impulse, .enter_phase = enter_phase};
