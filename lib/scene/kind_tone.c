/* A steady tone for measuring: no animal. */
#include "scene/recipe.h"
#include <math.h>

enum { FREQUENCY, LENGTH };

static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)random;
    double length_s = order->emitter->settings[LENGTH];
    recipe_tone(&out->sound, length_s, 0.1);
    contour_cubic(&out->sound.contour, (double[4]){order->emitter->settings[FREQUENCY], 0, 0, 0}, length_s);
    sound_normalize_mean_square(&out->sound);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)random;
    return length_s + 1;
}

static double length_s(const struct scene_emitter *emitter)
{
    return emitter->settings[LENGTH];
}

const struct scene_kind kind_tone = {
    .name = "tone",
    .class = "tone",
    .is_animal = true, /* stands among the animals of a scene, though it is none */
    .snr = SNR_CELL,
    .cell_s = 0.1,
    .source_level_db = 160,
    .max_length_s = 60,
    .min_spacing_s = 0.05,
    .settings = {[FREQUENCY] = {"frequency_hz", 1, 500000, 1000}, [LENGTH] = {"length_s", 0.01, 60, 1}},
    .make = make,
    .spacing_s = spacing_s,
    .length_s = length_s,
};
