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

/* Gunshot: an impulse of 20 Hz to 20 kHz (here 50 Hz to 5 kHz), 10 to 200 ms, 1 to 100 s apart, with the
 * modes of shallow water behind it at range (Parks et al. 2005, Mar. Mamm. Sci. 21, 458; 174 to 192 dB; from
 * memory). */
static void make_gunshot(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    struct sound_part parts[14];
    for (uint32_t k = 0; k < 10; k++) {
        double hz = 60 * pow(1.6, k);
        parts[k] = (struct sound_part){
            .amplitude = k < 5 ? 1 : pow(0.75, k - 4.0), .frequency_hz = hz, .width_s = 0.016 * pow(0.8, k)};
    }
    for (uint32_t k = 10; k < 14; k++) /* modes: the lower, the later */
        parts[k] = (struct sound_part){.amplitude = 0.25,
                                       .frequency_hz = random_between(random, 60, 90) * (k - 9),
                                       .delay_s = 0.2 / (k - 8),
                                       .width_s = 0.02};
    recipe_pulse(&out->sound, SOUND_DAMPED, parts, 14);
    out->sound.rise_s = 2e-4;
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
}

static double gunshot_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return fmin(100, 1 + 20 * random_exponential(random));
}

const struct scene_kind kind_right_gunshot = {
    .name = "right whale gunshot",
    .class = "right whale gunshot",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 184,
    .min_rate_hz = 12000,
    .max_length_s = 0.6,
    .min_spacing_s = 1,
    .make = make_gunshot,
    .spacing_s = gunshot_spacing_s,
};
