/* Fish that grunt and knock; many members make a chorus. */
#include "scene/recipe.h"
#include <math.h>

/* Terapontids: grunts of 73 to 260 ms, 11 to 21 pulses at 87 to 121 a second, 141 to 154 dB (abstract on
 * Terapon theraps read). */
static void make_grunt(const struct kind_order *order, struct random *random, struct emission *out)
{
    static const struct sound_part parts[] = {{.amplitude = 1, .frequency_hz = 320, .width_s = 0.0025},
                                              {.amplitude = 0.6, .frequency_hz = 640, .width_s = 0.002},
                                              {.amplitude = 0.2, .frequency_hz = 1300, .width_s = 0.001}};
    recipe_pulse(&out->sound, SOUND_DAMPED, parts, 3);
    out->sound.rise_s = 3e-4;
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    double rate = random_between(random, 87, 121);
    struct recipe_rhythm rhythm = {.low_s = 0.9 / rate, .high_s = 1.1 / rate, .scatter = 0.02, .sweep_db = 6};
    rhythm.interval_s = 1 / rate;
    rhythm.pulses = recipe_between(random, 11, 21);
    recipe_train(order->emitter, rhythm, random, out);
}

static double grunt_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 0.4 + 3 * random_exponential(random);
}

const struct scene_kind kind_fish_grunts = {
    .name = "fish grunts",
    .class = "fish",
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 150,
    .min_rate_hz = 8000,
    .max_length_s = 0.4,
    .min_spacing_s = 0.5,
    .make = make_grunt,
    .spacing_s = grunt_spacing_s,
};

/* Knocks of a chorus of dusk and dawn: 150 to 4800 Hz, two pulses 8.7 ms apart, each 1.5 to 1.9 s (Front.
 * Mar. Sci. 2021, 671965, abstract); level from memory. */
static void make_knock(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    static const struct sound_part parts[] = {{.amplitude = 1, .frequency_hz = 400, .width_s = 0.0035},
                                              {.amplitude = 0.7, .frequency_hz = 1100, .width_s = 0.001},
                                              {.amplitude = 0.4, .frequency_hz = 2700, .width_s = 0.0005}};
    recipe_pulse(&out->sound, SOUND_DAMPED, parts, 3);
    out->sound.rise_s = 2e-4;
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    out->pulse_s[0] = 0;
    out->pulse_s[1] = 0.0087 * (1 + 0.02 * random_normal(random));
    recipe_alike(out, 2);
}

static double knock_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return random_between(random, 1.5, 1.9);
}

const struct scene_kind kind_fish_knocks = {
    .name = "fish knocks",
    .class = "fish",
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 145,
    .min_rate_hz = 12000,
    .max_length_s = 0.1,
    .min_spacing_s = 1.4,
    .make = make_knock,
    .spacing_s = knock_spacing_s,
};
