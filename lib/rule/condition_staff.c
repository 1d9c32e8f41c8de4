/* How long people keep the watch: at a stretch, with what rest between, in a day. */
#include "base/time.h"
#include "rule/condition.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

#define DAY_NS (24 * 3600 * TIME_NS_PER_S)

static int64_t hours_ns(double hours)
{
    return time_from_minutes(hours * 60);
}

static struct shift *shift_of(struct watch *watch, const char *name)
{
    for (uint32_t i = 0; i < watch->staff.n; i++)
        if (strcmp(watch->staff.all[i].name, name) == 0)
            return &watch->staff.all[i];
    return NULL;
}

static int64_t in_a_day_ns(const struct shift *shift, int64_t now_ns)
{
    int64_t since_ns = now_ns - DAY_NS, before_ns = spans_since_ns(&shift->past, since_ns);
    if (shift->on_ns < 0)
        return before_ns;
    return before_ns + now_ns - (shift->on_ns > since_ns ? shift->on_ns : since_ns);
}

/* Of two who are off watch, whose hours may rather be forgotten: fewer in 24 h, or off before. */
static bool matters_less(const struct shift *a, const struct shift *b, int64_t now_ns)
{
    int64_t a_ns = in_a_day_ns(a, now_ns), b_ns = in_a_day_ns(b, now_ns);
    return a_ns < b_ns || (a_ns == b_ns && a->off_ns < b->off_ns);
}

/* Where there is no room, who kept the least watch in 24 h is forgotten. */
static struct shift *new_shift(struct watch *watch, const char *name)
{
    struct staff_state *staff = &watch->staff;
    uint32_t place = staff->n;
    if (place == STAFF_MAX) {
        place = STAFF_MAX;
        for (uint32_t i = 0; i < STAFF_MAX; i++)
            if (staff->all[i].on_ns < 0 &&
                (place == STAFF_MAX || matters_less(&staff->all[i], &staff->all[place], watch->now_ns)))
                place = i;
        if (place == STAFF_MAX)
            return NULL;
    } else
        staff->n++;
    staff->all[place] = (struct shift){.on_ns = -1, .off_ns = -1, .past.full = SPANS_FOLD_LATER};
    memmove(staff->all[place].name, name, strnlen(name, NOTE_NAME_SIZE - 1));
    return &staff->all[place];
}

static void say(struct watch *watch, const struct shift *shift, const char *format, double is, double allowed)
{
    struct why why;
    char text[FLOW_TEXT_SIZE];
    snprintf(text, sizeof text, format, shift->name, is, allowed);
    why_reset(&why, watch->permit->staff.clause, "%s", text);
    why_add_cause(&why, shift->id);
    watch_say_finding(watch, "watch hours passed", "firm", &why);
}

static void come_on(struct watch *watch, const char *name)
{
    const struct permit_staff *rule = &watch->permit->staff;
    struct shift *shift = shift_of(watch, name);
    if (!shift)
        shift = new_shift(watch, name);
    if (!shift || shift->on_ns >= 0)
        return;
    memcpy(shift->id, watch->recent.causes[0], sizeof shift->id);
    double rest_h = time_to_s(watch->now_ns - shift->off_ns) / 3600;
    if (shift->off_ns >= 0 && shift->full && rest_h < rule->rest_hours)
        say(watch, shift, "%.60s is on watch again after %.1f h; at least %g h are to lie between", rest_h,
            rule->rest_hours);
    /* A rest that is too short does not end the stretch. */
    bool goes_on = shift->off_ns >= 0 && rest_h < rule->rest_hours;
    shift->stretch_ns = goes_on ? shift->stretch_ns : 0;
    shift->on_ns = watch->now_ns;
    shift->said_long = shift->said_day = shift->full = false;
}

static void go_off(struct watch *watch, const char *name)
{
    struct shift *shift = shift_of(watch, name);
    if (!shift || shift->on_ns < 0 || effort_on_watch(watch, name))
        return;
    spans_forget_before(&shift->past, watch->now_ns - DAY_NS);
    spans_add(&shift->past, shift->on_ns, watch->now_ns);
    shift->stretch_ns += watch->now_ns - shift->on_ns;
    shift->full = shift->stretch_ns >= hours_ns(watch->permit->staff.longest_hours);
    shift->off_ns = watch->now_ns;
    shift->on_ns = -1;
}

/* After signing on and off has been taken. Hours count whether or not the permit bounds them: another may
 * hold from tomorrow on. */
static void settle(struct watch *watch)
{
    const struct permit_staff *rule = &watch->permit->staff;
    for (uint32_t i = 0; i < watch->effort.n_people; i++)
        if (strcmp(watch->effort.people[i].watch, "crew") != 0)
            come_on(watch, watch->effort.people[i].name);
    for (uint32_t i = 0; i < watch->staff.n; i++) {
        struct shift *shift = &watch->staff.all[i];
        go_off(watch, shift->name);
        if (shift->on_ns < 0)
            continue;
        int64_t lasted = shift->stretch_ns + watch->now_ns - shift->on_ns;
        if (!shift->said_long && lasted > hours_ns(rule->longest_hours)) {
            shift->said_long = true;
            say(watch, shift, "%.60s has been on watch for %.1f h; at most %g h at a stretch",
                time_to_s(lasted) / 3600, rule->longest_hours);
        }
        if (!shift->said_day && in_a_day_ns(shift, watch->now_ns) > hours_ns(rule->day_hours)) {
            shift->said_day = true;
            say(watch, shift, "%.60s has been on watch for %.1f h in 24 h; at most %g h",
                time_to_s(in_a_day_ns(shift, watch->now_ns)) / 3600, rule->day_hours);
        }
    }
}

static int64_t due_ns(const struct watch *watch)
{
    const struct permit_staff *rule = &watch->permit->staff;
    int64_t due = INT64_MAX;
    for (uint32_t i = 0; i < watch->staff.n; i++) {
        const struct shift *shift = &watch->staff.all[i];
        if (shift->on_ns < 0)
            continue;
        int64_t long_ns = shift->on_ns - shift->stretch_ns + hours_ns(rule->longest_hours) + TIME_NS_PER_US;
        int64_t left = hours_ns(rule->day_hours) - in_a_day_ns(shift, watch->now_ns);
        int64_t day_ns = watch->now_ns + left + TIME_NS_PER_US;
        if (!shift->said_long && long_ns > watch->now_ns && long_ns < due)
            due = long_ns;
        if (!shift->said_day && left >= 0 && day_ns < due)
            due = day_ns;
    }
    return due;
}

const struct condition condition_staff = {.due_ns = due_ns, .settle = settle};
