/* Vincenty's inverse formula; the names of the auxiliary quantities are the paper's. */
#include "place/geodesy.h"
#include <math.h>
#include <stdbool.h>

#define AXIS_M 6378137.0
#define FLATTENING (1 / 298.257223563)
#define MINOR_M (AXIS_M * (1 - FLATTENING))
#define MAX_STEPS 200
#define RADIANS (3.14159265358979323846 / 180)

/* What the formula knows of the line at one difference of longitude on the auxiliary sphere. */
struct auxiliary {
    double sin_sigma, cos_sigma, sigma; /* angular distance */
    double sin_alpha, cos2_alpha;       /* azimuth at the equator */
    double cos_2m;                      /* of twice the angle from the equator to the middle */
};

static bool is_point(struct geodesy_point p)
{
    return fabs(p.latitude_deg) <= 90 && fabs(p.longitude_deg) <= 180;
}

static struct auxiliary auxiliary_of(const double u[4], double lambda)
{
    const double sin_u1 = u[0], cos_u1 = u[1], sin_u2 = u[2], cos_u2 = u[3];
    struct auxiliary a;
    a.sin_sigma = hypot(cos_u2 * sin(lambda), cos_u1 * sin_u2 - sin_u1 * cos_u2 * cos(lambda));
    a.cos_sigma = sin_u1 * sin_u2 + cos_u1 * cos_u2 * cos(lambda);
    a.sigma = atan2(a.sin_sigma, a.cos_sigma);
    a.sin_alpha = a.sin_sigma > 0 ? cos_u1 * cos_u2 * sin(lambda) / a.sin_sigma : 0;
    a.cos2_alpha = 1 - a.sin_alpha * a.sin_alpha;
    /* On the equator, where there is no such angle, its factor C is 0. */
    a.cos_2m = a.cos2_alpha > 0 ? a.cos_sigma - 2 * sin_u1 * sin_u2 / a.cos2_alpha : 0;
    return a;
}

/* The difference of longitude on the sphere that belongs to this line; the formula is its fixed point. */
static double next_lambda(const struct auxiliary *a, double longitude)
{
    double c = FLATTENING / 16 * a->cos2_alpha * (4 + FLATTENING * (4 - 3 * a->cos2_alpha));
    double bracket = a->cos_2m + c * a->cos_sigma * (-1 + 2 * a->cos_2m * a->cos_2m); /* of equation 11 */
    return longitude + (1 - c) * FLATTENING * a->sin_alpha * (a->sigma + c * a->sin_sigma * bracket);
}

static double length_of(const struct auxiliary *x)
{
    double u2 = x->cos2_alpha * (AXIS_M * AXIS_M - MINOR_M * MINOR_M) / (MINOR_M * MINOR_M);
    double a = 1 + u2 / 16384 * (4096 + u2 * (-768 + u2 * (320 - 175 * u2)));
    double b = u2 / 1024 * (256 + u2 * (-128 + u2 * (74 - 47 * u2)));
    double m2 = x->cos_2m * x->cos_2m, s2 = x->sin_sigma * x->sin_sigma;
    double inner = x->cos_sigma * (-1 + 2 * m2) - b / 6 * x->cos_2m * (-3 + 4 * s2) * (-3 + 4 * m2);
    return MINOR_M * a * (x->sigma - b * x->sin_sigma * (x->cos_2m + b / 4 * inner));
}

enum status geodesy_line(struct geodesy_point from, struct geodesy_point to, double *out_distance_m,
                         double *out_bearing_deg)
{
    if (!is_point(from) || !is_point(to))
        return STATUS_OUT_OF_RANGE;
    double u1 = atan2((1 - FLATTENING) * sin(from.latitude_deg * RADIANS), cos(from.latitude_deg * RADIANS));
    double u2 = atan2((1 - FLATTENING) * sin(to.latitude_deg * RADIANS), cos(to.latitude_deg * RADIANS));
    const double u[4] = {sin(u1), cos(u1), sin(u2), cos(u2)};
    double longitude = remainder(to.longitude_deg - from.longitude_deg, 360) * RADIANS;
    double lambda = longitude;
    bool done = false;
    struct auxiliary a = auxiliary_of(u, lambda);
    for (int step = 0; step < MAX_STEPS && !done; step++) {
        double before = lambda;
        lambda = next_lambda(&a, longitude);
        a = auxiliary_of(u, lambda);
        done = fabs(lambda - before) < 1e-13;
    }
    if (!done || fabs(lambda) > 180 * RADIANS)
        return STATUS_OUT_OF_RANGE;
    double bearing =
        atan2(u[3] * sin(lambda), u[1] * u[2] - u[0] * u[3] * cos(lambda)) / RADIANS; /* equation 20 */
    if (out_distance_m)
        *out_distance_m = length_of(&a);
    if (out_bearing_deg)
        *out_bearing_deg = bearing < 0 ? bearing + 360 : bearing;
    return STATUS_OK;
}

enum status geodesy_local(struct geodesy_point from, struct geodesy_point to, double *out_east_m,
                          double *out_north_m)
{
    double distance_m, bearing_deg;
    enum status status = geodesy_line(from, to, &distance_m, &bearing_deg);
    if (status != STATUS_OK)
        return status;
    *out_east_m = distance_m * sin(bearing_deg * RADIANS);
    *out_north_m = distance_m * cos(bearing_deg * RADIANS);
    return STATUS_OK;
}
