/* Levels that are exceeded some part of the time, and the energy mean beside them.
 *
 * L5 is the level exceeded 5 % of the time: high; L95 is low. The estimator changes the answer, so it is
 * fixed: linear between order statistics, number 7 of Hyndman and Fan, "Sample quantiles in statistical
 * packages", American Statistician 50, 1996: rank (n - 1)(1 - N / 100) from 0. All functions work on arrays
 * that the caller owns. */
#ifndef LEVEL_PERCENTILE_H
#define LEVEL_PERCENTILE_H

#include <stdint.h>

/* Puts x (not NAN) into sorted[0 .. n), which is in rising order and has room for one more. */
void percentile_insert(double *sorted, uint32_t n, double x);
/* Takes one value equal to x out of sorted[0 .. n), n >= 1; x is among them. */
void percentile_remove(double *sorted, uint32_t n, double x);
/* The level exceeded `percent` (0 .. 100) of the time, of n levels in rising order; NAN for none. */
double percentile_exceeded_db(const double *sorted, uint32_t n, double percent);
/* 10 lg of the mean of 10^(L / 10): what the sound's energy over that time comes to. NAN for none. */
double percentile_energy_mean_db(const double *levels_db, uint32_t n);

#endif
