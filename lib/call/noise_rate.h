/* How often white Gaussian noise gives a pulse of a class: window_upcrossings (bands.h) in a table, since it
 * is asked for with every pulse and takes as long as 2,000 frames of filters. */
#ifndef CALL_NOISE_RATE_H
#define CALL_NOISE_RATE_H

#include "call/bands.h"

#define NOISE_RATE_POINTS 512

/* Plain data. */
struct noise_table {
    double step;                       /* of snr (ratio), from 0 */
    double ln_rate[NOISE_RATE_POINTS]; /* nearly straight over snr: within 0.1 % between the points */
};

/* For a class whose window lasts pulse_s. */
void noise_table_fill(const struct window_statistics *statistics, double pulse_s, struct noise_table *out);
/* Pulses a second of this snr (ratio) or more; 0 where they are fewer than 1e-13. */
double noise_table_get(const struct noise_table *table, double snr);

#endif
