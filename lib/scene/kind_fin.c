/* Fin whale. */
#include "scene/recipe.h"
#include <math.h>

/* Watkins et al. 1987: 23 to 18 Hz in 1 s. */
static void make_fin_pulse(struct sound *out)
{
    recipe_tone(out, 1.0, 1.0);
    contour_cubic(&out->contour, (double[4]){23, -5, 0, 0}, 1.0);
}

static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    (void)random;
    make_fin_pulse(&out->sound);
    sound_normalize_mean_square(&out->sound);
}

/* Watkins et al. 1987: rests of 1 to 20 min each quarter of an hour. */
static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)length_s;
    return 15 + 0.6 * random_normal(random) + (order->rests ? random_between(random, 60, 150) : 0);
}

/* Watkins et al. 1987, J. Acoust. Soc. Am. 82, 1901: 20 Hz pulses of 1 s, 7 to 26 s apart, up to 186 dB. */
const struct scene_kind kind_fin_pulse = {
    .name = "fin whale pulse",
    .class = "fin whale 20 Hz pulse",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_BAND,
    .source_level_db = 186,
    .min_rate_hz = 200,
    .max_length_s = 1.0,
    .min_spacing_s = 10,
    .make = make,
    .spacing_s = spacing_s,
};
