/* Killer whale: pulsed calls. */
#include "scene/recipe.h"
#include <math.h>

/* Stereotyped pulsed call: pulses 250 to 2000 a second (here 300 to 1200), whose harmonics a resonance at 2
 * to 4 kHz shapes, and beside them a tone at 2 to 12 kHz of its own; 0.5 to 1.5 s, 152.6 dB (Miller 2006, J.
 * Comp. Physiol. A 192, 449). An animal has three types, and they return alike within 2 %. */
static void make_call(const struct kind_order *order, struct random *random, struct emission *out)
{
    struct random type;
    random_reset(&type, order->repertoire * 7 + random_bits(random) % 3);
    double vary = 1 + 0.02 * random_normal(random), length_s = random_between(&type, 0.5, 1.5);
    double knots[5], high[5], level[SOUND_MAX_PARTS], resonance_hz = random_between(&type, 2000, 4000);
    double rate_hz = random_between(&type, 350, 900), high_hz = random_between(&type, 6000, 10000), sum = 0;
    for (int i = 0; i < 5; i++) {
        knots[i] = vary * rate_hz * (1 + 0.3 * random_between(&type, -0.5, 1));
        high[i] = vary * high_hz * (1 + 0.15 * random_between(&type, -1, 1));
        sum += knots[i] / 5;
    }
    recipe_tone(&out->sound, length_s, 0.1);
    contour_through(&out->sound.contour, knots, 4, length_s);
    for (uint32_t k = 0; k < SOUND_MAX_PARTS; k++) {
        double hz = (k + 1) * sum, off = 5 * (hz / resonance_hz - resonance_hz / hz);
        level[k] = 1 / sqrt(1 + off * off);
    }
    recipe_partials(&out->sound, level, SOUND_MAX_PARTS);
    sound_normalize_mean_square(&out->sound);
    recipe_tone(&out->tail, length_s, 0.1);
    contour_through(&out->tail.contour, high, 4, length_s);
    sound_normalize_mean_square(&out->tail);
    sound_scale(&out->sound, sqrt(0.8)); /* the tone 6 dB below the pulses, 1 together */
    sound_scale(&out->tail, sqrt(0.2));
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 1 + 5 * random_exponential(random);
}

const struct scene_kind kind_killer_call = {
    .name = "killer whale call",
    .class = "killer whale call",
    .group = GROUP_DELPHINID,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.0213,
    .source_level_db = 152.6,
    .min_rate_hz = 36000,
    .max_length_s = 1.6,
    .min_spacing_s = 1,
    .make = make_call,
    .spacing_s = spacing_s,
};
