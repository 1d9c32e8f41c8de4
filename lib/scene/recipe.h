/* What recipes share (kind_*.c), and the sounds of hammers, airguns, echosounders and shrimp. Frequencies,
 * lengths, intervals and levels are of the published order; each recipe names what it follows. */
#ifndef SCENE_RECIPE_H
#define SCENE_RECIPE_H

#include "base/random.h"
#include "scene/emission.h"
#include "scene/kind.h"
#include "scene/scene.h"

/* A tone of one partial; its contour is yet to be set. Partials of those amplitudes. */
void recipe_tone(struct sound *out, double length_s, double taper);
void recipe_partials(struct sound *sound, const double *amplitude, uint32_t n);
/* A pulse of parts; its length is yet to be measured. */
void recipe_pulse(struct sound *out, enum sound_shape shape, const struct sound_part *parts, uint32_t n);

/* How an animal strings its pulses. */
struct recipe_rhythm {
    uint32_t pulses;
    double interval_s, low_s, high_s;
    double walk;     /* sd of ln(interval) from one to the next, which is kept */
    double scatter;  /* sd of ln(interval), which is forgotten */
    double sweep_db; /* depth of the beam's sweep over the hydrophones */
    double ramp; /* the intervals go exponentially to interval_s times this over the train; 0: they do not */
};

/* Makes a train of the sound in *out by that rhythm; what the emitter states (pulses, pulse_interval_s)
 * overrides it, and keeps the interval near one value. */
void recipe_train(const struct scene_emitter *emitter, struct recipe_rhythm rhythm, struct random *random,
                  struct emission *out);

uint32_t recipe_between(struct random *random, uint32_t low, uint32_t high);

/* A blow of a pile, a shot of an airgun array: exposure 1. A ping: mean square 1. A snap: peak 1. */
void recipe_blow(double rate_hz, struct sound *out);
void recipe_shot(double rate_hz, struct sound *out);
void recipe_ping(double frequency_hz, double ping_s, struct sound *out);
void recipe_snap(double rate_hz, struct random *random, struct sound *out);

#endif
