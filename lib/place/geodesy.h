/* Distance and bearing between two positions on the WGS84 ellipsoid (a = 6378137 m, f = 1/298.257223563: NIMA
 * TR8350.2), along the geodesic, by the inverse formula of Vincenty 1975 (Direct and inverse solutions of
 * geodesics on the ellipsoid with application of nested equations, Survey Review 23(176), 88-93). */
#ifndef PLACE_GEODESY_H
#define PLACE_GEODESY_H

#include "base/status.h"

/* Degrees, north and east positive. */
struct geodesy_point {
    double latitude_deg;  /* -90 to 90 */
    double longitude_deg; /* -180 to 180 */
};

/* The length of the geodesic and its true bearing where it begins, 0 up to 360 degrees; 0 where both are the
 * same. STATUS_OUT_OF_RANGE for a position that is none, or two that are so nearly antipodal that the formula
 * does not converge. Either out may be NULL. */
enum status geodesy_line(struct geodesy_point from, struct geodesy_point to, double *out_distance_m,
                         double *out_bearing_deg);

/* How far `to` lies east and north of `from`, metres, on the plane that keeps distances and bearings from
 * `from` (azimuthal equidistant). The same errors. */
enum status geodesy_local(struct geodesy_point from, struct geodesy_point to, double *out_east_m,
                          double *out_north_m);

#endif
