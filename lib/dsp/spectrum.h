/* Windowed FFT of one real frame: plan, window and buffers live and die together (FFTW, single precision,
 * estimated plans, aligned buffers, so that the same samples give the same bits). */
#ifndef DSP_SPECTRUM_H
#define DSP_SPECTRUM_H

#include "base/status.h"
#include <stdint.h>

enum window_shape { WINDOW_HANN, WINDOW_SINE, WINDOW_RECTANGLE };

struct spectrum;

/* n is the frame length, even, 16 .. 1 << 21. Plans (not thread-safe: at start only). */
enum status spectrum_create(uint32_t n, enum window_shape shape, struct spectrum **out);
void spectrum_destroy(struct spectrum *spectrum);
/* Power of each of the n / 2 + 1 bins, scaled so that their sum is the windowed frame's mean square times
 * n / sum(window^2): white noise of variance v gives bins that sum to v on average (Parseval; one-sided). */
void spectrum_power(struct spectrum *spectrum, const float *frame, float *out_power);
/* The window, [n], for those who need its shape. */
const float *spectrum_get_window(const struct spectrum *spectrum);
/* The first `count` (1 .. n / 4 + 1) unscaled bins of the last spectrum_power, real and imaginary parts in
 * turn, [2 * count]. */
void spectrum_get_low_bins(const struct spectrum *spectrum, uint32_t count, float *out);

#endif
