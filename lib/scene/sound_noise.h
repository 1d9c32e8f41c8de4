/* Noise as a formula: values at a lattice of times, drawn from a hash, with cubic B-splines between them, on
 * a carrier. Any stretch of it comes out the same whatever was asked for before. */
#ifndef SCENE_SOUND_NOISE_H
#define SCENE_SOUND_NOISE_H

#include "scene/sound.h"

/* Part k of a noise sound at times t0 + i dt for i in from .. to - 1, times scale0 + slope t. */
void sound_noise_add(const struct sound *sound, uint32_t k, uint64_t variant, double scale0, double slope,
                     double t0, double dt, uint32_t from, uint32_t to, float *out);
/* Of a part of amplitude 1: what its envelope squared adds up to, s. */
double sound_noise_part_s(const struct sound *sound, uint32_t k);
/* Tukey window: 1 in the middle, cosine over taper / 2 of the length at each end. */
double sound_window_at(double x, double taper);
/* Product of the sound's swells at a time. */
double sound_swell_at(const struct sound *sound, double time_s);

#endif
