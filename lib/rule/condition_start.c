/* When a start is allowed at all: by day, seeing far enough, in a calm sea, out of the closed season. What is
 * begun may go on. */
#include "base/time.h"
#include "rule/condition.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

#define DAY_NS (24 * 3600 * TIME_NS_PER_S)

/* Why nobody sees enough; false where they do. What nobody has said does not count as poor. */
static bool sees_poorly(const struct watch *watch, char out[FLOW_TEXT_SIZE], int64_t *until_ns)
{
    const struct permit_start *rule = &watch->permit->start;
    const struct surroundings *now = &watch->surroundings;
    *until_ns = -1;
    if (surroundings_dark(now)) {
        int64_t change_ns = surroundings_light_change_ns(now);
        *until_ns = change_ns == INT64_MAX ? -1 : change_ns;
        snprintf(out, FLOW_TEXT_SIZE, "it is dark");
    } else if (rule->least_visibility_m > 0 && now->visibility_m < rule->least_visibility_m)
        snprintf(out, FLOW_TEXT_SIZE, "the visibility is %g m, less than %g m", now->visibility_m,
                 rule->least_visibility_m);
    else if (now->sea_state > rule->most_sea_state)
        snprintf(out, FLOW_TEXT_SIZE, "the sea state is %g, more than %g", now->sea_state,
                 rule->most_sea_state);
    else
        return false;
    return true;
}

/* Orders for animals in the last 24 h. */
static uint32_t lately(const struct start_state *state, int64_t now_ns)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < state->n_orders; i++)
        n += state->order_ns[i] > now_ns - DAY_NS;
    return n;
}

/* What a start in the dark needs beside ears. */
static bool lacks_history(const struct watch *watch, const char *poor, struct why *why)
{
    const struct permit_start *rule = &watch->permit->start;
    const struct start_state *state = &watch->start;
    int64_t since_ns = watch->now_ns - time_from_s(rule->good_watch_within_hours * 3600);
    int64_t good_ns = spans_since_ns(&state->good, since_ns);
    if (state->good_since_ns >= 0)
        good_ns += watch->now_ns - (state->good_since_ns > since_ns ? state->good_since_ns : since_ns);
    double minutes = time_to_s(good_ns) / 60;
    if (rule->good_watch_minutes > 0 && minutes < rule->good_watch_minutes)
        why_reset(why, rule->clause,
                  "%.80s, and in the last %g h there were %.0f of %g min of watch by day in good conditions",
                  poor, rule->good_watch_within_hours, minutes, rule->good_watch_minutes);
    else if (rule->most_orders > 0 && lately(state, watch->now_ns) >= rule->most_orders)
        why_reset(why, rule->clause, "%.80s, and %u stops or reductions in the last 24 h are too many", poor,
                  lately(state, watch->now_ns));
    else
        return false;
    return true;
}

static bool is_closed(const struct watch *watch, struct why *why)
{
    const struct permit_start *rule = &watch->permit->start;
    if (!rule->closed_from || !watch->surroundings.has_clock)
        return false;
    char utc[TIME_UTC_SIZE];
    time_format_utc(watch->surroundings.zero_unix_ns + watch->now_ns, utc);
    unsigned month = (unsigned)((utc[5] - '0') * 10 + utc[6] - '0');
    unsigned day = (unsigned)((utc[8] - '0') * 10 + utc[9] - '0');
    uint32_t today = month * 100 + day, from = rule->closed_from, to = rule->closed_to;
    bool closed = from <= to ? today >= from && today <= to : today >= from || today <= to;
    if (closed)
        why_reset(why, rule->clause, "the season is closed from %02u-%02u to %02u-%02u (month-day)",
                  from / 100, from % 100, to / 100, to % 100);
    return closed;
}

/* Whether a start in the dark needs anything. */
static bool bound_in_the_dark(const struct permit_start *rule)
{
    return rule->dark != DARK_START_ALLOWED || rule->good_watch_minutes > 0 || rule->most_orders > 0;
}

static bool holds(const struct watch *watch, struct why *why, int64_t *until_ns)
{
    const struct permit_start *rule = &watch->permit->start;
    char poor[FLOW_TEXT_SIZE];
    *until_ns = -1;
    if (!rule->stated)
        return false;
    if (is_closed(watch, why))
        return true;
    if (!bound_in_the_dark(rule) || !sees_poorly(watch, poor, until_ns))
        return false;
    if (rule->dark == DARK_START_NEVER)
        why_reset(why, rule->clause, "%.120s: no start is allowed", poor);
    else if (rule->dark == DARK_START_ACOUSTIC && !effort_kept_as(watch, "acoustic"))
        why_reset(why, rule->clause, "%.120s, and no acoustic watch is kept", poor);
    else if (rule->dark == DARK_START_ACOUSTIC && effort_deaf(watch))
        why_reset(why, rule->clause, "%.120s, and the acoustic watch cannot hear", poor);
    else if (!lacks_history(watch, poor, why))
        return false;
    why_add_cause(why, watch->start.id);
    return true;
}

void start_end_stretch(struct watch *watch)
{
    struct start_state *state = &watch->start;
    if (state->good_since_ns < 0)
        return;
    int64_t within_ns = time_from_s(watch->permit->start.good_watch_within_hours * 3600);
    spans_forget_before(&state->good, watch->now_ns - within_ns);
    spans_add(&state->good, state->good_since_ns, watch->now_ns);
    state->good_since_ns = -1;
}

/* A stretch of watch by day in good conditions goes on, or ends. */
static void settle(struct watch *watch)
{
    struct start_state *state = &watch->start;
    char poor[FLOW_TEXT_SIZE];
    int64_t until_ns;
    bool good = watch->permit->start.stated && watch->permit->start.good_watch_minutes > 0 &&
                effort_kept_as(watch, "visual") && surroundings_light(&watch->surroundings) == LIGHT_DAY &&
                !sees_poorly(watch, poor, &until_ns);
    if (good && state->good_since_ns < 0)
        state->good_since_ns = watch->now_ns;
    if (!good)
        start_end_stretch(watch);
}

/* When too much of the good watch will be too long ago, if it is enough now. */
static int64_t good_ends_ns(const struct watch *watch)
{
    const struct permit_start *rule = &watch->permit->start;
    const struct spans *good = &watch->start.good;
    int64_t within_ns = time_from_s(rule->good_watch_within_hours * 3600),
            since_ns = watch->now_ns - within_ns;
    int64_t spare_ns = -time_from_minutes(rule->good_watch_minutes);
    for (uint32_t i = 0; i < good->n; i++)
        if (good->all[i].end_ns > since_ns)
            spare_ns +=
                good->all[i].end_ns - (good->all[i].start_ns > since_ns ? good->all[i].start_ns : since_ns);
    if (!(rule->good_watch_minutes > 0) || watch->start.good_since_ns >= 0 || spare_ns < 0)
        return INT64_MAX;
    for (uint32_t i = 0; i < good->n; i++) {
        if (good->all[i].end_ns <= since_ns)
            continue;
        int64_t from_ns = good->all[i].start_ns > since_ns ? good->all[i].start_ns : since_ns;
        if (good->all[i].end_ns - from_ns > spare_ns)
            return from_ns + spare_ns + within_ns + TIME_NS_PER_US;
        spare_ns -= good->all[i].end_ns - from_ns;
    }
    return INT64_MAX;
}

static int64_t due_ns(const struct watch *watch)
{
    const struct permit_start *rule = &watch->permit->start;
    int64_t due = INT64_MAX;
    if (!rule->stated)
        return due;
    if (bound_in_the_dark(rule))
        due = surroundings_light_change_ns(&watch->surroundings);
    if (rule->closed_from && watch->surroundings.has_clock) {
        int64_t unix_ns = watch->surroundings.zero_unix_ns + watch->now_ns;
        int64_t midnight_ns = (unix_ns / DAY_NS + 1) * DAY_NS - watch->surroundings.zero_unix_ns;
        due = midnight_ns < due ? midnight_ns : due;
    }
    if (rule->most_orders > 0)
        for (uint32_t i = 0; i < watch->start.n_orders; i++)
            if (watch->start.order_ns[i] + DAY_NS > watch->now_ns && watch->start.order_ns[i] + DAY_NS < due)
                due = watch->start.order_ns[i] + DAY_NS;
    return good_ends_ns(watch) < due ? good_ends_ns(watch) : due;
}

static void take_note(struct watch *watch, const struct note *note)
{
    if (note->kind == NOTE_WEATHER)
        memcpy(watch->start.id, watch->recent.causes[0], sizeof watch->start.id);
}

static void enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    struct start_state *state = &watch->start;
    (void)from;
    if (to != PHASE_SHUTDOWN && to != PHASE_REDUCED)
        return;
    if (state->n_orders == START_MAX_ORDERS)
        memmove(state->order_ns, state->order_ns + 1, (START_MAX_ORDERS - 1) * sizeof state->order_ns[0]);
    else
        state->n_orders++;
    state->order_ns[state->n_orders - 1] = watch->now_ns;
}

const struct condition condition_start = {.finding = "start not allowed now",
                                          .holds = holds,
                                          .due_ns = due_ns,
                                          .take_note = take_note,
                                          .enter_phase = enter_phase,
                                          .settle = settle};
