/* What recipes share (kind_*.c), and the sounds of hammers, airguns, echosounders and shrimp. Frequencies,
 * lengths, intervals and levels are of the published order; each recipe names what it follows. */
#ifndef SCENE_RECIPE_H
#define SCENE_RECIPE_H

#include "base/random.h"
#include "scene/emission.h"
#include "scene/kind.h"
#include "scene/scene.h"
#include <stdbool.h>

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
};

/* Makes a train of the sound in *out by that rhythm; what the emitter states (pulses, pulse_interval_s)
 * overrides it, and keeps the interval near one value. */
void recipe_train(const struct scene_emitter *emitter, struct recipe_rhythm rhythm, struct random *random,
                  struct emission *out);

/* Pulses whose interval goes from one value to another, exponentially or so that their rate goes linearly,
 * and then stays. */
struct recipe_ramp {
    double from_s, to_s, length_s, hold_s;
    bool linear_rate;
    double scatter;  /* sd of ln(interval) */
    double level_db; /* sd of the level from pulse to pulse */
};

/* As recipe_train, by a ramp. At most SCENE_MAX_PULSES pulses. */
void recipe_ramped_train(const struct scene_emitter *emitter, const struct recipe_ramp *ramp,
                         struct random *random, struct emission *out);
/* So many pulses at times that the caller has set, all alike. */
void recipe_alike(struct emission *out, uint32_t n);

/* A whistle's form, for animals that differ in its bounds alone. */
struct recipe_whistle {
    double low_hz, high_hz, shortest_s, longest_s;
    uint32_t least_knots, most_knots;     /* 2 to 9 */
    double most_hz_s;                     /* slope from knot to knot */
    double second_low_db, second_high_db; /* of the second harmonic; the third is as far below it */
    double steps_share, gaps_share;       /* of the whistles that go by steps, that have gaps of 5 to 30 ms */
};

/* Makes one, mean square 1. Where the sampling rate ends early, so does its range. */
void recipe_whistle(const struct recipe_whistle *form, double rate_hz, struct random *random,
                    struct sound *out);

uint32_t recipe_between(struct random *random, uint32_t low, uint32_t high);

/* A blow of a pile, a shot of an airgun array: exposure 1. A ping: mean square 1. A snap: peak 1. */
void recipe_blow(double rate_hz, struct sound *out);
void recipe_shot(double rate_hz, struct sound *out);
/* What follows a shot, beside a sound of exposure 1: the burst of cavitating ghosts, exposure burst_s; what
 * comes back from the sea, exposure 0.1. */
void recipe_shot_tail(double burst_s, double reverberation_s, uint64_t seed, struct sound *out);
void recipe_ping(double frequency_hz, double ping_s, struct sound *out);
void recipe_snap(double rate_hz, struct random *random, struct sound *out);

#endif
