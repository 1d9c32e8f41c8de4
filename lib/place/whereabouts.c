/* Log-normal distance: quantiles and the probability of being inside a radius. */
#include "place/whereabouts.h"
#include <math.h>

#define SQRT_2 1.41421356237309504880
#define SQRT_2_PI 2.50662827463100050242

/* P(Z <= z) of the standard normal; through erfc, which keeps the small tail exact (Abramowitz and Stegun,
 * Handbook of Mathematical Functions, 1964, 26.2.29). */
static double normal_below(double z)
{
    return 0.5 * erfc(-z / SQRT_2);
}

/* The z with P(Z <= z) = p, 0 < p < 1. First guess: Abramowitz and Stegun 26.2.23 (error below 4.5e-4); then
 * three steps of Halley's method on normal_below, each of which cubes the error. Works on the smaller tail,
 * so that no digits are lost near 1. */
static double normal_quantile(double p)
{
    double tail = p < 0.5 ? p : 1 - p;
    double t = sqrt(-2 * log(tail));
    double z =
        (2.515517 + t * (0.802853 + t * 0.010328)) / (1 + t * (1.432788 + t * (0.189269 + t * 0.001308))) - t;
    for (int i = 0; i < 3; i++) {
        double step = (normal_below(z) - tail) * SQRT_2_PI * exp(z * z / 2);
        z -= step / (1 + z * step / 2);
    }
    return p < 0.5 ? z : -z;
}

double whereabouts_quantile_m(const struct whereabouts *whereabouts, double p)
{
    if (!whereabouts->known || !(p > 0 && p < 1))
        return NAN;
    return whereabouts->median_m * exp(whereabouts->log_spread * normal_quantile(p));
}

double whereabouts_p_inside(const struct whereabouts *whereabouts, double radius_m)
{
    if (isnan(radius_m) || !whereabouts->known)
        return NAN;
    if (isinf(radius_m))
        return radius_m > 0 ? 1 : 0;
    if (radius_m < 0)
        return 0;
    if (whereabouts->median_m <= 0)
        return 1;
    if (radius_m <= 0)
        return 0;
    if (whereabouts->log_spread <= 0)
        return whereabouts->median_m <= radius_m ? 1 : 0;
    return normal_below(log(radius_m / whereabouts->median_m) / whereabouts->log_spread);
}
