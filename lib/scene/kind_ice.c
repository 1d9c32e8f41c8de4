/* Ice. */
#include "scene/recipe.h"
#include <math.h>

/* Cracks: impulses of 0.1 to 5 kHz (common practice, no source). */
static void make_crack(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    struct sound_part parts[8];
    for (uint32_t k = 0; k < 8; k++)
        parts[k] = (struct sound_part){.amplitude = pow(0.8, k),
                                       .frequency_hz = 120 * pow(1.65, k) * random_between(random, 0.9, 1.1),
                                       .width_s = 0.012 * pow(0.75, k)};
    recipe_pulse(&out->sound, SOUND_DAMPED, parts, 8);
    out->sound.rise_s = 3e-4;
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
}

static double crack_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return 0.2 + 8 * random_exponential(random);
}

const struct scene_kind kind_ice_cracks = {
    .name = "ice cracks",
    .class = "ice",
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 170,
    .min_rate_hz = 12000,
    .max_length_s = 0.2,
    .min_spacing_s = 0.2,
    .make = make_crack,
    .spacing_s = crack_spacing_s,
};

/* Squeals: tones of 0.2 to 2 kHz that drift for 0.3 to 3 s (common practice, no source). */
static void make_squeal(const struct kind_order *order, struct random *random, struct emission *out)
{
    static const struct recipe_whistle form = {.low_hz = 200,
                                               .high_hz = 2000,
                                               .shortest_s = 0.3,
                                               .longest_s = 3,
                                               .least_knots = 3,
                                               .most_knots = 5,
                                               .most_hz_s = 600,
                                               .second_low_db = -15,
                                               .second_high_db = -5};
    recipe_whistle(&form, order->rate_hz, random, &out->sound);
}

static double squeal_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 2 + 15 * random_exponential(random);
}

const struct scene_kind kind_ice_squeals = {
    .name = "ice squeals",
    .class = "ice",
    .snr = SNR_CELL,
    .cell_s = 0.064,
    .source_level_db = 150,
    .min_rate_hz = 8000,
    .max_length_s = 3,
    .min_spacing_s = 2,
    .make = make_squeal,
    .spacing_s = squeal_spacing_s,
};
