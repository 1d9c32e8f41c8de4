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
                                          .day = permit->start};
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
    if (note->kind == NOTE_POSITION) {
        take(&surroundings->latitude_deg, note->latitude_deg);
        take(&surroundings->longitude_deg, note->longitude_deg);
    }
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

enum light surroundings_light(const struct surroundings *surroundings, int64_t now_ns)
{
    if (!knows_sun(surroundings))
        return LIGHT_UNKNOWN;
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

bool surroundings_dark(const struct surroundings *surroundings, int64_t now_ns)
{
    return surroundings_light(surroundings, now_ns) == LIGHT_DARK;
}

int64_t surroundings_light_change_ns(const struct surroundings *surroundings, int64_t now_ns)
{
    const int64_t minute = 60 * TIME_NS_PER_S;
    if (!knows_sun(surroundings))
        return INT64_MAX;
    enum light now = surroundings_light(surroundings, now_ns);
    for (int64_t at = now_ns / minute * minute + minute; at <= now_ns + 1440 * minute; at += minute)
        if (surroundings_light(surroundings, at) != now)
            return at;
    return INT64_MAX;
}
