/* Where the sun stands: see sun.h. */
#include "place/sun.h"
#include <math.h>
#include <stdbool.h>

#define RADIANS (3.14159265358979323846 / 180)
#define NS_PER_S INT64_C(1000000000)
#define DAY_S 86400.0
/* 2000-01-01 12:00 UTC */
#define J2000_UNIX_S 946728000.0

double sun_elevation_deg(int64_t unix_ns, double latitude_deg, double longitude_deg)
{
    double days = ((double)unix_ns / (double)NS_PER_S - J2000_UNIX_S) / DAY_S;
    double mean_longitude = (280.460 + 0.9856474 * days) * RADIANS;
    double anomaly = (357.528 + 0.9856003 * days) * RADIANS;
    double longitude = mean_longitude + (1.915 * sin(anomaly) + 0.020 * sin(2 * anomaly)) * RADIANS;
    double tilt = (23.439 - 0.0000004 * days) * RADIANS;
    double declination = asin(sin(tilt) * sin(longitude));
    double ascension = atan2(cos(tilt) * sin(longitude), cos(longitude));
    double sidereal = (280.46061837 + 360.98564736629 * days + longitude_deg) * RADIANS;
    double hour = sidereal - ascension, latitude = latitude_deg * RADIANS;
    return asin(sin(latitude) * sin(declination) + cos(latitude) * cos(declination) * cos(hour)) / RADIANS;
}

int64_t sun_next_ns(int64_t unix_ns, double latitude_deg, double longitude_deg, double elevation_deg,
                    int rising)
{
    const int64_t minute = 60 * NS_PER_S;
    bool above = sun_elevation_deg(unix_ns, latitude_deg, longitude_deg) >= elevation_deg;
    for (int64_t at = unix_ns + minute; at <= unix_ns + 1440 * minute; at += minute) {
        bool now = sun_elevation_deg(at, latitude_deg, longitude_deg) >= elevation_deg;
        if (now != above && now == (rising != 0)) {
            int64_t low = at - minute, high = at;
            while (high - low > NS_PER_S) {
                int64_t middle = low + (high - low) / 2;
                bool there = sun_elevation_deg(middle, latitude_deg, longitude_deg) >= elevation_deg;
                *(there == now ? &high : &low) = middle;
            }
            return high;
        }
        above = now;
    }
    return -1;
}
