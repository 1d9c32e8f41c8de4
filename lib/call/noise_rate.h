/* How often white Gaussian noise gives a pulse of a class: window_upcrossings (bands.h) in a table, since it
 * is asked for with every pulse and takes as long as 2,000 frames of filters. */
#ifndef CALL_NOISE_RATE_H
#define CALL_NOISE_RATE_H

#include "call/bands.h"

#define NOISE_RATE_POINTS 128

/* Pulses a second that noise alone gives at this snr (ratio) or more. */
struct noise_rate {
    double (*get)(const void *context, double snr);
    const void *context;
};

/* The rate of noise pulses that compete with one of this snr. Its level speaks against noise, of which ever
 * fewer reach it, as far as the spread of an animal's own levels (a standard deviation, dB) lets it: the rate
 * per dB there, over that spread; or all of the noise's pulses, at least_snr or more, where that is less. */
double noise_rate_competing(const struct noise_rate *noise, double snr, double least_snr, double spread_db);

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
