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

/* Creak: from some 5 clicks a second to 91 (11 ms), each 3.6 ms (Jaquet et al. 2001, J. Acoust. Soc. Am. 109,
 * 2254); 20 to 30 dB below the usual clicks (from memory). */
static void make_creak(const struct kind_order *order, struct random *random, struct emission *out)
{
    recipe_pulse(&out->sound, SOUND_GAUSS,
                 &(struct sound_part){.amplitude = 1, .frequency_hz = 12500, .width_s = 45e-6}, 1);
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    out->tail = (struct sound){.shape = SOUND_NOISE, .n_parts = 1, .seed = order->repertoire};
    out->tail.parts[0] = (struct sound_part){.amplitude = 0.12,
                                             .frequency_hz = 11000,
                                             .delay_s = 2e-4,
                                             .width_s = 1.2e-4,
                                             .rise_s = 1e-4,
                                             .decay_s = 8e-4};
    sound_measure_length(&out->tail);
    struct recipe_ramp ramp = {.from_s = 0.2, .scatter = 0.02, .level_db = 0.5};
    ramp.to_s = random_between(random, 0.011, 0.02);
    ramp.length_s = random_between(random, 5, 8);
    recipe_ramped_train(order->emitter, &ramp, random, out);
}

static double creak_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 10 + 40 * random_exponential(random);
}

const struct scene_kind kind_sperm_creak = {
    .name = "sperm whale creak",
    .class = "sperm whale creak",
    .group = GROUP_SPERM_WHALE,
    .is_animal = true,
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 175,
    .min_rate_hz = 44000,
    .max_length_s = 9,
    .min_spacing_s = 10,
    .make = make_creak,
    .spacing_s = creak_spacing_s,
};

/* Slow clicks (clangs): below 4 to 8 kHz, ringing for tens of ms, 4 to 8 s apart, heard some four times as
 * far as usual clicks (sperm whale surveys with hydrophones, Barlow and Taylor 2005, Mar. Mamm. Sci. 21, 429;
 * figures from memory); the level is an estimate. */
static void make_slow(const struct kind_order *order, struct random *random, struct emission *out)
{
    static const struct sound_part parts[] = {{.amplitude = 1, .frequency_hz = 1900, .width_s = 0.006},
                                              {.amplitude = 0.8, .frequency_hz = 2800, .width_s = 0.005},
                                              {.amplitude = 0.5, .frequency_hz = 4100, .width_s = 0.003}};
    recipe_pulse(&out->sound, SOUND_DAMPED, parts, 3);
    out->sound.rise_s = 2e-4;
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    struct recipe_rhythm rhythm = {.low_s = 4, .high_s = 8, .walk = 0.02, .scatter = 0.04, .sweep_db = 3};
    rhythm.pulses = recipe_between(random, 6, 20);
    rhythm.interval_s = random_between(random, 5, 7);
    recipe_train(order->emitter, rhythm, random, out);
}

static double slow_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 20 + 60 * random_exponential(random);
}

const struct scene_kind kind_sperm_slow = {
    .name = "sperm whale slow clicks",
    .class = "sperm whale slow clicks",
    .group = GROUP_SPERM_WHALE,
    .is_animal = true,
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 195,
    .min_rate_hz = 16000,
    .max_length_s = 170,
    .min_spacing_s = 30,
    .make = make_slow,
    .spacing_s = slow_spacing_s,
};

/* Codas by what 8,719 annotated ones do (Sharma et al. 2024, Nat. Commun. 15, 3617, data CC BY 4.0): mean
 * intervals of the seven commonest types, how common they are, and how an interval scatters within its type.
 */
struct coda {
    uint32_t count, n;
    double interval_s[8], scatter;
};

static const struct coda codas[] = {
    {3589, 4, {0.365, 0.352, 0.183, 0.172}, 0.2},
    {1510, 4, {0.095, 0.092, 0.074, 0.070}, 0.1},
    {642, 4, {0.288, 0.288, 0.293, 0.300}, 0.12},
    {340, 3, {0.333, 0.324, 0.321}, 0.18},
    {287, 4, {0.128, 0.128, 0.128, 0.128}, 0.09},
    {219, 3, {0.249, 0.160, 0.113}, 0.08},
    {137, 8, {0.047, 0.047, 0.047, 0.047, 0.047, 0.047, 0.047, 0.072}, 0.1},
    /* For the other 16 % of 6 to 10 clicks: medians of the 57 of 6 clicks and the 58 of 8 in the same data's
     * dialogues. */
    {700, 5, {0.198, 0.221, 0.131, 0.129, 0.183}, 0.25},
    {560, 7, {0.053, 0.060, 0.059, 0.053, 0.051, 0.061, 0.098}, 0.25},
};

/* Clicks with the pulses of clicks off the axis, less directional; 165 to 190 dB (from memory). */
static void make_coda(const struct kind_order *order, struct random *random, struct emission *out)
{
    uint32_t n_types = sizeof codas / sizeof codas[0], total = 0, type = 0;
    for (uint32_t i = 0; i < n_types; i++)
        total += codas[i].count;
    for (uint32_t at = (uint32_t)(random_bits(random) % total); at >= codas[type].count; type++)
        at -= codas[type].count;
    make_sperm_click(order->repertoire, &out->sound);
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    /* Most of the scatter is of the whole coda: its rhythm holds while its tempo changes. */
    double tempo = exp(0.9 * codas[type].scatter * random_normal(random)), at_s = 0;
    out->pulse_s[0] = 0;
    for (uint32_t i = 0; i < codas[type].n; i++) {
        at_s += fmax(0.03, tempo * codas[type].interval_s[i] *
                               exp(0.4 * codas[type].scatter * random_normal(random)));
        out->pulse_s[i + 1] = at_s;
    }
    recipe_alike(out, codas[type].n + 1);
}

static double coda_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 2 + 6 * random_exponential(random);
}

const struct scene_kind kind_sperm_coda = {
    .name = "sperm whale coda",
    .class = "sperm whale coda",
    .group = GROUP_SPERM_WHALE,
    .is_animal = true,
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 180,
    .min_rate_hz = 44000,
    .max_length_s = 4,
    .min_spacing_s = 2,
    .make = make_coda,
    .spacing_s = coda_spacing_s,
};
