/* Minke whale. */
#include "scene/recipe.h"
#include <math.h>

/* North Atlantic pulse trains: pulses of 40 to 60 ms at 200 to 400 Hz; slowing from 4.5 to 2.9 a second
 * in 60.9 s, or quickening from 1.5 to 2.8 in 43.7 s (Mellinger et al. 2000, Mar. Mamm. Sci. 16, 739); 164 to
 * 168 dB (Risch et al. 2014, Behaviour 151, 1335). */
static void make_pulse(struct random *random, struct sound *out)
{
    double length_s = random_between(random, 0.04, 0.06), hz = random_between(random, 250, 350);
    recipe_tone(out, length_s, 1);
    contour_cubic(&out->contour, (double[4]){hz, -0.1 * hz, 0, 0}, length_s);
    sound_normalize_mean_square(out);
}

static void make_slow(const struct kind_order *order, struct random *random, struct emission *out)
{
    make_pulse(random, &out->sound);
    struct recipe_ramp ramp = {
        .from_s = 1 / 4.5, .to_s = 1 / 2.9, .linear_rate = true, .scatter = 0.02, .level_db = 0.5};
    ramp.length_s = fmin(67, fmax(50, 60.9 + 5.8 * random_normal(random)));
    recipe_ramped_train(order->emitter, &ramp, random, out);
}

static void make_fast(const struct kind_order *order, struct random *random, struct emission *out)
{
    make_pulse(random, &out->sound);
    struct recipe_ramp ramp = {
        .from_s = 1 / 1.5, .to_s = 1 / 2.8, .linear_rate = true, .scatter = 0.02, .level_db = 0.5};
    ramp.length_s = fmin(60, fmax(30, 43.7 + 6 * random_normal(random)));
    recipe_ramped_train(order->emitter, &ramp, random, out);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + random_between(random, 20, 100);
}

const struct scene_kind kind_minke_slow = {
    .name = "minke slow-down train",
    .class = "minke pulse train",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_PULSE,
    .source_level_db = 166,
    .min_rate_hz = 2000,
    .max_length_s = 75,
    .min_spacing_s = 60,
    .make = make_slow,
    .spacing_s = spacing_s,
};

const struct scene_kind kind_minke_fast = {
    .name = "minke speed-up train",
    .class = "minke pulse train",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_PULSE,
    .source_level_db = 166,
    .min_rate_hz = 2000,
    .max_length_s = 65,
    .min_spacing_s = 50,
    .make = make_fast,
    .spacing_s = spacing_s,
};

/* North Pacific boing: a comb about 1.4 kHz, its lines 115 Hz apart (central; 92 eastern), 2.6 s after a
 * louder first pulse; each 6.85 min, or each 0.63 min near others (Rankin and Barlow 2005, J. Acoust. Soc.
 * Am. 118, 3346; Front. Mar. Sci. 2022, 897298); level from memory. */
enum { PULSE_RATE };

static void comb(double rate_hz, double length_s, struct sound *out)
{
    double level[SOUND_MAX_PARTS];
    for (uint32_t k = 0; k < SOUND_MAX_PARTS; k++) {
        double off = ((k + 1) * rate_hz - 1380) / 260;
        level[k] = exp(-off * off);
    }
    recipe_tone(out, length_s, fmin(1, 0.04 / length_s));
    contour_cubic(&out->contour, (double[4]){rate_hz, 0, 0, 0}, length_s);
    recipe_partials(out, level, SOUND_MAX_PARTS);
}

static void make_boing(const struct kind_order *order, struct random *random, struct emission *out)
{
    double rate_hz = order->emitter->settings[PULSE_RATE], length_s = 2.6 * exp(0.05 * random_normal(random));
    comb(rate_hz, fmin(3.6, length_s), &out->sound);
    out->sound.decay_s = 1.4;
    comb(rate_hz, 0.05, &out->tail);
    sound_scale(&out->tail, 2.2);
    double before = out->sound.parts[11].amplitude;
    sound_normalize_mean_square(&out->sound);
    sound_scale(&out->tail, out->sound.parts[11].amplitude / before);
}

static double boing_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return 38 + 10 * random_normal(random);
}

const struct scene_kind kind_minke_boing = {
    .name = "minke boing",
    .class = "minke boing",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.128,
    .source_level_db = 150,
    .min_rate_hz = 8000,
    .max_length_s = 3.6,
    .min_spacing_s = 10,
    .settings = {[PULSE_RATE] = {"pulse_rate_hz", 87, 130, 115}},
    .make = make_boing,
    .spacing_s = boing_spacing_s,
};
