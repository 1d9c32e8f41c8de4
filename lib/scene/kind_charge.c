/* Small charges against seals, and explosives in miniature. */
#include "scene/recipe.h"
#include <math.h>

/* A shock of under 1 ms, the pulse of the collapsing bubble 5 to 100 ms later, reverberation for 0.3 to 1 s;
 * 190 to 233 dB peak (common practice, no source). */
enum { BUBBLE };

static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    double bubble_s = order->emitter->settings[BUBBLE] * exp(0.03 * random_normal(random));
    struct sound_part parts[16];
    for (uint32_t k = 0; k < 10; k++)
        parts[k] = (struct sound_part){
            .amplitude = pow(0.85, k), .frequency_hz = 300 * pow(1.6, k), .width_s = 8e-4 * pow(0.75, k)};
    for (uint32_t k = 0; k < 6; k++)
        parts[10 + k] = (struct sound_part){.amplitude = 0.35 * (k < 3 ? 1 : 0.4),
                                            .frequency_hz = 70 * pow(2, k % 3),
                                            .delay_s = bubble_s * (k < 3 ? 1 : 1.75),
                                            .width_s = 0.004};
    recipe_pulse(&out->sound, SOUND_DAMPED, parts, 16);
    out->sound.rise_s = 5e-5;
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    out->tail = (struct sound){.shape = SOUND_NOISE, .n_parts = 7, .seed = random_bits(random)};
    for (uint32_t k = 0; k < 7; k++) {
        double hz = 90 * pow(2, k);
        out->tail.parts[k] = (struct sound_part){.amplitude = 0.012,
                                                 .frequency_hz = hz,
                                                 .delay_s = 0.01,
                                                 .width_s = 0.83 / (0.7 * hz),
                                                 .rise_s = 0.02,
                                                 .decay_s = 0.14 * pow(0.9, k)};
    }
    sound_measure_length(&out->tail);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return 20 + 100 * random_exponential(random);
}

const struct scene_kind kind_charge = {
    .name = "charge",
    .class = "charge",
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 215,
    .min_rate_hz = 24000,
    .max_length_s = 1.3,
    .min_spacing_s = 5,
    .settings = {[BUBBLE] = {"bubble_s", 0.005, 0.2, 0.04}},
    .make = make,
    .spacing_s = spacing_s,
};
