/* Harbour porpoise. */
#include "scene/recipe.h"
#include <math.h>

/* Narrow band, high frequency: 129 to 145 kHz, some 100 us (Villadsgaard et al. 2007). */
static void make_porpoise_click(struct random *random, struct sound *out)
{
    recipe_pulse(out, SOUND_GAMMA,
                 &(struct sound_part){.amplitude = 1,
                                      .frequency_hz = random_between(random, 129000, 142000),
                                      .width_s = random_between(random, 16e-6, 20e-6)},
                 1);
}

static void make_clicks(const struct kind_order *order, struct random *random, struct emission *out)
{
    make_porpoise_click(random, &out->sound);
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    struct recipe_rhythm rhythm = {.low_s = 0.03, .high_s = 0.2, .walk = 0.04};
    rhythm.pulses = recipe_between(random, 8, 60);
    rhythm.interval_s = random_between(random, 0.04, 0.09);
    rhythm.sweep_db = random_between(random, 15, 25);
    recipe_train(order->emitter, rhythm, random, out);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 0.4 + 2.5 * random_exponential(random);
}

/* Villadsgaard et al. 2007, J. Exp. Biol. 210, 56: 178 to 205 dB peak to peak in the wild. */
const struct scene_kind kind_porpoise_clicks = {
    .name = "porpoise clicks",
    .class = "porpoise clicks",
    .group = GROUP_PORPOISE,
    .is_animal = true,
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 180,
    .min_rate_hz = 324000,
    .max_length_s = 13,
    .min_spacing_s = 0.4,
    .make = make_clicks,
    .spacing_s = spacing_s,
};

/* Feeding buzz: clicks that quicken from some 60 ms to 2 ms within a second, 10 to 20 dB weaker (Verfuss et
 * al. 2009, J. Exp. Biol. 212, 3436; figures from memory). */
static void make_buzz(const struct kind_order *order, struct random *random, struct emission *out)
{
    make_porpoise_click(random, &out->sound);
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    struct recipe_ramp ramp = {.from_s = 0.06, .length_s = 1, .scatter = 0.03, .level_db = 0.5};
    ramp.to_s = random_between(random, 0.0018, 0.0024);
    ramp.hold_s = random_between(random, 0.05, 0.18);
    recipe_ramped_train(order->emitter, &ramp, random, out);
}

static double buzz_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 2 + 6 * random_exponential(random);
}

const struct scene_kind kind_porpoise_buzz = {
    .name = "porpoise buzz",
    .class = "porpoise buzz",
    .group = GROUP_PORPOISE,
    .is_animal = true,
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 165,
    .min_rate_hz = 324000,
    .max_length_s = 1.5,
    .min_spacing_s = 2,
    .make = make_buzz,
    .spacing_s = buzz_spacing_s,
};
