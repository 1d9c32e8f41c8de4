/* Deterrent devices (seal scarers). */
#include "base/units.h"
#include "scene/recipe.h"
#include <math.h>

/* Bursts of 0.5 s at 12 to 15 kHz in random blocks, 185 to 195 dB, with harmonics to beyond 100 kHz
 * (Mikkelsen et al. 2017, R. Soc. Open Sci. 4, 170286; levels of the harmonics are an estimate). */
enum { FREQUENCY, LENGTH };

static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    double length_s = order->emitter->settings[LENGTH], at_s = 0;
    recipe_tone(&out->sound, length_s, fmin(1, 0.004 / length_s));
    contour_cubic(&out->sound.contour, (double[4]){order->emitter->settings[FREQUENCY], 0, 0, 0}, length_s);
    double level[9];
    for (uint32_t k = 0; k < 9; k++)
        level[k] = k == 0 ? 1 : units_amplitude_ratio(-22.0 - 3.0 * (k - 1.0));
    recipe_partials(&out->sound, level, 9);
    sound_normalize_mean_square(&out->sound);
    uint32_t n = recipe_between(random, 2, 12);
    for (uint32_t i = 0; i < n; i++) {
        out->pulse_s[i] = at_s;
        at_s += length_s + random_between(random, 0.1, 1.5);
    }
    recipe_alike(out, n);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + random_between(random, 3, 40);
}

static double length_s(const struct scene_emitter *emitter)
{
    return 12 * (emitter->settings[LENGTH] + 1.5);
}

const struct scene_kind kind_deterrent = {
    .name = "deterrent",
    .class = "deterrent",
    .snr = SNR_CELL,
    .cell_s = 0.0213,
    .source_level_db = 190,
    .min_rate_hz = 36000,
    .max_length_s = 24,
    .min_spacing_s = 3,
    .settings = {[FREQUENCY] = {"frequency_hz", 2000, 20000, 14000}, [LENGTH] = {"length_s", 0.1, 2, 0.5}},
    .make = make,
    .spacing_s = spacing_s,
    .length_s = length_s,
};
