/* Butterworth low-pass, high-pass and band-pass filters as second-order sections, in double precision.
 *
 * Method: the poles of the analogue prototype (Butterworth, "On the theory of filter amplifiers", 1930), its
 * band transformation, and the bilinear transform with the edges pre-warped, so that the -3.01 dB points lie
 * at the given frequencies exactly (Oppenheim and Schafer, "Discrete-Time Signal Processing", sections 7.1
 * and B.1).
 *
 * The filter is a plain value: no allocation, copy it freely. */
#ifndef DSP_FILTER_H
#define DSP_FILTER_H

#include "base/status.h"
#include <complex.h>
#include <stddef.h>
#include <stdint.h>

#define FILTER_MAX_ORDER 8

/* One section, transposed direct form II; a0 = 1. */
struct biquad {
    double b0, b1, b2, a1, a2;
    double state1, state2;
};

struct filter {
    uint32_t n_sections;
    struct biquad sections[FILTER_MAX_ORDER]; /* the gain lies in the first ones */
};

/* order 1 .. 8; 0 < cutoff_hz < rate_hz / 2; else STATUS_BAD_ARGUMENT. */
enum status filter_low_pass(uint32_t order, double cutoff_hz, double rate_hz, struct filter *out);
enum status filter_high_pass(uint32_t order, double cutoff_hz, double rate_hz, struct filter *out);
/* order is that of the low-pass prototype (1 .. 8): the filter has twice as many poles.
 * 0 < low_hz < high_hz < rate_hz / 2. */
enum status filter_band_pass(uint32_t order, double low_hz, double high_hz, double rate_hz,
                             struct filter *out);

/* Forgets the past, not the coefficients. */
void filter_reset(struct filter *filter);
/* The next output for the next input. */
double filter_step(struct filter *filter, double x);
/* The response at a frequency (a delay turns it by a negative angle), and its magnitude squared. */
double complex filter_response(const struct filter *filter, double frequency_hz, double rate_hz);
double filter_power_response(const struct filter *filter, double frequency_hz, double rate_hz);

#endif
