/* Arithmetic of many strikes: what a sum of them gives, and what one of them is in a long mean.
 *
 *   N equal strikes of SEL L      L + 10 lg N
 *   strike SEL from a long mean   10 lg(10^(Leq/10) - 10^(Lbg/10)) - 10 lg(n T0 / T), T0 = 1 s
 *                                 (German practice, from memory)
 *   less the background           10 lg(10^(L/10) - 10^(Lbg/10)); ISO 17208-1:2016 allows it from 3 dB on
 */
#ifndef LEVEL_STRIKES_H
#define LEVEL_STRIKES_H

#include <stdint.h>

#define STRIKES_LEAST_OVER_BACKGROUND_DB 3.0

/* Cumulative SEL of n equal strikes, dB re 1 uPa2 s. */
double strikes_cumulative_db(double sel_db, double n);
/* How many equal strikes stay below a cumulative SEL, which is the last whole number before it is reached; 0
 * when one reaches it. */
double strikes_possible(double sel_db, double cumulative_db);
/* Energy sum and energy mean of n levels; -INFINITY for none. */
double strikes_sum_db(const double *level_db, uint32_t n);
double strikes_mean_db(const double *level_db, uint32_t n);
/* A level less the background's; NAN when it is less than 3 dB above. */
double strikes_less_background_db(double level_db, double background_db);
/* SEL of one of n strikes in T seconds from their equivalent level; NAN as above, or for no strikes. */
double strikes_sel_from_mean_db(double leq_db, double background_db, double n, double seconds);

#endif
