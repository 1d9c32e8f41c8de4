/* Sperm whale. */
#include "scene/recipe.h"
#include <math.h>

/* Off the axis: a row of pulses, one inter-pulse interval apart (Norris and Harvey 1972; Mohl 2001). */
static void make_sperm_click(uint64_t repertoire, struct sound *out)
{
    struct random size;
    random_reset(&size, repertoire);
    double interval_s = random_between(&size, 0.0025, 0.008), hz = random_between(&size, 8000, 12000);
    static const double amplitude[] = {0.35, -1.0, 0.35, -0.12, 0.05};
    struct sound_part parts[5];
    for (int i = 0; i < 5; i++)
        parts[i] = (struct sound_part){
            .amplitude = amplitude[i], .frequency_hz = hz, .delay_s = i * interval_s, .width_s = 45e-6};
    recipe_pulse(out, SOUND_GAUSS, parts, 5);
}

static void make_clicks(const struct kind_order *order, struct random *random, struct emission *out)
{
    struct random habit;
    random_reset(&habit, order->repertoire + 17);
    make_sperm_click(order->repertoire, &out->sound);
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    struct recipe_rhythm rhythm = {
        .low_s = 0.45, .high_s = 1.0, .walk = 0.004, .scatter = 0.03, .sweep_db = 6};
    rhythm.pulses = recipe_between(random, 120, SCENE_MAX_PULSES);
    rhythm.interval_s = random_between(&habit, 0.55, 0.95);
    recipe_train(order->emitter, rhythm, random, out);
}

static double click_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + random_between(random, 10, 60);
}

/* Mohl et al. 2003, J. Acoust. Soc. Am. 114, 1143: up to 236 dB on the axis; what is heard is off it. */
const struct scene_kind kind_sperm_clicks = {
    .name = "sperm whale clicks",
    .class = "sperm whale clicks",
    .group = GROUP_SPERM_WHALE,
    .is_animal = true,
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 200,
    .min_rate_hz = 44000,
    .max_length_s = 260,
    .min_spacing_s = 30,
    .make = make_clicks,
    .spacing_s = click_spacing_s,
};
