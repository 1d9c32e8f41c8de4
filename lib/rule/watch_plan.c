/* The plan: when the next start is meant to be, what must be done by when, and what a delay costs. */
#include "base/time.h"
#include "rule/watch_inner.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

void plan_take(struct watch *watch, const struct note *note)
{
    if (note->planned_ns < watch->now_ns) {
        note_without_effect(watch, "a start cannot be planned for a time that is over");
        return;
    }
    watch->plan.planned_ns = note->planned_ns;
    memcpy(watch->plan.id, watch->recent.causes[0], sizeof watch->plan.id);
}

static struct watch_plan_step *add(struct watch_plan *plan, const char *name, int64_t latest_ns)
{
    struct watch_plan_step *step =
        &plan->steps[plan->n_steps < PLAN_MAX_STEPS ? plan->n_steps++ : plan->n_steps - 1];
    *step = (struct watch_plan_step){.earliest_ns = -1, .latest_ns = latest_ns};
    snprintf(step->name, sizeof step->name, "%s", name);
    return step;
}

static void add_pre_watch(const struct watch *watch, struct watch_plan *plan)
{
    int64_t left = effort_needed_ns(watch) - watch->effort.credit_ns;
    struct watch_plan_step *step = add(plan, "pre-watch begins", plan->planned_ns - (left > 0 ? left : 0));
    step->done = left <= 0 || watch->effort.accruing;
    snprintf(step->text, sizeof step->text, "%.4g min are left of %g", left > 0 ? time_to_s(left) / 60 : 0,
             effort_pre_watch(watch)->minutes);
}

static void add_deterrent(const struct watch *watch, struct watch_plan *plan)
{
    const struct permit_deterrent *rule = &watch->permit->deterrent;
    const struct deterrent *deterrent = &watch->deterrent;
    if (!rule->stated)
        return;
    bool on = deterrent->on_ns >= 0 && deterrent->off_ns < 0;
    struct watch_plan_step *step =
        add(plan, "deterrent on", plan->planned_ns - time_from_minutes(rule->least_minutes));
    step->done = on || (deterrent->off_ns >= 0 &&
                        deterrent->off_ns - deterrent->on_ns >= time_from_minutes(rule->least_minutes) &&
                        plan->planned_ns <= deterrent->off_ns + time_from_minutes(rule->gap_minutes));
    if (rule->longest_minutes < 1e6)
        step->earliest_ns = plan->planned_ns - time_from_minutes(rule->longest_minutes);
    if (deterrent->off_ns >= 0 && !step->done &&
        deterrent->off_ns + time_from_minutes(rule->again_minutes) > step->earliest_ns)
        step->earliest_ns = deterrent->off_ns + time_from_minutes(rule->again_minutes);
    snprintf(step->text, sizeof step->text, "for at least %g min", rule->least_minutes);
}

static void add_quieting(const struct watch *watch, struct watch_plan *plan)
{
    if (watch->permit->quieting.stated)
        add(plan, "quieting on", plan->planned_ns)->done = watch->quieting.on;
}

static void add_light(const struct watch *watch, struct watch_plan *plan)
{
    const struct permit_start *rule = &watch->permit->start;
    enum light now = surroundings_light(&watch->surroundings);
    int64_t change_ns = surroundings_light_change_ns(&watch->surroundings);
    if (!rule->stated || rule->dark == DARK_START_ALLOWED || now == LIGHT_UNKNOWN)
        return;
    if (now == LIGHT_DAY) {
        struct watch_plan_step *step = add(plan, "day ends", change_ns == INT64_MAX ? -1 : change_ns);
        step->fact = true;
        step->late = change_ns < plan->planned_ns;
    } else {
        struct watch_plan_step *step = add(plan, "day begins", change_ns == INT64_MAX ? -1 : change_ns);
        step->fact = true;
        step->late = rule->dark == DARK_START_NEVER && change_ns > plan->planned_ns;
    }
}

/* Who will have been on watch too long by then. */
static void add_people(const struct watch *watch, struct watch_plan *plan)
{
    for (uint32_t i = 0; i < watch->staff.n && plan->n_steps < PLAN_MAX_STEPS; i++) {
        const struct shift *shift = &watch->staff.all[i];
        int64_t longest = time_from_minutes(watch->permit->staff.longest_hours * 60);
        char name[NOTE_NAME_SIZE];
        if (shift->on_ns < 0 || longest > INT64_MAX / 8)
            continue;
        snprintf(name, sizeof name, "watch of %.40s ends", shift->name);
        struct watch_plan_step *step = add(plan, name, shift->on_ns - shift->stretch_ns + longest);
        step->fact = true;
        step->late = step->latest_ns < plan->planned_ns;
    }
}

void plan_get(const struct watch *watch, struct watch_plan *out)
{
    memset(out, 0, sizeof *out);
    out->planned_ns = watch->plan.planned_ns;
    out->earliest_ns = source_sounds(watch->phase) ? -1 : advice_earliest_start_ns(watch);
    if (out->planned_ns < watch->now_ns || source_sounds(watch->phase)) {
        out->planned_ns = -1;
        return;
    }
    add_pre_watch(watch, out);
    add_deterrent(watch, out);
    add_quieting(watch, out);
    add_light(watch, out);
    add_people(watch, out);
    for (uint32_t i = 0; i < out->n_steps; i++)
        if (!out->steps[i].fact)
            out->steps[i].late = !out->steps[i].done && out->steps[i].latest_ns < watch->now_ns;
    out->slips_ns = out->earliest_ns > out->planned_ns ? out->earliest_ns - out->planned_ns : 0;
}
