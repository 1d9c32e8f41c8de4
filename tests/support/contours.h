/* Test tones of known contour, and the sum of cell powers along the true contour (known shape and frequency,
 * unknown time), which no tracer can beat. All are invented by the formulas stated here. */
#ifndef SUPPORT_CONTOURS_H
#define SUPPORT_CONTOURS_H

#include "base/random.h"
#include "call/catalogue.h"
#include "dsp/spectrum.h"
#include <stdbool.h>
#include <stdint.h>

#define CONTOURS_MAX_FRAMES 4096

struct contour_signal {
    double rate_hz;
    uint32_t n, room; /* samples, and how many there is room for */
    float *samples;
    double *hz;
};

/* Room for `seconds` at rate_hz; false without memory. */
bool contour_signal_create(struct contour_signal *signal, double rate_hz, double seconds);
void contour_signal_destroy(struct contour_signal *signal);

/* Draws the next call of the class, of amplitude 1.
 * - "right whale upcall": Tukey window 0.3, f = 95 + 25 x + 75 x^3 Hz over 0.9 s (x from 0 to 1), which
 *   sweeps 95 to 195 Hz as published ones do.
 * - "delphinid whistle": 0.3 to 1 s, cubic through random knots between 5 and 17 kHz with at most 20 kHz/s,
 *   Tukey window 0.1.
 * - any other class: a straight sweep, Tukey window 0.2, of a length and an extent drawn from the middle of
 *   what the class allows, anywhere in its band, at most 20 s and at most half its steepest change. */
void contour_signal_draw(struct contour_signal *signal, const struct call_class *call_class,
                         struct random *random);
/* The longest that contour_signal_draw makes of the class. */
double contour_signal_longest_s(const struct call_class *call_class);

/* The class's own spectrum (Hann window, half overlap) and which cells a true contour runs through. */
struct contour_cells {
    struct spectrum *spectrum;
    uint32_t n; /* FFT size */
    uint32_t n_frames;
    uint32_t bin[CONTOURS_MAX_FRAMES];
    float *power;
};

bool contour_cells_create(struct contour_cells *cells, double window_s, double rate_hz);
void contour_cells_destroy(struct contour_cells *cells);
void contour_cells_find(struct contour_cells *cells, const struct contour_signal *signal);
/* Sum of the powers of `samples` along the contour last found, over the mean power of a noise cell of unit
 * variance. */
double contour_cells_sum(struct contour_cells *cells, const float *samples);

#endif
