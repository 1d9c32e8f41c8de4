/* A straight line through levels as they come, and what it says of a level yet to come. */
#ifndef LEVEL_TREND_H
#define LEVEL_TREND_H

#include "base/status.h"
#include <stdint.h>

#define TREND_LEAST_POINTS 10

/* Running means and sums of products about them (Welford, Technometrics 4, 419 (1962)). Plain data; all zero
 * is empty. */
struct trend {
    uint64_t n;
    double mean_x, mean_y, xx, xy, yy;
};

struct trend_forecast {
    double db, low_db, high_db; /* the line at x and its 90 % interval (least squares, Student's t) */
    double slope, scatter_db;   /* dB for one of x; standard deviation of one level about the line */
};

/* x: how strong the source is by its feed, e.g. 10 lg of energy / full energy, or time in s; y a level in dB.
 * Points that are not finite are left out. */
void trend_push(struct trend *trend, double x, double y_db);
/* STATUS_NOT_FOUND with fewer than TREND_LEAST_POINTS points or all at one x; *out is untouched then. */
enum status trend_get(const struct trend *trend, double x, struct trend_forecast *out);

#endif
