/* Signal-to-noise ratios of the truth: of a sound as a hydrophone hears it, over the scene's ambient noise.
 */
#ifndef SCENE_TRUTH_RATIO_H
#define SCENE_TRUTH_RATIO_H

#include "scene/kind.h"

/* As the kind states it (enum kind_snr), from the exposure (Pa2 s) and the peak (Pa) at the hydrophone; dB.
 * NAN where the kind states none or the scene has no ambient noise. Of a cell: the strongest partial, taken
 * as a steady tone; that a sweep spreads over cells is not counted. */
double truth_ratio_db(const struct scene *scene, const struct scene_kind *kind,
                      const struct emission *emission, double exposure, double peak);

#endif
