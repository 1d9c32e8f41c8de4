/* Fin whale. */
#include "scene/recipe.h"
#include <math.h>

/* Watkins et al. 1987: 23 to 18 Hz in 1 s. */
static void make_fin_pulse(struct sound *out)
{
    recipe_tone(out, 1.0, 1.0);
    contour_cubic(&out->contour, (double[4]){23, -5, 0, 0}, 1.0);
}

static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    (void)random;
    make_fin_pulse(&out->sound);
    sound_normalize_mean_square(&out->sound);
}

/* Watkins et al. 1987: rests of 1 to 20 min each quarter of an hour. */
static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)length_s;
    return 15 + 0.6 * random_normal(random) + (order->rests ? random_between(random, 60, 150) : 0);
}

/* Watkins et al. 1987, J. Acoust. Soc. Am. 82, 1901: 20 Hz pulses of 1 s, 7 to 26 s apart, up to 186 dB. */
const struct scene_kind kind_fin_pulse = {
    .name = "fin whale pulse",
    .class = "fin whale 20 Hz pulse",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_BAND,
    .source_level_db = 186,
    .min_rate_hz = 200,
    .max_length_s = 1.0,
    .min_spacing_s = 10,
    .make = make,
    .spacing_s = spacing_s,
};

/* Song of two intervals in turn, every other note lower and some 4 dB weaker (Watkins et al. 1987;
 * Weirathmueller et al. 2013, J. Acoust. Soc. Am. 133, 741; Helble et al. 2020, Front. Mar. Sci. 7, 587110:
 * 12/20, 17/24, 28/33 s, single 17 and 30 s). */
enum { FIRST_INTERVAL, SECOND_INTERVAL };

static void make_song(const struct kind_order *order, struct random *random, struct emission *out)
{
    recipe_tone(&out->sound, 1.0, 1.0);
    double vary = 1 + 0.01 * random_normal(random);
    double from_hz = order->number % 2 ? 23 : 21.5, to_hz = order->number % 2 ? 18 : 16.5;
    contour_cubic(&out->sound.contour, (double[4]){vary * from_hz, vary * (to_hz - from_hz), 0, 0}, 1.0);
    sound_normalize_mean_square(&out->sound);
    if (order->number % 2 == 0)
        sound_scale(&out->sound, 0.63);
}

static double song_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)length_s;
    double interval_s = order->emitter->settings[order->number % 2 ? FIRST_INTERVAL : SECOND_INTERVAL];
    return interval_s * (1 + 0.04 * random_normal(random)) +
           (order->rests ? random_between(random, 60, 150) : 0);
}

const struct scene_kind kind_fin_song = {
    .name = "fin whale song",
    .class = "fin whale 20 Hz pulse",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_BAND,
    .source_level_db = 186,
    .min_rate_hz = 200,
    .max_length_s = 1.0,
    .min_spacing_s = 4,
    .settings = {[FIRST_INTERVAL] = {"first_interval_s", 7, 40, 12},
                 [SECOND_INTERVAL] = {"second_interval_s", 7, 40, 20}},
    .make = make_song,
    .spacing_s = song_spacing_s,
};

/* "40 Hz" call: some 75 to 40 Hz within 0.5 to 1 s, at no regular interval (Watkins 1981, Sci. Rep. Whales
 * Res. Inst. 33, 83; from memory). */
static void make_forty(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    double vary = 1 + 0.05 * random_normal(random);
    recipe_tone(&out->sound, random_between(random, 0.6, 1.0), 1.0);
    contour_spiral(&out->sound.contour, 75 * vary, 40 * vary, out->sound.length_s, 0, 0);
    sound_normalize_mean_square(&out->sound);
}

static double forty_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return 5 + 25 * random_exponential(random);
}

const struct scene_kind kind_fin_forty = {
    .name = "fin whale 40 Hz call",
    .class = "fin whale 40 Hz call",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_BAND,
    .source_level_db = 183,
    .min_rate_hz = 500,
    .max_length_s = 1.0,
    .min_spacing_s = 5,
    .make = make_forty,
    .spacing_s = forty_spacing_s,
};
