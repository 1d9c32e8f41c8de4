/* Sei whale. */
#include "scene/recipe.h"
#include <math.h>

/* Downsweep of 82 to 34 Hz in 1.1 to 1.4 s, single or two 3 to 4 s apart (Baumgartner et al. 2008, J. Acoust.
 * Soc. Am. 124, 1339, from memory; 34 to 87 Hz: Calderan et al. 2014); level from memory. */
static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    double vary = 1 + 0.03 * random_normal(random);
    recipe_tone(&out->sound, random_between(random, 1.1, 1.4), 1);
    contour_spiral(&out->sound.contour, 82 * vary, 34 * vary, out->sound.length_s, 0, 0);
    sound_normalize_mean_square(&out->sound);
    out->pulse_s[0] = 0;
    out->pulse_s[1] = random_between(random, 3, 4);
    recipe_alike(out, random_uniform(random) < 0.6 ? 2 : 1);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 10 + 30 * random_exponential(random);
}

const struct scene_kind kind_sei_downsweep = {
    .name = "sei whale downsweep",
    .class = "sei whale downsweep",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_BAND,
    .source_level_db = 178,
    .min_rate_hz = 500,
    .max_length_s = 6,
    .min_spacing_s = 10,
    .make = make,
    .spacing_s = spacing_s,
};
