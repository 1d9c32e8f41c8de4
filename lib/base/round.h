/* The one table of how numbers are rounded before rules or entries see them.
 *
 * Rounding happens when an event is made, so that the watch at sea and a rerun from the ledger work on the
 * same numbers: n/100.0 is the double nearest to its two-decimal text, so printing and parsing give it back.
 */
#ifndef BASE_ROUND_H
#define BASE_ROUND_H

#define ROUND_DECIMALS_DB 2          /* 0.01 dB */
#define ROUND_DECIMALS_S 6           /* 1 us */
#define ROUND_DECIMALS_HZ 1          /* 0.1 Hz */
#define ROUND_DECIMALS_M 1           /* 0.1 m */
#define ROUND_DECIMALS_DEG 1         /* 0.1 degree */
#define ROUND_DECIMALS_M_S 2         /* 0.01 m/s */
#define ROUND_DECIMALS_PROBABILITY 3 /* 0.001 */
#define ROUND_DECIMALS_EVIDENCE 3    /* 0.001 of log-odds */
#define ROUND_DECIMALS_KURTOSIS 2    /* 0.01 */
#define ROUND_DECIMALS_PA_S 6        /* 1e-6 Pa s */
#define ROUND_DECIMALS_SEA_STATE 1   /* 0.1 */
#define ROUND_DECIMALS_NUMBER 0      /* animals are counted */
#define ROUND_DECIMALS_POSITION 6    /* 1e-6 degree */

/* x to the given number of decimals (0 to 9), halves away from zero; NaN and infinities unchanged; -0 becomes
 * 0. */
double round_decimals(double x, int decimals);

#endif
