/* From a source to a hydrophone: straight paths, spherical spreading, absorption, delays exact to a fraction
 * of a sample. The delay and the spreading of one sound go linearly from what they are at its start to what
 * they are at its end, which gives Doppler shift; absorption is taken at each component's (centre) frequency
 * and the range in the middle. */
#ifndef SCENE_PATH_H
#define SCENE_PATH_H

#include "scene/emission.h"
#include "scene/scene.h"
#include "sea/absorption.h"
#include <stdbool.h>
#include <stdint.h>

struct path_sea {
    const struct scene *scene; /* borrowed */
    double speed_m_s;
    struct absorption absorption;
};

struct path_sea path_sea_of(const struct scene *scene);

/* Metres from a place to a hydrophone (from 0); by way of the surface: from the source's mirror image.
 * Never less than 1 m, nearer than which a source level means nothing. */
double path_range_m(const struct path_sea *sea, const struct scene_place *from, uint32_t hydrophone,
                    bool by_surface);
/* The place of a source when it gave what a hydrophone hears at time_s, as its range. */
double path_retarded_range_m(const struct path_sea *sea, const struct scene_track *track, uint32_t hydrophone,
                             bool by_surface, double time_s);

/* When a hydrophone hears an emission, over all its pulses and both paths. */
void path_heard(const struct path_sea *sea, const struct emission *emission, uint32_t hydrophone,
                double *out_start_s, double *out_end_s);

/* Adds what a hydrophone hears of an emission, in pascals, to frames first_frame .. first_frame + n - 1 of
 * the scene. */
void path_add(const struct path_sea *sea, const struct emission *emission, uint32_t hydrophone,
              uint64_t first_frame, uint32_t n, float *out);

#endif
