/* How often Gaussian noise gives a pulse of a class: window_upcrossings (bands.h) in tables, since it is
 * asked for with every pulse and takes as long as 2,000 frames of filters. The noise of the sea falls with
 * frequency; noise whose density is uneven through a band is worth fewer independent looks than white noise,
 * so that its windows spread more and its pulses come more often: a tenth more spread doubles them. There is
 * a table for each of several slopes, and the slope that is heard chooses. */
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

#define NOISE_SLOPES 6

struct noise_tables {
    double median_ratio[NOISE_SLOPES]; /* median over mean of a window's power */
    struct noise_table tables[NOISE_SLOPES];
};

/* The slope of table s, dB a decade. */
double noise_slope(int s);
/* For a class whose window, so distributed at each slope, lasts pulse_s. */
void noise_tables_fill(const struct window_statistics statistics[NOISE_SLOPES], double pulse_s,
                       struct noise_tables *out);
/* Pulses a second of this snr (ratio) or more in noise of that slope (dB a decade); 0 where they are fewer
 * than 1e-13. */
double noise_tables_get(const struct noise_tables *tables, double slope_db, double snr);
double noise_tables_get_median(const struct noise_tables *tables, double slope_db);

/* For a class whose window lasts pulse_s. */
void noise_table_fill(const struct window_statistics *statistics, double pulse_s, struct noise_table *out);
/* Pulses a second of this snr (ratio) or more; 0 where they are fewer than 1e-13. */
double noise_table_get(const struct noise_table *table, double snr);

#endif
