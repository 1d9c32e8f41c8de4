/* Working on while the acoustic watch cannot hear: so long for looking into it, then while the conditions of
 * the permit hold, then not at all. A start without ears is what the pre-watch forbids. */
#include "base/time.h"
#include "rule/condition.h"
#include <math.h>
#include <stdio.h>

#define DAY_NS (24 * 3600 * TIME_NS_PER_S)

/* Since when nobody has listened: nothing is heard, or no acoustic observer is on watch. -1: somebody does.
 */
static int64_t since_ns(const struct watch *watch)
{
    return watch->outage.since_ns;
}

/* Of the last 24 h, this outage included. */
static int64_t in_a_day_ns(const struct watch *watch)
{
    int64_t day_ns = watch->now_ns - DAY_NS, before_ns = spans_since_ns(&watch->outage.past, day_ns);
    if (since_ns(watch) < 0)
        return before_ns;
    return before_ns + watch->now_ns - (since_ns(watch) > day_ns ? since_ns(watch) : day_ns);
}

/* What forbids going on beyond the first minutes; NULL: nothing. */
static const char *forbids(const struct watch *watch)
{
    const struct permit_outage *rule = &watch->permit->outage;
    const struct surroundings *now = &watch->surroundings;
    if (rule->daylight && surroundings_light(now) != LIGHT_DAY)
        return "it is not known to be day";
    if (isfinite(rule->most_sea_state) && !(now->sea_state <= rule->most_sea_state))
        return "the sea is not known to be calm enough";
    if (!effort_kept_as(watch, "visual"))
        return "no visual watch is kept";
    if (rule->quiet_minutes > 0 && watch->outage.heard_ns >= 0 &&
        since_ns(watch) - watch->outage.heard_ns < time_from_minutes(rule->quiet_minutes))
        return "an animal was only heard shortly before";
    return NULL;
}

static enum permit_action asks(const struct watch *watch, struct why *why)
{
    const struct permit_outage *rule = &watch->permit->outage;
    if (!rule->stated || since_ns(watch) < 0)
        return ACTION_LOG;
    int64_t lasted = watch->now_ns - since_ns(watch);
    const char *reason = forbids(watch);
    if (in_a_day_ns(watch) > time_from_minutes(rule->day_minutes))
        why_reset(why, rule->clause, "the acoustic watch has not heard for more than %g min in 24 h",
                  rule->day_minutes);
    else if (lasted <= time_from_minutes(rule->diagnose_minutes))
        return ACTION_LOG;
    else if (reason)
        why_reset(why, rule->clause, "the acoustic watch has not heard for more than %g min, and %s",
                  rule->diagnose_minutes, reason);
    else if (lasted > time_from_minutes(rule->diagnose_minutes + rule->extra_minutes))
        why_reset(why, rule->clause, "the acoustic watch has not heard for more than %g min",
                  rule->diagnose_minutes + rule->extra_minutes);
    else
        return ACTION_LOG;
    why_add_cause(why, watch->effort.deaf_id);
    return ACTION_STOP;
}

static int64_t due_ns(const struct watch *watch)
{
    const struct permit_outage *rule = &watch->permit->outage;
    if (!rule->stated || since_ns(watch) < 0)
        return INT64_MAX;
    int64_t due = INT64_MAX, left = time_from_minutes(rule->day_minutes) - in_a_day_ns(watch);
    const int64_t times[] = {
        since_ns(watch) + time_from_minutes(rule->diagnose_minutes) + TIME_NS_PER_US,
        since_ns(watch) + time_from_minutes(rule->diagnose_minutes + rule->extra_minutes) + TIME_NS_PER_US,
        watch->now_ns + left + TIME_NS_PER_US, surroundings_light_change_ns(&watch->surroundings)};
    for (size_t i = 0; i < sizeof times / sizeof times[0]; i++)
        if (times[i] > watch->now_ns && times[i] < due)
            due = times[i];
    return due;
}

/* Outages count whether or not the permit bounds them: another may hold from tomorrow on. */
static void settle(struct watch *watch)
{
    struct outage_state *state = &watch->outage;
    bool out = source_sounds(watch->phase) && (effort_deaf(watch) || !effort_kept_as(watch, "acoustic"));
    if (out && state->since_ns < 0)
        state->since_ns = watch->now_ns;
    if (!out && state->since_ns >= 0) {
        spans_forget_before(&state->past, watch->now_ns - DAY_NS);
        spans_add(&state->past, state->since_ns, watch->now_ns);
        state->since_ns = -1;
    }
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        const struct contact *contact = &watch->contacts.all[i];
        if (contact->grade == GRADE_ACT && !contact->seen && contact->n_calls > 0 &&
            contact->last_ns > state->heard_ns)
            state->heard_ns = contact->last_ns;
    }
}

static bool show(const struct watch *watch, struct watch_timer *timer)
{
    const struct permit_outage *rule = &watch->permit->outage;
    if (!rule->stated || since_ns(watch) < 0)
        return false;
    *timer = (struct watch_timer){
        .elapsed_ns = watch->now_ns - since_ns(watch),
        .needed_ns = time_from_minutes(rule->diagnose_minutes + (forbids(watch) ? 0 : rule->extra_minutes)),
        .running = true};
    snprintf(timer->name, sizeof timer->name, "acoustic outage");
    return true;
}

const struct condition condition_outage = {.asks = asks, .due_ns = due_ns, .settle = settle, .show = show};
