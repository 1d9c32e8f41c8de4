/* The phases: one table of what each trigger leads to, and the reasons for each change. */
#include "base/time.h"
#include "rule/watch_inner.h"
#include <stdio.h>
#include <string.h>

/* Where a trigger leads: a phase, or one of these, which the state of the watch resolves. */
enum target {
    STAY = PHASE_COUNT,
    TO_SAID,    /* the phase that the crew entered */
    TO_QUIET,   /* shutdown where an order of a contact is in force, as before where the start was not
                   allowed, else break */
    TO_SILENT,  /* the same, but no break where the silence has been too long for one already */
    TO_RESUMED, /* what the source did before the break */
    TO_BEFORE,  /* off, pre-watch, delay or ready: what the pre-watch and the contacts allow */
    TO_POST = PHASE_POST_WATCH,
    TO_OFF = PHASE_OFF,
    TO_SOFT = PHASE_SOFT_START,
    TO_DELAY = PHASE_DELAY
};

#define BEFORE_SOUND                                                                                         \
    {                                                                                                        \
        [TRIGGER_SAID_SOUND] = TO_SAID, [TRIGGER_SAID_STOPPED] = STAY, [TRIGGER_SAID_OFF] = STAY,            \
        [TRIGGER_HEARD] = TO_SOFT, [TRIGGER_SILENT] = STAY, [TRIGGER_BREAK_OVER] = STAY,                     \
        [TRIGGER_HELD] = STAY, [TRIGGER_FREE] = STAY, [TRIGGER_ALONE] = STAY, [TRIGGER_WATCH] = TO_BEFORE    \
    }
#define IMPULSIVE                                                                                            \
    {                                                                                                        \
        [TRIGGER_SAID_SOUND] = TO_SAID, [TRIGGER_SAID_STOPPED] = TO_QUIET, [TRIGGER_SAID_OFF] = TO_POST,     \
        [TRIGGER_HEARD] = STAY, [TRIGGER_SILENT] = TO_SILENT, [TRIGGER_BREAK_OVER] = STAY,                   \
        [TRIGGER_HELD] = STAY, [TRIGGER_FREE] = STAY, [TRIGGER_ALONE] = STAY, [TRIGGER_WATCH] = STAY         \
    }
/* Without impulses that could be missed: silence says nothing. */
#define STEADY                                                                                               \
    {                                                                                                        \
        [TRIGGER_SAID_SOUND] = TO_SAID, [TRIGGER_SAID_STOPPED] = TO_QUIET, [TRIGGER_SAID_OFF] = TO_POST,     \
        [TRIGGER_HEARD] = STAY, [TRIGGER_SILENT] = STAY, [TRIGGER_BREAK_OVER] = STAY, [TRIGGER_HELD] = STAY, \
        [TRIGGER_FREE] = STAY, [TRIGGER_ALONE] = STAY, [TRIGGER_WATCH] = STAY                                \
    }

static const unsigned char next[PHASE_COUNT][TRIGGER_COUNT] = {
    [PHASE_OFF] = BEFORE_SOUND,
    [PHASE_PRE_WATCH] = BEFORE_SOUND,
    [PHASE_READY] = BEFORE_SOUND,
    [PHASE_DELAY] = BEFORE_SOUND,
    [PHASE_DETERRENT] = BEFORE_SOUND,
    [PHASE_SOFT_START] = IMPULSIVE,
    [PHASE_HOLD] = IMPULSIVE,
    [PHASE_FULL_POWER] = IMPULSIVE,
    [PHASE_REDUCED] = IMPULSIVE,
    [PHASE_VIBRO] = STEADY,
    [PHASE_DRILLING] = STEADY,
    [PHASE_LINE_TURN] = STEADY,
    [PHASE_TEST] = STEADY,
    [PHASE_BREAK] = {[TRIGGER_SAID_SOUND] = TO_SAID,
                     [TRIGGER_SAID_STOPPED] = STAY,
                     [TRIGGER_SAID_OFF] = TO_POST,
                     [TRIGGER_HEARD] = TO_RESUMED,
                     [TRIGGER_SILENT] = STAY,
                     [TRIGGER_BREAK_OVER] = TO_BEFORE,
                     [TRIGGER_HELD] = TO_DELAY,
                     [TRIGGER_FREE] = STAY,
                     [TRIGGER_ALONE] = TO_OFF,
                     [TRIGGER_WATCH] = STAY},
    [PHASE_SHUTDOWN] = {[TRIGGER_SAID_SOUND] = TO_SAID,
                        [TRIGGER_SAID_STOPPED] = STAY,
                        [TRIGGER_SAID_OFF] = STAY, /* the contact still holds */
                        [TRIGGER_HEARD] = STAY,    /* a finding, and the stop stays in force */
                        [TRIGGER_SILENT] = STAY,
                        [TRIGGER_BREAK_OVER] = STAY,
                        [TRIGGER_HELD] = STAY,
                        [TRIGGER_FREE] = TO_BEFORE,
                        [TRIGGER_ALONE] = STAY,
                        [TRIGGER_WATCH] = STAY},
    [PHASE_POST_WATCH] = {[TRIGGER_SAID_SOUND] = TO_SAID,
                          [TRIGGER_SAID_STOPPED] = STAY,
                          [TRIGGER_SAID_OFF] = STAY,
                          [TRIGGER_HEARD] = TO_SOFT,
                          [TRIGGER_SILENT] = STAY,
                          [TRIGGER_BREAK_OVER] = TO_BEFORE,
                          [TRIGGER_HELD] = STAY,
                          [TRIGGER_FREE] = STAY,
                          [TRIGGER_ALONE] = TO_OFF,
                          [TRIGGER_WATCH] = STAY},
};

static enum phase before_sound(const struct watch *watch)
{
    if (!effort_anybody(watch) || (watch->phase == PHASE_OFF && !effort_kept(watch, NULL)))
        return PHASE_OFF;
    if (contact_holder(watch, false))
        return PHASE_DELAY;
    struct why why;
    int64_t until_ns;
    if (effort_complete(watch) && !conditions_hold(watch, 0, &why, &until_ns))
        return PHASE_READY;
    return watch->deterrent.on_ns >= 0 && watch->deterrent.off_ns < 0 ? PHASE_DETERRENT : PHASE_PRE_WATCH;
}

static bool order_in_force(const struct watch *watch)
{
    for (uint32_t i = 0; i < watch->contacts.n; i++)
        if (watch->contacts.all[i].holding && watch->contacts.all[i].order >= ACTION_HOLD)
            return true;
    return false;
}

static enum phase resolve(const struct watch *watch, unsigned target)
{
    switch (target) {
    case STAY:
        return watch->phase;
    case TO_SAID:
        return watch->source.said;
    case TO_QUIET:
        return order_in_force(watch)                  ? PHASE_SHUTDOWN
               : watch->source.unallowed > ACTION_LOG ? before_sound(watch)
                                                      : PHASE_BREAK;
    case TO_SILENT:
        return watch->now_ns + TIME_NS_PER_US >= source_break_over_ns(watch) && !order_in_force(watch)
                   ? before_sound(watch)
                   : resolve(watch, TO_QUIET);
    case TO_RESUMED:
        return watch->source.before_break;
    case TO_BEFORE:
        return before_sound(watch);
    default:
        return (enum phase)target;
    }
}

static void why_delay(const struct watch *watch, struct why *why)
{
    const struct contact *holder = contact_holder(watch, false);
    if (!holder)
        return;
    const struct permit_zone *zone = contact_zone(holder, watch->permit, watch->now_ns);
    char text[FLOW_TEXT_SIZE];
    contact_describe(holder, watch->permit, watch->now_ns, text);
    why_reset(why, zone ? zone->clause : "", "%s", text);
    if (!holder->where.known && zone)
        snprintf(why->clause, sizeof why->clause, "%.120s; %.120s", zone->clause,
                 watch->permit->unknown_clause);
    why_add_contact(why, holder);
}

static void why_ready(const struct watch *watch, struct why *why)
{
    char names[FLOW_TEXT_SIZE];
    effort_names(watch, names);
    if (*watch->let_go.text && (watch->phase == PHASE_DELAY || watch->phase == PHASE_SHUTDOWN))
        *why = watch->let_go;
    else if (watch->phase == PHASE_BREAK)
        why_reset(why, watch->permit->break_clause,
                  "the silence was too long for a break, and the watch kept through it stands for the "
                  "pre-watch: %.120s",
                  names);
    else
        why_reset(why, watch->permit->pre_watch_clause, "the pre-watch of %g min is complete: %.150s",
                  effort_pre_watch(watch)->minutes, names);
}

static void why_pre_watch(const struct watch *watch, struct why *why)
{
    const char *missing;
    char names[FLOW_TEXT_SIZE];
    int64_t until_ns;
    effort_names(watch, names);
    if (watch->phase == PHASE_OFF)
        why_reset(why, watch->permit->pre_watch_clause, "the watch is kept: %.200s", names);
    else if (watch->phase == PHASE_BREAK)
        why_reset(why, watch->permit->break_clause, "the source has been silent for %s %g min",
                  source_break(watch)->limit_included ? "more than" : "at least",
                  source_break(watch)->minutes);
    else if (watch->phase == PHASE_POST_WATCH)
        why_reset(why, watch->permit->pre_watch_clause, "the watch goes on after the work: %.200s", names);
    else if (effort_complete(watch) && conditions_hold(watch, 0, why, &until_ns))
        return;
    else if (watch->phase == PHASE_DETERRENT)
        why_reset(why, watch->permit->deterrent.clause, "the deterrent has ended, and the pre-watch goes on");
    else if (watch->phase == PHASE_READY && effort_kept(watch, &missing) &&
             watch->effort.credit_ns >= time_from_minutes(watch->permit->pre_watches[0].minutes))
        why_reset(why, watch->permit->pre_watch_clause, "so deep a pre-watch of %g min is needed",
                  effort_pre_watch(watch)->minutes);
    else if (watch->phase == PHASE_READY && effort_kept(watch, &missing))
        why_reset(why, watch->permit->pre_watch_clause,
                  "part of the pre-watch was not kept or not heard: it is no longer complete");
    else if (watch->phase == PHASE_READY)
        why_reset(why, watch->permit->pre_watch_clause, "%s", missing);
    else
        *why = watch->let_go;
}

static void make_reason(const struct watch *watch, enum phase to, struct why *why)
{
    *why = watch->recent;
    if (to == PHASE_DELAY)
        why_delay(watch, why);
    else if (to == PHASE_READY)
        why_ready(watch, why);
    else if (to == PHASE_DETERRENT)
        why_reset(why, watch->permit->deterrent.clause, "the deterrent works");
    else if (to == PHASE_PRE_WATCH)
        why_pre_watch(watch, why);
    else if (to == PHASE_OFF)
        why_reset(why, watch->permit->pre_watch_clause, "nobody keeps the watch");
    if (watch->recent.n_causes)
        why_add_cause(why, watch->recent.causes[0]);
    why_add_cause(why, watch->phase_id);
}

static const char *clause_of(const struct watch *watch, enum phase to)
{
    const struct contact *lead = contact_lead(watch, true);
    const struct permit_zone *zone = lead ? contact_zone(lead, watch->permit, watch->now_ns) : NULL;
    if (to == PHASE_SHUTDOWN && zone)
        return zone->clause;
    if (to == PHASE_BREAK || to == PHASE_POST_WATCH)
        return watch->permit->break_clause;
    return source_sounds(to) ? watch->permit->soft_start.clause : watch->permit->pre_watch_clause;
}

static void change(struct watch *watch, enum phase to, const struct why *given)
{
    struct why why;
    enum phase from = watch->phase;
    if (given)
        why = *given;
    else
        make_reason(watch, to, &why);
    if (!*why.clause)
        snprintf(why.clause, sizeof why.clause, "%s", clause_of(watch, to));
    if (to == PHASE_SHUTDOWN && contact_lead(watch, true))
        why_add_contact(&why, contact_lead(watch, true));
    watch_say_phase(watch, to, &why);
    /* The findings of a start look at the phase that it came from, and at the release. */
    source_enter_phase(watch, from, to);
    watch->phase = to;
    watch->phase_since_ns = watch->now_ns;
    watch->phase_why = why;
    if (to != PHASE_READY)
        watch->released_by[0] = watch->release_id[0] = '\0';
    effort_update(watch);
}

void phase_take(struct watch *watch, enum trigger trigger, const struct why *why)
{
    enum phase to = resolve(watch, next[watch->phase][trigger]);
    if (to != watch->phase)
        change(watch, to, why);
}

static bool held_in_break(const struct watch *watch)
{
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        const struct contact *contact = &watch->contacts.all[i];
        if (contact_wanted(watch, contact) >= ACTION_DELAY &&
            !contact_is_question(contact, watch->permit, watch->now_ns))
            return true;
    }
    return false;
}

static bool holds_now(const struct watch *watch, enum trigger trigger)
{
    bool in_break = watch->phase == PHASE_BREAK || watch->phase == PHASE_POST_WATCH;
    switch (trigger) {
    case TRIGGER_HELD:
        return watch->phase == PHASE_BREAK && held_in_break(watch);
    case TRIGGER_FREE:
        return watch->phase == PHASE_SHUTDOWN && !contact_holder(watch, true) && !order_in_force(watch);
    case TRIGGER_ALONE:
        return !effort_anybody(watch);
    case TRIGGER_BREAK_OVER:
        return in_break && watch->now_ns >= source_break_over_ns(watch);
    case TRIGGER_WATCH:
        return true;
    default:
        return false;
    }
}

void phase_settle(struct watch *watch)
{
    static const enum trigger order[] = {TRIGGER_ALONE, TRIGGER_HELD, TRIGGER_FREE, TRIGGER_BREAK_OVER,
                                         TRIGGER_WATCH};
    enum phase before;
    do {
        before = watch->phase;
        effort_update(watch);
        contact_present(watch);
        for (size_t i = 0; i < sizeof order / sizeof order[0] && watch->phase == before; i++)
            if (holds_now(watch, order[i]))
                phase_take(watch, order[i], NULL);
    } while (watch->phase != before);
}
