/* Where the sun stands. */
#ifndef PLACE_SUN_H
#define PLACE_SUN_H

#include <stdint.h>

/* Elevation at sunrise and sunset of the sun's centre: 34' of refraction and its radius of 16'. */
#define SUN_RISE_DEG (-0.8333)
/* At the begin and end of civil twilight. */
#define SUN_CIVIL_DEG (-6.0)

/* Geometric elevation of the sun's centre above the horizon, degrees, at a UTC time (nanoseconds since 1970)
 * and a WGS84 position (north and east positive): good to 0.02 degrees between 1950 and 2050. No refraction.
 * Low-precision formulas of the Astronomical Almanac, section C ("Low precision formulas for the sun"), from
 * memory. */
double sun_elevation_deg(int64_t unix_ns, double latitude_deg, double longitude_deg);

/* When the sun is next at that elevation, rising (or setting), within 24 h after unix_ns; -1 where it is not.
 * Found on a grid of minutes, then by bisection to a second. */
int64_t sun_next_ns(int64_t unix_ns, double latitude_deg, double longitude_deg, double elevation_deg,
                    int rising);

#endif
