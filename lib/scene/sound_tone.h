/* Tones as samples; for sound.c alone. */
#ifndef SCENE_SOUND_TONE_H
#define SCENE_SOUND_TONE_H

#include "scene/sound.h"

/* A tone's envelope, gaps and swells in it, at a time since its start. */
double sound_tone_envelope_at(const struct sound *sound, double time_s);
/* As sound_add, samples [from, to) of out; the scale goes by scale0 + slope * time. */
void sound_tone_add(const struct sound *sound, uint64_t variant, const double *gain, double scale0,
                    double slope, double t0, double dt, uint32_t from, uint32_t to, float *out);

#endif
