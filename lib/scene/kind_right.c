/* Right whale. */
#include "scene/recipe.h"
#include <math.h>

/* Upsweep that quickens, 95 to 195 Hz (Clark 1982, Anim. Behav. 30, 1060). */
static void make_upcall(struct random *random, struct sound *out)
{
    double vary = 1 + 0.05 * random_normal(random);
    recipe_tone(out, random_between(random, 0.7, 1.1), 0.3);
    contour_cubic(&out->contour, (double[4]){95 * vary, 25 * vary, 0, 75 * vary}, out->length_s);
    recipe_partials(out, (const double[]){1.0, 0.15}, 2);
}

static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    make_upcall(random, &out->sound);
    sound_normalize_mean_square(&out->sound);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return 3 + 9 * random_exponential(random);
}

/* Parks and Tyack 2005, J. Acoust. Soc. Am. 117, 3297: tonal calls 137 to 162 dB (from memory). */
const struct scene_kind kind_right_upcall = {
    .name = "right whale upcall",
    .class = "right whale upcall",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.128,
    .source_level_db = 160,
    .min_rate_hz = 1000,
    .max_length_s = 1.5,
    .min_spacing_s = 3,
    .make = make,
    .spacing_s = spacing_s,
};
