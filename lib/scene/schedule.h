/* The emissions of one source of a scene, in order of time: a generator of constant memory. Its n-th emission
 * depends on the scene's seed, the source's place in the scene and n alone: changing one animal leaves the
 * others as they were. */
#ifndef SCENE_SCHEDULE_H
#define SCENE_SCHEDULE_H

#include "base/random.h"
#include "scene/emission.h"
#include "scene/scene.h"
#include <stdbool.h>
#include <stdint.h>

/* animals and emitters * members, hammers, airguns, echosounders, shrimp */
#define SCHEDULE_MAX                                                                                         \
    ((SCENE_MAX_ANIMALS + SCENE_MAX_EMITTERS) * SCENE_MAX_MEMBERS + SCENE_MAX_HAMMERS + SCENE_MAX_AIRGUNS +  \
     SCENE_MAX_ECHOSOUNDERS + 1)

struct schedule {
    const struct scene *scene; /* borrowed */
    enum emission_kind kind;
    uint32_t source, member; /* from 0 */
    struct scene_track track;
    uint64_t identity; /* seeds everything of this source */
    /* where it stands */
    uint64_t number;
    double next_s;
    uint32_t step;                                              /* of a hammer */
    double step_start_s;                                        /* of a hammer */
    uint32_t in_phrase, phrase_length, phrases_left, phrase[8]; /* of a song */
    uint32_t n_types;
    uint32_t until_rest; /* calls before the next long pause */
};

/* Fills the table with every source of the scene; returns how many. `out` holds SCHEDULE_MAX or fewer, as
 * schedule_count says. */
uint32_t schedule_count(const struct scene *scene);
void schedule_list(const struct scene *scene, struct schedule *out);

/* Back to the first emission. */
void schedule_reset(struct schedule *schedule);
/* Writes the next emission; false after the last. */
bool schedule_next(struct schedule *schedule, struct emission *out);

/* Bounds that hold for every emission of this source: how long one lasts, and how long after one the next
 * begins at the earliest. */
double schedule_max_length_s(const struct schedule *schedule);
double schedule_min_spacing_s(const struct schedule *schedule);

#endif
