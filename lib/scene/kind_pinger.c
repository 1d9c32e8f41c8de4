/* Pingers on nets, against bycatch. */
#include "scene/recipe.h"
#include <math.h>

/* European Regulation 812/2004, Annex II (from memory): either 10 kHz for 300 ms each 4 s at 130 to 150 dB,
 * or sweeps within 20 to 160 kHz of 200 to 300 ms at random intervals of 4 to 30 s at 145 dB. */
enum { FREQUENCY };

static void make_tone(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)random;
    recipe_tone(&out->sound, 0.3, 0.02);
    contour_cubic(&out->sound.contour, (double[4]){order->emitter->settings[FREQUENCY], 0, 0, 0}, 0.3);
    recipe_partials(&out->sound, (const double[]){1, 0.1, 0.2, 0.05, 0.1}, 5);
    sound_normalize_mean_square(&out->sound);
}

const struct scene_kind kind_pinger = {
    .name = "net pinger",
    .class = "pinger",
    .snr = SNR_CELL,
    .cell_s = 0.0213,
    .source_level_db = 145,
    .min_rate_hz = 32000,
    .max_length_s = 0.3,
    .min_spacing_s = 4,
    .is_machine = true,
    .settings = {[FREQUENCY] = {"frequency_hz", 8000, 14000, 10000}},
    .make = make_tone,
};

/* Where the sampling rate ends early, so do the sweeps. */
static void make_sweep(const struct kind_order *order, struct random *random, struct emission *out)
{
    double top_hz = fmin(160000, 0.44 * order->rate_hz), length_s = random_between(random, 0.2, 0.3);
    double a = random_between(random, 20000, 0.6 * top_hz), b = random_between(random, 0.6 * top_hz, top_hz);
    bool up = random_bits(random) & 1;
    recipe_tone(&out->sound, length_s, 0.02);
    contour_cubic(&out->sound.contour, (double[4]){up ? a : b, up ? b - a : a - b, 0, 0}, length_s);
    sound_normalize_mean_square(&out->sound);
}

static double sweep_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return random_between(random, 4, 30);
}

const struct scene_kind kind_sweep_pinger = {
    .name = "sweeping net pinger",
    .class = "pinger",
    .snr = SNR_CELL,
    .cell_s = 0.0053 /* 1024 samples at 192 kHz */,
    .source_level_db = 145,
    .min_rate_hz = 96000,
    .max_length_s = 0.3,
    .min_spacing_s = 4,
    .make = make_sweep,
    .spacing_s = sweep_spacing_s,
};
