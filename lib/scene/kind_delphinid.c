/* Dolphins: whistles, clicks. */
#include "scene/recipe.h"
#include <math.h>

/* A smooth curve through 4 to 8 knots. Where the sampling rate ends early, so does the whistle's range. */
static void make_whistle(struct random *random, double rate_hz, struct sound *out)
{
    double knots[CONTOUR_MAX_SEGMENTS + 1];
    uint32_t n = 3 + (uint32_t)(random_bits(random) % 5);
    double length_s = random_between(random, 0.3, 1.5), top_hz = fmin(18000, 0.4 * rate_hz);
    double middle_hz = random_between(random, 6000, 0.8 * top_hz), most = 20000 * length_s / n;
    knots[0] = middle_hz;
    for (uint32_t i = 1; i <= n; i++) {
        double step_hz = random_between(random, -1, 1) * fmin(most, 0.35 * middle_hz);
        knots[i] = fmin(top_hz, fmax(4000, knots[i - 1] + step_hz));
    }
    recipe_tone(out, length_s, 0.1);
    contour_through(&out->contour, knots, n, length_s);
    recipe_partials(out, (const double[]){1.0, 0.12}, 2);
}

static void make_whistle_call(const struct kind_order *order, struct random *random, struct emission *out)
{
    make_whistle(random, order->rate_hz, &out->sound);
    sound_normalize_mean_square(&out->sound);
}

static double whistle_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 0.2 + 1.2 * random_exponential(random);
}

const struct scene_kind kind_delphinid_whistle = {
    .name = "delphinid whistle",
    .class = "delphinid whistle",
    .group = GROUP_DELPHINID,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.0213, /* 1024 samples at 48 kHz */
    .source_level_db = 155,
    .min_rate_hz = 24000,
    .max_length_s = 1.5,
    .min_spacing_s = 0.25,
    .make = make_whistle_call,
    .spacing_s = whistle_spacing_s,
};

/* Two lobes at 45 and 105 kHz (Au 1993, "The sonar of dolphins"), stretched up to 1.7 times as off the axis.
 */
static void make_delphinid_click(struct random *random, struct sound *out)
{
    double stretch = random_between(random, 1.0, 1.7);
    struct sound_part parts[] = {
        {.amplitude = 0.7, .frequency_hz = 45000 / stretch, .width_s = 9e-6 * stretch},
        {.amplitude = 1.0 / stretch, .frequency_hz = 105000 / stretch, .width_s = 6e-6 * stretch}};
    parts[1].delay_s = 4.5 * (parts[0].width_s - parts[1].width_s);
    recipe_pulse(out, SOUND_GAUSS, parts, 2);
}

static void make_clicks(const struct kind_order *order, struct random *random, struct emission *out)
{
    make_delphinid_click(random, &out->sound);
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    struct recipe_rhythm rhythm = {.low_s = 0.01, .high_s = 0.2, .scatter = 0.15};
    rhythm.pulses = recipe_between(random, 10, 60);
    rhythm.interval_s = random_between(random, 0.03, 0.15);
    rhythm.sweep_db = random_between(random, 6, 15);
    recipe_train(order->emitter, rhythm, random, out);
}

static double click_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 0.4 + 2.5 * random_exponential(random);
}

const struct scene_kind kind_delphinid_clicks = {
    .name = "delphinid clicks",
    .class = "delphinid clicks",
    .group = GROUP_DELPHINID,
    .is_animal = true,
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 200,
    .min_rate_hz = 44000,
    .max_length_s = 12,
    .min_spacing_s = 0.5,
    .make = make_clicks,
    .spacing_s = click_spacing_s,
};

/* Burst pulses: clicks 0.5 to 10 ms apart for 0.05 to 2 s (Au 1993, "The sonar of dolphins"; figures from
 * memory). */
static void make_burst(const struct kind_order *order, struct random *random, struct emission *out)
{
    make_delphinid_click(random, &out->sound);
    sound_measure_length(&out->sound);
    sound_normalize_peak(&out->sound);
    struct recipe_ramp ramp = {.length_s = random_between(random, 0.1, 0.5), .scatter = 0.04, .level_db = 1};
    ramp.from_s = random_between(random, 0.002, 0.008);
    ramp.to_s = ramp.from_s * random_between(random, 0.7, 1.4);
    recipe_ramped_train(order->emitter, &ramp, random, out);
}

static double burst_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 0.5 + 4 * random_exponential(random);
}

const struct scene_kind kind_delphinid_burst = {
    .name = "delphinid burst pulse",
    .class = "delphinid burst pulse",
    .group = GROUP_DELPHINID,
    .is_animal = true,
    .level = LEVEL_PEAK,
    .snr = SNR_PULSE,
    .source_level_db = 195,
    .min_rate_hz = 44000,
    .max_length_s = 1,
    .min_spacing_s = 0.5,
    .make = make_burst,
    .spacing_s = burst_spacing_s,
};
