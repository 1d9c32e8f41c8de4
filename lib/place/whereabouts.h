/* The probability distribution of a contact's distance from a zone's origin.
 *
 * Two shapes: unknown (nothing is known but the group's policy), or log-normal about a stated distance. */
#ifndef PLACE_WHEREABOUTS_H
#define PLACE_WHEREABOUTS_H

#include <stdbool.h>

struct whereabouts {
    bool known;
    double median_m;   /* distance from the source */
    double log_spread; /* standard deviation of ln(distance); 0.2 is about +-20 % */
};

/* The distance that is not exceeded with probability p (0 < p < 1); NAN when unknown. */
double whereabouts_quantile_m(const struct whereabouts *whereabouts, double p);
/* P(distance <= radius); NAN when unknown. An infinite radius gives 1. */
double whereabouts_p_inside(const struct whereabouts *whereabouts, double radius_m);

#endif
