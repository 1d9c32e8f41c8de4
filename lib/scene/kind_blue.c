/* Blue whale. */
#include "scene/recipe.h"
#include <math.h>

/* North-East Pacific B call, strongest at its third harmonic near 48 Hz (McDonald et al. 2006, J. Cetacean
 * Res. Manage. 8, 55). */
static void make_blue_moan(struct sound *out)
{
    double knots[7];
    for (int i = 0; i < 7; i++)
        knots[i] = 16.2 - 0.9 * pow(i / 6.0, 1.5);
    recipe_tone(out, 15.0, 0.1);
    contour_through(&out->contour, knots, 6, 15.0);
    recipe_partials(out, (const double[]){0.5, 0.35, 1.0, 0.2, 0.2}, 5);
}

static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    (void)random;
    make_blue_moan(&out->sound);
    sound_normalize_mean_square(&out->sound);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return 60 + 5 * random_normal(random);
}

const struct scene_kind kind_blue_moan = {
    .name = "blue whale moan",
    .class = "blue whale B call",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_BAND,
    .source_level_db = 186,
    .min_rate_hz = 500,
    .max_length_s = 15,
    .min_spacing_s = 40,
    .make = make,
    .spacing_s = spacing_s,
};
