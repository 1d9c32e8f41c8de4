/* What makes the times and conditions of a permit usable: every timer has a bound, every phase can be entered
 * and left. */
#include "rule/permit_search.h"
#include <math.h>
#include <stdarg.h>
#include <stdio.h>

void permit_look_at(struct permit_search *search, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(search->key, sizeof search->key, format, arguments);
    va_end(arguments);
}

void permit_problem(struct permit_search *search, const char *format, ...)
{
    if (search->seen++ != search->wanted)
        return;
    int n = snprintf(search->out, PERMIT_TEXT_SIZE, "%s: ", search->key);
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(search->out + n, PERMIT_TEXT_SIZE - (size_t)n, format, arguments);
    va_end(arguments);
}

void permit_need_minutes(struct permit_search *search, const char *name, double minutes)
{
    if (!(minutes > 0 && minutes <= PERMIT_LONGEST_MINUTES))
        permit_problem(search, "%s is %g minutes; allowed: more than 0, at most %g", name, minutes,
                       PERMIT_LONGEST_MINUTES);
}

void permit_need_limit(struct permit_search *search, const char *name, double minutes, double least)
{
    if (!(minutes >= least && (isinf(minutes) || minutes <= PERMIT_LONGEST_MINUTES)))
        permit_problem(search, "%s is %g minutes; allowed: %g to %g, or not stated", name, minutes, least,
                       PERMIT_LONGEST_MINUTES);
}

static void check_pre_watches(struct permit_search *search, const struct permit *permit)
{
    uint32_t n = permit->n_pre_watches;
    permit_look_at(search, "pre_watch");
    if (n == 0 || n > PERMIT_MAX_PRE_WATCHES)
        permit_problem(search, "there are %u pre-watches; allowed: 1 to %d", n, PERMIT_MAX_PRE_WATCHES);
    for (uint32_t i = 0; i < n && i < PERMIT_MAX_PRE_WATCHES; i++) {
        const struct permit_pre_watch *row = &permit->pre_watches[i];
        if (i > 0)
            permit_look_at(search, "pre_watch.deeper[%u]", i - 1);
        permit_need_minutes(search, "the pre-watch", row->minutes);
        if (!row->visual && !row->acoustic)
            permit_problem(
                search,
                "the pre-watch needs neither a visual nor an acoustic watch, so anybody could end it");
        if (i > 0 && !(row->deeper_than_m > permit->pre_watches[i - 1].deeper_than_m))
            permit_problem(search,
                           "the pre-watch for more than %g m of depth does not follow a shallower one",
                           row->deeper_than_m);
    }
    permit_look_at(search, "pre_watch.longest_hole_minutes");
    permit_need_limit(search, "a hole in the pre-watch", permit->pre_watch_hole_minutes, 0);
}

static bool holds_in_soft_start(const struct permit *permit)
{
    for (uint32_t i = 0; i < permit->n_zones && i < PERMIT_MAX_ZONES; i++)
        if (permit->zones[i].action[PHASE_SOFT_START] == ACTION_HOLD)
            return true;
    return false;
}

static void check_soft_start(struct permit_search *search, const struct permit *permit)
{
    const struct permit_soft_start *soft = &permit->soft_start;
    double least = soft->least_minutes, longest = soft->longest_minutes;
    permit_look_at(search, "soft_start.least_minutes");
    if (!(least >= 0 && least <= PERMIT_LONGEST_MINUTES))
        permit_problem(search, "the soft start's least time is %g minutes; allowed: 0 to %g", least,
                       PERMIT_LONGEST_MINUTES);
    permit_look_at(search, "soft_start.longest_minutes");
    if (!(longest >= least && longest > 0))
        permit_problem(
            search, "the soft start's longest time is %g minutes; allowed: at least the least time", longest);
    permit_look_at(search, "soft_start.longest_to_line_minutes");
    if (!(soft->longest_to_line_minutes >= least))
        permit_problem(search,
                       "from the soft start to the line's begin at most %g minutes; allowed: at least its "
                       "least time",
                       soft->longest_to_line_minutes);
    permit_look_at(search, "soft_start.largest_step_db");
    if (soft->step == STEP_LEVEL && !(soft->largest_step_db > 0))
        permit_problem(search, "the soft start's largest step is %g dB; allowed: more than 0",
                       soft->largest_step_db);
    permit_look_at(search, "soft_start.bursts");
    if (soft->bursts > 0 && !(soft->burst_s > 0 && soft->pause_s > 0))
        permit_problem(search, "bursts of %g s with pauses of %g s; allowed: more than 0", soft->burst_s,
                       soft->pause_s);
    permit_look_at(search, "soft_start.stop_if_possible_else_hold");
    if (soft->stop_if_possible_else_hold && !holds_in_soft_start(permit))
        permit_problem(search, "no zone asks to hold in the soft start");
}

static void check_breaks(struct permit_search *search, const struct permit *permit)
{
    uint32_t n = permit->n_breaks;
    permit_look_at(search, "break");
    if (n == 0 || n > PERMIT_MAX_BREAKS)
        permit_problem(search, "there are %u breaks; allowed: 1 to %d", n, PERMIT_MAX_BREAKS);
    for (uint32_t i = 0; i < n && i < PERMIT_MAX_BREAKS; i++) {
        if (i > 0)
            permit_look_at(search, "break.longer[%u]", i - 1);
        permit_need_minutes(search, "the break", permit->breaks[i].minutes);
        if (i > 0 && !(permit->breaks[i].minutes > permit->breaks[i - 1].minutes))
            permit_problem(search, "the break of %g minutes does not follow a shorter one",
                           permit->breaks[i].minutes);
    }
    permit_look_at(search, "break.daylight");
    if (n > 0 && permit->breaks[0].daylight)
        permit_problem(search, "the shortest break is for the day only: nothing is said of the dark");
}

static void check_deterrent(struct permit_search *search, const struct permit_deterrent *deterrent)
{
    if (!deterrent->stated)
        return;
    permit_look_at(search, "deterrent.least_minutes");
    if (!(deterrent->least_minutes >= 0 && deterrent->least_minutes <= PERMIT_LONGEST_MINUTES))
        permit_problem(search, "the deterrent's least time is %g minutes; allowed: 0 to %g",
                       deterrent->least_minutes, PERMIT_LONGEST_MINUTES);
    permit_look_at(search, "deterrent.longest_minutes");
    if (!(deterrent->longest_minutes >= deterrent->least_minutes && deterrent->longest_minutes > 0))
        permit_problem(search, "the deterrent's longest time is %g minutes; allowed: at least the least time",
                       deterrent->longest_minutes);
    permit_look_at(search, "deterrent.gap_minutes");
    permit_need_limit(search, "from the deterrent's end to the first impulse", deterrent->gap_minutes, 0);
    permit_look_at(search, "deterrent.again_minutes");
    if (!(deterrent->again_minutes >= 0 && deterrent->again_minutes <= PERMIT_LONGEST_MINUTES))
        permit_problem(search, "the deterrent rests for %g minutes; allowed: 0 to %g",
                       deterrent->again_minutes, PERMIT_LONGEST_MINUTES);
}

/* A demonstration may put together what no work does. */
static bool is_foreign(const struct permit *permit, enum permit_activity activity)
{
    return permit->activity != activity && !permit->demonstration;
}

static void check_between_lines(struct permit_search *search, const struct permit *permit)
{
    const struct permit_turn *turn = &permit->turn;
    const struct permit_mitigation_source *small = &permit->mitigation_source;
    permit_look_at(search, "line_turn");
    if (turn->stated && is_foreign(permit, ACTIVITY_SEISMIC))
        permit_problem(search, "%s has no lines", permit_activity_text(permit->activity));
    if (turn->stated && !(turn->longest_minutes >= 0 && turn->longest_minutes <= PERMIT_LONGEST_MINUTES))
        permit_problem(search, "a line turn may last %g minutes; allowed: 0 to %g", turn->longest_minutes,
                       PERMIT_LONGEST_MINUTES);
    if (turn->stated && turn->reduced && turn->longest_minutes == 0)
        permit_problem(search, "the source may go on reduced in a line turn of 0 minutes");
    if (turn->stated && !(turn->step_up_minutes <= turn->longest_minutes))
        permit_problem(search, "a line turn steps up within its last %g of at most %g minutes",
                       turn->step_up_minutes, turn->longest_minutes);
    permit_look_at(search, "mitigation_source");
    if (small->stated && is_foreign(permit, ACTIVITY_SEISMIC))
        permit_problem(search, "%s has no array of which one element could go on",
                       permit_activity_text(permit->activity));
    if (small->stated)
        permit_need_limit(search, "the small source", small->longest_minutes, 0.01);
    permit_look_at(search, "vibro_and_drilling");
    if (permit->steady.stated && is_foreign(permit, ACTIVITY_PILING))
        permit_problem(search, "%s has neither vibro piling nor relief drilling",
                       permit_activity_text(permit->activity));
}

static bool is_month_day(uint32_t day)
{
    static const uint8_t days[] = {31, 29, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31};
    uint32_t month = day / 100;
    return month >= 1 && month <= 12 && day % 100 >= 1 && day % 100 <= days[month - 1];
}

static void check_start(struct permit_search *search, const struct permit_start *start)
{
    permit_look_at(search, "start.good_watch_minutes");
    if (start->good_watch_minutes > 0 && !(start->good_watch_within_hours * 60 >= start->good_watch_minutes))
        permit_problem(search, "%g minutes of good watch cannot lie within %g hours",
                       start->good_watch_minutes, start->good_watch_within_hours);
    uint32_t from = start->closed_from, to = start->closed_to;
    permit_look_at(search, "start.closed_from_month_day");
    if ((from == 0) != (to == 0))
        permit_problem(search, "the closed season lacks its first or its last day");
    else if (from > 0 && !(is_month_day(from) && is_month_day(to)))
        permit_problem(search, "the closed season from %u to %u; allowed: month * 100 + day, 101 to 1231",
                       from, to);
    else if (from == 101 && to == 1231)
        permit_problem(search, "the closed season is the whole year: nothing could ever start");
}

static void check_people(struct permit_search *search, const struct permit *permit)
{
    const struct permit_staff *staff = &permit->staff;
    permit_look_at(search, "outage");
    if (permit->outage.stated && !(permit->outage.day_minutes >= permit->outage.diagnose_minutes))
        permit_problem(search, "an outage may last %g minutes a day and be looked into for %g",
                       permit->outage.day_minutes, permit->outage.diagnose_minutes);
    permit_look_at(search, "override.leaves");
    if (permit->override.leaves != ACTION_LOG && permit->override.leaves != ACTION_REDUCE)
        permit_problem(search, "an override leaves '%s'; allowed: log, reduce",
                       permit_action_text(permit->override.leaves));
    permit_look_at(search, "staff");
    if (!(staff->longest_hours > 0 && staff->day_hours > 0 && staff->rest_hours >= 0))
        permit_problem(search, "watch hours of %g at a stretch and %g a day; allowed: more than 0",
                       staff->longest_hours, staff->day_hours);
    if (!(isinf(staff->longest_hours) || staff->longest_hours <= staff->day_hours))
        permit_problem(search, "watch hours of %g at a stretch are more than %g a day", staff->longest_hours,
                       staff->day_hours);
}

static void check_decisions(struct permit_search *search, const struct permit *permit)
{
    permit_look_at(search, "decisions.countdown_s");
    if (!(permit->confirm_countdown_s >= 0 && permit->confirm_countdown_s <= 600))
        permit_problem(search, "the observer's countdown is %g s; allowed: 0 to 600",
                       permit->confirm_countdown_s);
    permit_look_at(search, "decisions.p_inside_act");
    if (!(permit->p_inside_prepare > 0 && permit->p_inside_prepare <= permit->p_inside_act &&
          permit->p_inside_act <= 1))
        permit_problem(search, "P(inside) of %g to prepare and %g to act; allowed: 0 < prepare <= act <= 1",
                       permit->p_inside_prepare, permit->p_inside_act);
    permit_look_at(search, "job.longest_minutes");
    if (permit->job.stated)
        permit_need_minutes(search, "the sound in one job", permit->job.longest_minutes);
    permit_look_at(search, "post_watch.minutes");
    if (!(permit->post_watch_minutes >= 0 && permit->post_watch_minutes <= PERMIT_LONGEST_MINUTES))
        permit_problem(search, "a watch of %g minutes after the work; allowed: 0 to %g",
                       permit->post_watch_minutes, PERMIT_LONGEST_MINUTES);
}

void permit_check_times(struct permit_search *search, const struct permit *permit)
{
    check_pre_watches(search, permit);
    check_soft_start(search, permit);
    check_breaks(search, permit);
    check_deterrent(search, &permit->deterrent);
    check_between_lines(search, permit);
    check_start(search, &permit->start);
    check_people(search, permit);
    check_decisions(search, permit);
}
