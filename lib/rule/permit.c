/* The words of permits, and which row of a table holds. */
#include "rule/permit.h"
#include <math.h>
#include <stddef.h>
#include <stdio.h>

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

void permit_set_edge(struct permit *permit, double half_length_m)
{
    for (uint32_t i = 0; i < permit->n_zones && i < PERMIT_MAX_ZONES; i++)
        permit->zones[i].edge_m = permit->zones[i].origin == ORIGIN_ARRAY_EDGE ? half_length_m : 0;
}

double permit_zone_reach_m(const struct permit_zone *zone)
{
    return zone->radius_m + zone->edge_m;
}

double permit_clearance_minutes(const struct permit_clearance *clearance, double depth_m)
{
    if (!(clearance->deeper_minutes > 0))
        return clearance->minutes;
    if (isnan(depth_m))
        return fmax(clearance->minutes, clearance->deeper_minutes);
    return depth_m > clearance->deeper_than_m ? clearance->deeper_minutes : clearance->minutes;
}

const struct permit_pre_watch *permit_pre_watch_at(const struct permit *permit, double depth_m)
{
    const struct permit_pre_watch *found = &permit->pre_watches[0];
    for (uint32_t i = 1; i < permit->n_pre_watches && i < PERMIT_MAX_PRE_WATCHES; i++) {
        const struct permit_pre_watch *row = &permit->pre_watches[i];
        if (isnan(depth_m) ? row->minutes > found->minutes : depth_m > row->deeper_than_m)
            found = row;
    }
    return found;
}

const struct permit_break *permit_last_break(const struct permit *permit, bool dark)
{
    const struct permit_break *last = &permit->breaks[0];
    for (uint32_t i = 1; i < permit->n_breaks && i < PERMIT_MAX_BREAKS; i++)
        if (!(dark && permit->breaks[i].daylight))
            last = &permit->breaks[i];
    return last;
}

bool permit_get_unwatched(const struct permit *permit, uint32_t n, char out[PERMIT_TEXT_SIZE])
{
    if (n >= permit->n_records || n >= PERMIT_MAX_RECORDS)
        return false;
    const struct permit_record *record = &permit->records[n];
    if (record->within_hours > 0)
        snprintf(out, PERMIT_TEXT_SIZE, "%.180s: due within %g h", record->what, record->within_hours);
    else
        snprintf(out, PERMIT_TEXT_SIZE, "%.180s: due at once", record->what);
    return true;
}
