/* A bank of band-pass filters of one channel and the short-time power behind each: the front end that all
 * pulse classes share. Butterworth band-passes of order 3 (bilinear transform with prewarped edges, Oppenheim
 * and Schafer, "Discrete-Time Signal Processing", section 7.2), eight of them side by side in one vector
 * (dsp/lanes.h), so that eight bands cost what one would. Power is summed over *slots* of a few frames; a
 * pulse detector adds slots up to its own window. */
#ifndef CALL_BANDS_H
#define CALL_BANDS_H

#include "base/status.h"
#include <stdbool.h>
#include <stdint.h>

#define BANDS_MAX 32
#define BANDS_MAX_PARTS 4
#define BANDS_HIGHEST 0.472 /* of the rate: the highest edge that a rate carries */

struct band_edges {
    double low_hz, high_hz;
};

/* A band as the sum of adjoining ones of a bank, each taken `late_slots` late, so that what left the sea
 * together is summed together. n = 0: no band. */
struct band_parts {
    uint32_t n, bands[BANDS_MAX_PARTS], late_slots[BANDS_MAX_PARTS];
};

struct bands;

/* True when the rate carries the band: 0 < low < high <= BANDS_HIGHEST * rate. */
bool bands_rate_carries(double rate_hz, struct band_edges edges);

/* A bank of n (1..BANDS_MAX) bands at rate_hz, slots of slot_frames (>= 1), pushed block_slots at a time,
 * with the last history_slots before a block kept readable. STATUS_BAD_ARGUMENT for a band that the rate does
 * not carry or a zero size; STATUS_NO_MEMORY. The caller owns *out. */
enum status bands_create(double rate_hz, const struct band_edges *edges, uint32_t n, uint32_t slot_frames,
                         uint32_t block_slots, uint32_t history_slots, struct bands **out);
void bands_reset(struct bands *bands);
/* Takes block_slots * slot_frames samples. Samples that are not finite empty the filters (the block then has
 * no power) instead of staying in them for ever. */
void bands_push(struct bands *bands, const float *samples);
/* The same without a copy: where the samples of the next block are to be written, and once they are there.
 * Pointers to the last block are to be got anew once there is room for the next. */
float *bands_get_room(struct bands *bands);
void bands_push_room(struct bands *bands);
/* Mean square of each slot of the last block in band b: [block_slots], with [-history_slots .. -1] before it
 * readable. Valid until the next push. */
const float *bands_get_power(const struct bands *bands, uint32_t b);
/* Sum of the slots of the last block in band b. */
double bands_get_block_sum(const struct bands *bands, uint32_t b);
/* The samples of the last block as they were pushed, [block_slots * slot_frames], with as many before them as
 * history_slots covers. Valid until the next push. */
const float *bands_get_samples(const struct bands *bands);
/* Frames by which band b is late: the centre of its impulse response's energy. */
double bands_get_delay(const struct bands *bands, uint32_t b);
struct band_edges bands_get_edges(const struct bands *bands, uint32_t b);
/* Sets late_slots so that all parts are as late as the latest one, to half a slot; gives its delay, frames.
 */
double bands_align(const struct bands *bands, struct band_parts *parts);
/* How the power over a window of n slots, the sum over the parts, is distributed in Gaussian noise whose
 * density has that slope over the logarithm of frequency (dB a decade; 0: white), the parts weighted as
 * call/whitened.h has it; computed from the filters, the correlation between the parts among them.
 * Its cumulants are those of a weighted sum of chi-square variables, the weights being the eigenvalues of the
 * window's correlation matrix. */
struct window_statistics {
    double freedom;  /* 2 mean^2 / variance (Urkowitz 1967: 2 W T for an ideal band) */
    double skewness; /* third cumulant over variance^(3/2) */
};
/* STATUS_NO_MEMORY. For use at start. */
enum status bands_get_statistics(const struct bands *bands, const struct band_parts *parts, uint32_t n_slots,
                                 double slope_db, struct window_statistics *out);
/* How often, in one window's time, the power over a sliding window rises above 1 + snr times its mean in
 * white Gaussian noise: the tail of a shifted chi-square with the same three cumulants (Buckley and Eagleson,
 * "An approximation to the distribution of quadratic forms in normal random variables", 1988) times a
 * measured constant. */
double window_upcrossings(const struct window_statistics *statistics, double snr);
/* Quantile of that law over its mean, for the quantile of the normal law: 0 gives the median (Wilson and
 * Hilferty, "The distribution of chi-square", 1931). */
double window_quantile(const struct window_statistics *statistics, double normal);
void bands_destroy(struct bands *bands);

#endif
