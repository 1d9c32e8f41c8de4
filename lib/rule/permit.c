/* What makes a permit usable, said one problem at a time, and the words of permits. */
#include "rule/permit.h"
#include <math.h>
#include <stdarg.h>
#include <stdio.h>

#define LONGEST_MINUTES 1440.0

static const char *const action_words[] = {
    [ACTION_LOG] = "log",   [ACTION_PREPARE] = "prepare", [ACTION_DELAY] = "delay",
    [ACTION_HOLD] = "hold", [ACTION_REDUCE] = "reduce",   [ACTION_STOP] = "stop",
};
static const char *const activity_words[] = {
    [ACTIVITY_PILING] = "piling", [ACTIVITY_SEISMIC] = "seismic", [ACTIVITY_EXPLOSIVES] = "explosives"};
static const char *const origin_words[] = {
    [ORIGIN_PILE] = "pile",
    [ORIGIN_ARRAY_CENTRE] = "array centre",
    [ORIGIN_ARRAY_EDGE] = "array edge",
    [ORIGIN_CHARGE] = "charge",
    [ORIGIN_VESSEL] = "vessel",
};
static const char *const unknown_words[] = {
    [UNKNOWN_NOT_STATED] = "not stated",
    [UNKNOWN_INSIDE] = "inside",
    [UNKNOWN_ASK_OBSERVER] = "ask observer",
    [UNKNOWN_IGNORE] = "ignore",
};

static const char *const worth_words[] = {
    [BREAK_WATCH_NOTHING] = "nothing",
    [BREAK_WATCH_COUNTS] = "counts",
    [BREAK_WATCH_STANDS] = "stands",
};

#define WORD_OF(table, value)                                                                                \
    ((size_t)(value) < sizeof(table) / sizeof((table)[0]) ? (table)[(size_t)(value)] : "unknown")

const char *permit_action_text(enum permit_action action)
{
    return WORD_OF(action_words, action);
}

const char *permit_mark_text(enum value_mark mark)
{
    return mark_text(mark);
}

const char *permit_activity_text(enum permit_activity activity)
{
    return WORD_OF(activity_words, activity);
}

const char *permit_origin_text(enum zone_origin origin)
{
    return WORD_OF(origin_words, origin);
}

const char *permit_unknown_text(enum unknown_policy policy)
{
    return WORD_OF(unknown_words, policy);
}

const char *permit_break_watch_text(enum break_watch worth)
{
    return WORD_OF(worth_words, worth);
}

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

static void check_timers(struct search *search, const struct permit *permit)
{
    need_minutes(search, "the pre-watch", permit->pre_watch_minutes);
    if (!permit->pre_watch_visual && !permit->pre_watch_acoustic)
        problem(search,
                "the pre-watch needs neither a visual nor an acoustic watch, so anybody could end it");
    double min = permit->soft_start_min_minutes, max = permit->soft_start_max_minutes;
    if (!(min >= 0 && min <= LONGEST_MINUTES))
        problem(search, "the soft start's least time is %g minutes; allowed: 0 to %g", min, LONGEST_MINUTES);
    if (!(max >= min && max > 0))
        problem(search, "the soft start's longest time is %g minutes; allowed: at least the least time", max);
    need_minutes(search, "the break", permit->break_minutes);
    if (!(permit->pre_watch_hole_minutes >= 0))
        problem(search, "a hole in the watch of %g minutes; allowed: at least 0",
                permit->pre_watch_hole_minutes);
    if (!(permit->confirm_countdown_s >= 0 && permit->confirm_countdown_s <= 600))
        problem(search, "the observer's countdown is %g s; allowed: 0 to 600", permit->confirm_countdown_s);
    if (!(permit->p_inside_prepare > 0 && permit->p_inside_prepare <= permit->p_inside_act &&
          permit->p_inside_act <= 1))
        problem(search, "P(inside) of %g to prepare and %g to act; allowed: 0 < prepare <= act <= 1",
                permit->p_inside_prepare, permit->p_inside_act);
}

static void check_values(struct search *search, const struct permit *permit)
{
    if (permit->n_values > PERMIT_MAX_VALUES)
        problem(search, "there are %u values; allowed: at most %d", permit->n_values, PERMIT_MAX_VALUES);
    for (uint32_t i = 0; i < permit->n_values && i < PERMIT_MAX_VALUES; i++) {
        const struct permit_value *value = &permit->values[i];
        if (value->mark == MARK_MEMORY_LOW)
            problem(search, "%.60s rests on a low-confidence memory: the site has to fill it in", value->key);
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
    need_text(&search, "the clause of the soft start", permit->soft_start_clause);
    need_text(&search, "the clause on breaks", permit->break_clause);
    check_timers(&search, permit);
    check_zones(&search, permit);
    check_values(&search, permit);
    return search.seen > n ? STATUS_OUT_OF_RANGE : STATUS_OK;
}
