/* What makes a permit usable, said one problem at a time. */
#include "rule/permit.h"
#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#define LONGEST_MINUTES 1440.0

/* Counts problems and keeps the one that is wanted. */
struct search {
    uint32_t wanted, seen;
    char *out;
};

__attribute__((format(printf, 2, 3))) static void problem(struct search *search, const char *format, ...)
{
    if (search->seen++ != search->wanted)
        return;
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(search->out, PERMIT_TEXT_SIZE, format, arguments);
    va_end(arguments);
}

static void need_minutes(struct search *search, const char *name, double minutes)
{
    if (!(minutes > 0 && minutes <= LONGEST_MINUTES))
        problem(search, "%s is %g minutes; allowed: more than 0, at most %g", name, minutes, LONGEST_MINUTES);
}

static void need_text(struct search *search, const char *name, const char *text)
{
    if (!*text)
        problem(search, "%s is not stated", name);
}

static bool before_sound(enum phase phase)
{
    return phase == PHASE_OFF || phase == PHASE_PRE_WATCH || phase == PHASE_READY || phase == PHASE_DELAY ||
           phase == PHASE_DETERRENT || phase == PHASE_BREAK || phase == PHASE_SHUTDOWN ||
           phase == PHASE_POST_WATCH;
}

static void check_zone(struct search *search, const struct permit_zone *zone)
{
    need_text(search, "a zone's name", zone->name);
    if (!*zone->clause)
        problem(search, "zone '%.60s': its clause is not stated", zone->name);
    if (!(zone->radius_m > 0))
        problem(search, "zone '%.60s': radius is %g m; allowed: more than 0", zone->name, zone->radius_m);
    if ((unsigned)zone->origin > ORIGIN_VESSEL)
        problem(search, "zone '%.60s' has no origin", zone->name);
    if (zone->groups == 0 || (zone->groups & ~PERMIT_ALL_GROUPS) != 0)
        problem(search, "zone '%.60s' names no known group", zone->name);
    if ((zone->found & (PERMIT_SEEN | PERMIT_HEARD)) == 0)
        problem(search, "zone '%.60s' counts neither what is seen nor what is heard", zone->name);
    if (zone->n_species > 0 && zone->species_unknown == SPECIES_NOT_STATED)
        problem(search, "zone '%.60s' names species and does not say what one unknown means", zone->name);
    bool acts = false;
    for (unsigned i = 0; i < PHASE_COUNT; i++) {
        enum permit_action action = zone->action[i];
        acts = acts || action != ACTION_LOG;
        bool fits = before_sound((enum phase)i) ? action <= ACTION_DELAY : action != ACTION_DELAY;
        if ((unsigned)action > ACTION_STOP || !fits)
            problem(search, "zone '%.60s': the action in phase %s cannot be '%s'", zone->name,
                    phase_text((enum phase)i), permit_action_text(action));
    }
    if (!acts)
        problem(search, "zone '%.60s' asks for nothing in any phase", zone->name);
}

static void check_clearances(struct search *search, const struct permit *permit, uint32_t zone_groups)
{
    uint32_t covered = 0;
    for (uint32_t i = 0; i < permit->n_clearances && i < PERMIT_MAX_CLEARANCES; i++) {
        const struct permit_clearance *clearance = &permit->clearances[i];
        need_minutes(search, "a clearance time", clearance->minutes);
        need_text(search, "the clause of a clearance time", clearance->clause);
        for (unsigned g = 0; g < GROUP_COUNT; g++)
            if (covered & clearance->groups & PERMIT_GROUP_BIT(g))
                problem(search, "group %s has two clearance times", group_text((enum group)g));
        covered |= clearance->groups;
    }
    for (unsigned g = 0; g < GROUP_COUNT; g++)
        if (zone_groups & ~covered & PERMIT_GROUP_BIT(g))
            problem(search, "group %s is in a zone and has no clearance time", group_text((enum group)g));
}

static void check_zones(struct search *search, const struct permit *permit)
{
    if (permit->n_zones == 0 || permit->n_zones > PERMIT_MAX_ZONES)
        problem(search, "there are %u zones; allowed: 1 to %d", permit->n_zones, PERMIT_MAX_ZONES);
    if (permit->n_clearances == 0 || permit->n_clearances > PERMIT_MAX_CLEARANCES)
        problem(search, "there are %u clearance times; allowed: 1 to %d", permit->n_clearances,
                PERMIT_MAX_CLEARANCES);
    uint32_t zone_groups = 0;
    for (uint32_t i = 0; i < permit->n_zones && i < PERMIT_MAX_ZONES; i++) {
        check_zone(search, &permit->zones[i]);
        zone_groups |= permit->zones[i].groups;
    }
    check_clearances(search, permit, zone_groups);
    for (unsigned g = 0; g < GROUP_COUNT; g++)
        if (permit->unknown[g] == UNKNOWN_NOT_STATED || (unsigned)permit->unknown[g] > UNKNOWN_IGNORE)
            problem(search,
                    "group %s: what a call of unknown distance means is not stated; there is no default",
                    group_text((enum group)g));
}

static void check_pre_watches(struct search *search, const struct permit *permit)
{
    uint32_t n = permit->n_pre_watches;
    if (n == 0 || n > PERMIT_MAX_PRE_WATCHES)
        problem(search, "there are %u pre-watches; allowed: 1 to %d", n, PERMIT_MAX_PRE_WATCHES);
    for (uint32_t i = 0; i < n && i < PERMIT_MAX_PRE_WATCHES; i++) {
        const struct permit_pre_watch *row = &permit->pre_watches[i];
        need_minutes(search, "the pre-watch", row->minutes);
        if (!row->visual && !row->acoustic)
            problem(search,
                    "the pre-watch needs neither a visual nor an acoustic watch, so anybody could end it");
        if (i > 0 && !(row->deeper_than_m > permit->pre_watches[i - 1].deeper_than_m))
            problem(search, "the pre-watch for more than %g m of depth does not follow a shallower one",
                    row->deeper_than_m);
    }
    if (!(permit->pre_watch_hole_minutes >= 0))
        problem(search, "a hole in the watch of %g minutes; allowed: at least 0",
                permit->pre_watch_hole_minutes);
}

static void check_soft_start(struct search *search, const struct permit_soft_start *soft)
{
    double least = soft->least_minutes, longest = soft->longest_minutes;
    if (!(least >= 0 && least <= LONGEST_MINUTES))
        problem(search, "the soft start's least time is %g minutes; allowed: 0 to %g", least,
                LONGEST_MINUTES);
    if (!(longest >= least && longest > 0))
        problem(search, "the soft start's longest time is %g minutes; allowed: at least the least time",
                longest);
    if (!(soft->longest_to_line_minutes >= least))
        problem(search,
                "from the soft start to the line's begin at most %g minutes; allowed: at least its "
                "least time",
                soft->longest_to_line_minutes);
    if (soft->step == STEP_LEVEL && !(soft->largest_step_db > 0))
        problem(search, "the soft start's largest step is %g dB; allowed: more than 0",
                soft->largest_step_db);
    if (soft->bursts > 0 && !(soft->burst_s > 0 && soft->pause_s > 0))
        problem(search, "bursts of %g s with pauses of %g s; allowed: more than 0", soft->burst_s,
                soft->pause_s);
}

static void check_breaks(struct search *search, const struct permit *permit)
{
    uint32_t n = permit->n_breaks;
    if (n == 0 || n > PERMIT_MAX_BREAKS)
        problem(search, "there are %u breaks; allowed: 1 to %d", n, PERMIT_MAX_BREAKS);
    for (uint32_t i = 0; i < n && i < PERMIT_MAX_BREAKS; i++) {
        need_minutes(search, "the break", permit->breaks[i].minutes);
        if (i > 0 && !(permit->breaks[i].minutes > permit->breaks[i - 1].minutes))
            problem(search, "the break of %g minutes does not follow a shorter one",
                    permit->breaks[i].minutes);
    }
    if (n > 0 && permit->breaks[0].daylight)
        problem(search, "the shortest break is for the day only: nothing is said of the dark");
}

static void check_deterrent(struct search *search, const struct permit_deterrent *deterrent)
{
    if (!deterrent->stated)
        return;
    if (!(deterrent->least_minutes >= 0 && deterrent->least_minutes <= LONGEST_MINUTES))
        problem(search, "the deterrent's least time is %g minutes; allowed: 0 to %g",
                deterrent->least_minutes, LONGEST_MINUTES);
    if (!(deterrent->longest_minutes >= deterrent->least_minutes && deterrent->longest_minutes > 0))
        problem(search, "the deterrent's longest time is %g minutes; allowed: at least the least time",
                deterrent->longest_minutes);
}

static void check_between(struct search *search, const struct permit *permit)
{
    const struct permit_start *start = &permit->start;
    if (permit->turn.stated && !(permit->turn.step_up_minutes <= permit->turn.longest_minutes))
        problem(search, "a line turn steps up within its last %g of at most %g minutes",
                permit->turn.step_up_minutes, permit->turn.longest_minutes);
    if (start->good_watch_minutes > 0 && !(start->good_watch_within_hours * 60 >= start->good_watch_minutes))
        problem(search, "%g minutes of good watch cannot lie within %g hours", start->good_watch_minutes,
                start->good_watch_within_hours);
    if ((start->closed_from == 0) != (start->closed_to == 0))
        problem(search, "the closed season lacks its first or its last day");
    if (permit->outage.stated && !(permit->outage.day_minutes >= permit->outage.diagnose_minutes))
        problem(search, "an outage may last %g minutes a day and be looked into for %g",
                permit->outage.day_minutes, permit->outage.diagnose_minutes);
    if (permit->override.leaves != ACTION_LOG && permit->override.leaves != ACTION_REDUCE)
        problem(search, "an override leaves '%s'; allowed: log, reduce",
                permit_action_text(permit->override.leaves));
    if (!(permit->staff.longest_hours > 0 && permit->staff.day_hours > 0 && permit->staff.rest_hours >= 0))
        problem(search, "watch hours of %g at a stretch and %g a day; allowed: more than 0",
                permit->staff.longest_hours, permit->staff.day_hours);
}

static void check_decisions(struct search *search, const struct permit *permit)
{
    if (!(permit->confirm_countdown_s >= 0 && permit->confirm_countdown_s <= 600))
        problem(search, "the observer's countdown is %g s; allowed: 0 to 600", permit->confirm_countdown_s);
    if (!(permit->p_inside_prepare > 0 && permit->p_inside_prepare <= permit->p_inside_act &&
          permit->p_inside_act <= 1))
        problem(search, "P(inside) of %g to prepare and %g to act; allowed: 0 < prepare <= act <= 1",
                permit->p_inside_prepare, permit->p_inside_act);
    if (!(permit->post_watch_minutes >= 0 && permit->post_watch_minutes <= LONGEST_MINUTES))
        problem(search, "a watch of %g minutes after the work; allowed: 0 to %g", permit->post_watch_minutes,
                LONGEST_MINUTES);
}

static void check_values(struct search *search, const struct permit *permit)
{
    if (permit->n_values > PERMIT_MAX_VALUES)
        problem(search, "there are %u values; allowed: at most %d", permit->n_values, PERMIT_MAX_VALUES);
    for (uint32_t i = 0; i < permit->n_values && i < PERMIT_MAX_VALUES; i++) {
        const struct permit_value *value = &permit->values[i];
        if (value->mark == MARK_MEMORY_LOW)
            problem(search, "%.60s rests on a low-confidence memory: the site has to fill it in", value->key);
        if (value->mark == MARK_TO_BE_FILLED)
            problem(search, "%.60s is left to the site, which has not stated it", value->key);
        if (value->mark == MARK_INVENTED && !permit->demonstration)
            problem(search, "%.60s is invented: only a demonstration permit may hold it", value->key);
        if (!*value->source)
            problem(search, "%.60s: its source is not stated", value->key);
    }
}

enum status permit_check(const struct permit *permit, uint32_t n, char out_problem[PERMIT_TEXT_SIZE])
{
    struct search search = {.wanted = n, .out = out_problem};
    need_text(&search, "the permit's id", permit->id);
    need_text(&search, "the permit's title", permit->title);
    need_text(&search, "the permit's document", permit->document);
    need_text(&search, "the clause of the pre-watch", permit->pre_watch_clause);
    need_text(&search, "the clause on unknown distance", permit->unknown_clause);
    need_text(&search, "the clause of the soft start", permit->soft_start.clause);
    need_text(&search, "the clause on breaks", permit->break_clause);
    check_pre_watches(&search, permit);
    check_soft_start(&search, &permit->soft_start);
    check_breaks(&search, permit);
    check_deterrent(&search, &permit->deterrent);
    check_between(&search, permit);
    check_decisions(&search, permit);
    check_zones(&search, permit);
    check_values(&search, permit);
    return search.seen > n ? STATUS_OUT_OF_RANGE : STATUS_OK;
}
