/* Synthetic pulses of known shape, added to a buffer at sub-sample times. */
#ifndef SUPPORT_CLICKS_H
#define SUPPORT_CLICKS_H

#include "base/random.h"
#include <stddef.h>

/* amplitude * exp(-(t/sigma)^2 / 2) * cos(2 pi f t) centred at `frame` (Gabor pulse). Figures for species as
 * in Mohl 2003 (sperm whale: 15 kHz, sigma 38 us gives 109 us between the -10 dB points), Wahlberg 2011 and
 * Eskesen 2011 (bottlenose 0.7 of 45 kHz, 9 us and 1.0 of 105 kHz, 6 us; killer whale 32 kHz, 12 us). */
void clicks_add_gabor(float *out, size_t n, double rate_hz, double frame, double amplitude,
                      double frequency_hz, double sigma_s);
/* (t/tau)^2 exp(-t/tau) cos(2 pi f t), greatest value `amplitude`, beginning at `frame`: a porpoise's click
 * with tau 16 to 20 us (bandwidth and length inside Villadsgaard 2007). */
void clicks_add_porpoise(float *out, size_t n, double rate_hz, double frame, double amplitude,
                         double frequency_hz, double tau_s);
/* White Gaussian noise of that standard deviation. */
void clicks_add_noise(float *out, size_t n, double deviation, struct random *random);

#endif
