/* Seals. */
#include "scene/recipe.h"
#include <math.h>

/* Harbour seal roar: rough noise of 40 to 500 Hz, most of it at 60 to 100, pulsed and growing over some 3 s
 * to a burst that reaches 5 kHz; 4.8 s in all; 144 dB (Matthews et al. 2017, J. Acoust. Soc. Am. 141, EL274).
 */
static void make_roar(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    static const struct sound_part parts[] = {
        {.amplitude = 1, .frequency_hz = 80, .width_s = 0.02, .rise_s = 4.3, .decay_s = 0.06},
        {.amplitude = 0.6, .frequency_hz = 230, .width_s = 0.003, .rise_s = 4.3, .decay_s = 0.06},
        {.amplitude = 1.2,
         .frequency_hz = 120,
         .delay_s = 4.3,
         .width_s = 0.008,
         .rise_s = 0.1,
         .decay_s = 0.05},
        {.amplitude = 0.2,
         .frequency_hz = 1800,
         .delay_s = 4.3,
         .width_s = 4e-4,
         .rise_s = 0.1,
         .decay_s = 0.04}};
    recipe_pulse(&out->sound, SOUND_NOISE, parts, 4);
    out->sound.seed = random_bits(random);
    out->sound.swell_hz[0] = random_between(random, 10, 20);
    out->sound.swell_depth[0] = 0.8;
    sound_measure_length(&out->sound);
    sound_normalize_mean_square(&out->sound);
}

static double roar_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 8 + 25 * random_exponential(random);
}

const struct scene_kind kind_harbour_seal = {
    .name = "harbour seal roar",
    .class = "harbour seal roar",
    .group = GROUP_PHOCID,
    .is_animal = true,
    .snr = SNR_BAND,
    .source_level_db = 144,
    .min_rate_hz = 12000,
    .max_length_s = 5,
    .min_spacing_s = 8,
    .make = make_roar,
    .spacing_s = roar_spacing_s,
};

/* Bearded seal trill: falls from some 6 kHz (here 5) to a few hundred Hz, wobbling, in 20 to 70 s (here 60);
 * 178 dB (Cleator et al. 1989, Can. J. Zool. 67, 1900; figures from memory). */
static void make_trill(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    double length_s = random_between(random, 20, 60), vary = exp(0.1 * random_normal(random));
    recipe_tone(&out->sound, length_s, 0.05);
    contour_spiral(&out->sound.contour, 5000 * fmin(1.3, vary), 300 * vary, length_s,
                   random_between(random, 0.08, 0.15), random_between(random, 1, 4));
    sound_normalize_mean_square(&out->sound);
}

static double trill_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 20 + 60 * random_exponential(random);
}

const struct scene_kind kind_bearded_seal = {
    .name = "bearded seal trill",
    .class = "bearded seal trill",
    .group = GROUP_PHOCID,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.032,
    .source_level_db = 178,
    .min_rate_hz = 18000,
    .max_length_s = 60,
    .min_spacing_s = 40,
    .make = make_trill,
    .spacing_s = trill_spacing_s,
};
