/* What the watch is kept in; see surroundings.h. */
#include "rule/surroundings.h"
#include "base/time.h"
#include "place/sun.h"
#include <math.h>

void surroundings_reset(struct surroundings *surroundings, const struct permit *permit)
{
    *surroundings = (struct surroundings){.depth_m = NAN,
                                          .visibility_m = NAN,
                                          .sea_state = NAN,
                                          .latitude_deg = NAN,
                                          .longitude_deg = NAN,
                                          .day = permit->start,
                                          .light_from_ns = INT64_MAX};
}

static void take(double *value, double said)
{
    if (!isnan(said))
        *value = said;
}

void surroundings_take(struct surroundings *surroundings, const struct note *note)
{
    take(&surroundings->depth_m, note->depth_m);
    take(&surroundings->visibility_m, note->visibility_m);
    take(&surroundings->sea_state, note->sea_state);
    if (note->kind == NOTE_POSITION)
        surroundings_set_place(surroundings, note->latitude_deg, note->longitude_deg);
}

static bool knows_sun(const struct surroundings *surroundings)
{
    return surroundings->has_clock && isfinite(surroundings->latitude_deg) &&
           isfinite(surroundings->longitude_deg);
}

static bool up(const struct surroundings *surroundings, int64_t now_ns, double ahead_minutes)
{
    int64_t at_ns = surroundings->zero_unix_ns + now_ns + time_from_s(ahead_minutes * 60);
    return sun_elevation_deg(at_ns, surroundings->latitude_deg, surroundings->longitude_deg) >= SUN_RISE_DEG;
}

static enum light light_at(const struct surroundings *surroundings, int64_t now_ns)
{
    double after = surroundings->day.after_sunrise_minutes, before = surroundings->day.before_sunset_minutes;
    bool day;
    if (up(surroundings, now_ns, 0))
        day = (after <= 0 || up(surroundings, now_ns, -after)) &&
              (before <= 0 || up(surroundings, now_ns, before));
    else
        day = (after < 0 && up(surroundings, now_ns, -after)) ||
              (before < 0 && up(surroundings, now_ns, before));
    return day ? LIGHT_DAY : LIGHT_DARK;
}

#define MINUTE (60 * TIME_NS_PER_S)
#define DAY_MINUTES 1440
#define YEAR_DAYS 366
#define MIDDLE_MINUTES 240 /* the day's bounds may lie so far from sunrise and sunset, and more */
#define STEP_MINUTES 10

/* The first whole minute from `from_ns` to before to_ns with another light; to_ns where there is none. */
static int64_t first_change_ns(const struct surroundings *surroundings, int64_t from_ns, int64_t to_ns)
{
    while (from_ns < to_ns && light_at(surroundings, from_ns) == surroundings->light)
        from_ns += MINUTE;
    return from_ns;
}

/* Where the sun does not rise, or set, for days: it first does about noon, or midnight, and on the next day
 * for longer than a step; so it is enough to look there, and then at every minute of the day before.
 * INT64_MAX: not within a year. */
static int64_t far_change_ns(const struct surroundings *surroundings, int64_t at_ns)
{
    int64_t noon_ns =
        time_from_s((12 - surroundings->longitude_deg / 15) * 3600) - surroundings->zero_unix_ns;
    int64_t middle_ns = surroundings->light == LIGHT_DARK ? noon_ns : noon_ns - DAY_MINUTES / 2 * MINUTE;
    middle_ns += (at_ns - middle_ns) / (DAY_MINUTES * MINUTE) * DAY_MINUTES * MINUTE;
    middle_ns -= middle_ns % MINUTE;
    for (int day = 0; day < YEAR_DAYS; day++, middle_ns += DAY_MINUTES * MINUTE)
        for (int m = -MIDDLE_MINUTES; m <= MIDDLE_MINUTES; m += STEP_MINUTES) {
            int64_t looked_ns = middle_ns + m * MINUTE, before_ns = looked_ns - DAY_MINUTES * MINUTE;
            if (looked_ns > at_ns && light_at(surroundings, looked_ns) != surroundings->light)
                return first_change_ns(surroundings, before_ns > at_ns ? before_ns : at_ns, looked_ns);
        }
    return INT64_MAX;
}

/* To the whole minute, so that it does not matter how often the sun is looked at. */
void surroundings_update(struct surroundings *surroundings, int64_t now_ns)
{
    if (now_ns >= surroundings->light_from_ns && now_ns < surroundings->light_until_ns)
        return;
    surroundings->light_from_ns = now_ns;
    surroundings->light_until_ns = INT64_MAX;
    surroundings->light = LIGHT_UNKNOWN;
    if (!knows_sun(surroundings))
        return;
    int64_t at_ns = now_ns / MINUTE * MINUTE, end_ns = at_ns + DAY_MINUTES * MINUTE;
    surroundings->light = light_at(surroundings, at_ns);
    surroundings->light_until_ns = first_change_ns(surroundings, at_ns + MINUTE, end_ns);
    if (surroundings->light_until_ns == end_ns)
        surroundings->light_until_ns = far_change_ns(surroundings, end_ns);
}

static void look_anew(struct surroundings *surroundings)
{
    surroundings->light_from_ns = INT64_MAX;
    surroundings->light_until_ns = 0;
}

void surroundings_set_permit(struct surroundings *surroundings, const struct permit *permit)
{
    surroundings->day = permit->start;
    look_anew(surroundings);
}

void surroundings_set_clock(struct surroundings *surroundings, int64_t zero_unix_ns)
{
    surroundings->has_clock = true;
    surroundings->zero_unix_ns = zero_unix_ns;
    look_anew(surroundings);
}

void surroundings_set_place(struct surroundings *surroundings, double latitude_deg, double longitude_deg)
{
    take(&surroundings->latitude_deg, latitude_deg);
    take(&surroundings->longitude_deg, longitude_deg);
    look_anew(surroundings);
}

enum light surroundings_light(const struct surroundings *surroundings)
{
    return surroundings->light;
}

bool surroundings_dark(const struct surroundings *surroundings)
{
    return surroundings->light == LIGHT_DARK;
}

int64_t surroundings_light_change_ns(const struct surroundings *surroundings)
{
    return surroundings->light_until_ns;
}
