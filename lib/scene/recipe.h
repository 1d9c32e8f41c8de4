/* How animals and machines sound: recipes that make one call from a seed. Frequencies, lengths, intervals and
 * levels are of the published order; each recipe in recipe.c names what it follows. */
#ifndef SCENE_RECIPE_H
#define SCENE_RECIPE_H

#include "base/random.h"
#include "scene/emission.h"
#include "scene/scene.h"

struct recipe_facts {
    const char *name;
    enum group group;
    double source_level_db; /* of a tone: mean square; of a pulse: zero-to-peak */
    double min_rate_hz;     /* a lower sampling rate does not carry the call */
    double max_length_s;    /* of one call, without overrides */
    double min_spacing_s;   /* from one call's start to the next, without overrides */
};

const struct recipe_facts *recipe_facts(enum scene_voice voice);

/* Makes the sound of one call (of a train: its pulse) and, for trains, the pulse times and gains.
 * `repertoire` names the animal: the same value gives the same unit types. `unit` is which of them. */
void recipe_call(const struct scene_animal *animal, double rate_hz, struct random *random,
                 uint64_t repertoire, uint32_t unit, struct emission *out);

/* A blow of a pile, a shot of an airgun array: exposure 1. A ping: mean square 1. A snap: peak 1. */
void recipe_blow(double rate_hz, struct sound *out);
void recipe_shot(double rate_hz, struct sound *out);
void recipe_ping(double frequency_hz, double ping_s, struct sound *out);
void recipe_snap(double rate_hz, struct random *random, struct sound *out);

#endif
