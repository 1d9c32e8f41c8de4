/* Beaked whales. */
#include "scene/recipe.h"
#include <math.h>

/* Zimmer et al. 2005: upsweep about 42 kHz, 200 us. */
static void make_beaked_click(struct sound *out)
{
    recipe_pulse(
        out, SOUND_GAUSS,
        &(struct sound_part){.amplitude = 1, .frequency_hz = 42000, .width_s = 65e-6, .chirp_hz_s = 97e6}, 1);
}

static void make_clicks(const struct kind_order *order, struct random *random, struct emission *out)
{
    make_beaked_click(&out->sound);
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    struct recipe_rhythm rhythm = {
        .interval_s = 0.41, .low_s = 0.35, .high_s = 0.5, .scatter = 0.05, .sweep_db = 12};
    rhythm.pulses = recipe_between(random, 20, 80);
    recipe_train(order->emitter, rhythm, random, out);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 8 + 10 * random_exponential(random);
}

/* Zimmer et al. 2005, J. Acoust. Soc. Am. 117, 3919: Cuvier's beaked whale, 214 dB peak to peak on the axis.
 */
const struct scene_kind kind_beaked_clicks = {
    .name = "beaked whale clicks",
    .class = "beaked whale clicks",
    .group = GROUP_BEAKED_WHALE,
    .is_animal = true,
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 195,
    .min_rate_hz = 150000,
    .max_length_s = 60,
    .min_spacing_s = 8,
    .make = make_clicks,
    .spacing_s = spacing_s,
};

/* Blainville's beaked whale: upsweep of 110 kHz/ms, -10 dB from 26 to 51 kHz, 0.2 to 0.4 s apart (Johnson et
 * al. 2006, J. Exp. Biol. 209, 5038). */
static void make_blainville(const struct kind_order *order, struct random *random, struct emission *out)
{
    static const struct sound_part part = {
        .amplitude = 1, .frequency_hz = 38500, .width_s = 70e-6, .chirp_hz_s = 110e6};
    recipe_pulse(&out->sound, SOUND_GAUSS, &part, 1);
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    struct recipe_rhythm rhythm = {
        .low_s = 0.2, .high_s = 0.4, .walk = 0.02, .scatter = 0.05, .sweep_db = 12};
    rhythm.pulses = recipe_between(random, 20, 100);
    rhythm.interval_s = random_between(random, 0.25, 0.37);
    recipe_train(order->emitter, rhythm, random, out);
}

const struct scene_kind kind_blainville_clicks = {
    .name = "blainville clicks",
    .class = "beaked whale clicks",
    .group = GROUP_BEAKED_WHALE,
    .is_animal = true,
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 195,
    .min_rate_hz = 150000,
    .max_length_s = 45,
    .min_spacing_s = 8,
    .make = make_blainville,
    .spacing_s = spacing_s,
};
