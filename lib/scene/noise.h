/* Ambient noise with the spectrum of sea/noise.h: Gaussian, independent from channel to channel, and random
 * access: any stretch of it comes out the same whatever came before.
 *
 * Method: segments of independent Gaussian spectra, shaped and transformed back, overlap by half under a sine
 * window. Since sin a sin(a + d) + cos a cos(a + d) = cos d does not depend on a, the sum is stationary; its
 * correlation is the spectrum's times a cosine that is wider than the sea's own. Below 10 Hz the spectrum
 * falls as a hydrophone's high-pass of first order does. */
#ifndef SCENE_NOISE_H
#define SCENE_NOISE_H

#include "base/status.h"
#include <stdint.h>

struct noise;

/* Plans (not thread-safe: at start only). STATUS_NO_MEMORY. The caller owns *out. */
enum status noise_create(double rate_hz, uint32_t n_channels, uint64_t seed, double wind_m_s, double shipping,
                         struct noise **out);
void noise_destroy(struct noise *noise);
/* Frames of one tile: a power of two, 42 to 84 ms, so that the spectrum is shaped each 6 to 12 Hz. */
uint32_t noise_tile_frames(double rate_hz);
/* Adds tile number `tile` of a channel (from 0), in pascals, to out [noise_tile_frames]. Tiles in order cost
 * half of tiles at random. */
void noise_add(struct noise *noise, uint64_t tile, uint32_t channel, float *out);
/* The level that it is shaped to, dB re 1 uPa2/Hz. */
double noise_level_db(double frequency_hz, double wind_m_s, double shipping);

#endif
