/* Lines that last: thrusters, strumming cables, electrical pick-up, humming fish. */
#include "scene/recipe.h"
#include <math.h>

/* Pieces of PIECE_S that overlap by EDGE_S; see sound.h. */
#define PIECE_S 6.0
#define EDGE_S 1.0

static void lasting_tone(const struct kind_order *order, double hz, double wander, double period_s,
                         struct sound *out)
{
    recipe_tone(out, PIECE_S, 2 * EDGE_S / PIECE_S);
    out->origin_s = order->since_s;
    contour_spiral(&out->contour, hz, hz, PIECE_S, wander, 1 / period_s);
}

/* The level while it lasts, the tapers of its pieces left out. */
static void normalize(struct sound *out)
{
    double sum = 0;
    for (uint32_t k = 0; k < out->n_parts; k++)
        sum += out->parts[k].amplitude * out->parts[k].amplitude / 2;
    sound_scale(out, 1 / sqrt(sum));
}

/* Pumps, thrusters, remotely operated vehicles: a stack of lines that wanders by less than 1 % in 10 s, and a
 * line of its converter at 10 to 30 kHz (common practice, no source). */
enum { FREQUENCY, CONVERTER };

static void make_thruster(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)random;
    double level[12];
    for (uint32_t k = 0; k < 12; k++)
        level[k] = pow(0.75, k);
    lasting_tone(order, order->emitter->settings[FREQUENCY], 0.01, 40, &out->sound);
    recipe_partials(&out->sound, level, 12);
    normalize(&out->sound);
    lasting_tone(order, order->emitter->settings[CONVERTER], 0.003, 57, &out->tail);
    normalize(&out->tail);
    sound_scale(&out->tail, 0.1);
}

const struct scene_kind kind_thruster = {
    .name = "thruster",
    .class = "ship",
    .source_level_db = 155,
    .max_length_s = 6,
    .min_spacing_s = 5,
    .lasts = true,
    .settings =
        {[FREQUENCY] = {"frequency_hz", 20, 2000, 240}, [CONVERTER] = {"converter_hz", 2000, 30000, 16000}},
    .make = make_thruster,
};

/* A cable that strums: 5 to 50 Hz and harmonics, with the speed of the tow; no two hydrophones alike (common
 * practice, no source). */
static void make_strum(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)random;
    lasting_tone(order, order->emitter->settings[FREQUENCY], 0.03, 21, &out->sound);
    recipe_partials(&out->sound, (const double[]){1, 0.6, 0.35, 0.2, 0.12, 0.07}, 6);
    normalize(&out->sound);
}

const struct scene_kind kind_strum = {
    .name = "strum",
    .class = "flow",
    .source_level_db = 120,
    .max_length_s = 6,
    .min_spacing_s = 5,
    .lasts = true,
    .reach = REACH_EACH,
    .settings = {[FREQUENCY] = {"frequency_hz", 3, 60, 18}},
    .make = make_strum,
};

/* Mains on the cable: 50 or 60 Hz and harmonics, odd ones stronger, the same on all channels at once (common
 * practice, no source). Its level is as the converter reads it. */
static void make_mains(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)random;
    double level[SOUND_MAX_PARTS];
    for (uint32_t k = 0; k < SOUND_MAX_PARTS; k++)
        level[k] = (k % 2 ? 0.15 : 1) / (k + 1);
    lasting_tone(order, order->emitter->settings[FREQUENCY], 1e-4, 33, &out->sound);
    recipe_partials(&out->sound, level, SOUND_MAX_PARTS);
    normalize(&out->sound);
}

const struct scene_kind kind_mains = {
    .name = "mains pick-up",
    .class = "electrical",
    .source_level_db = 110,
    .max_length_s = 6,
    .min_spacing_s = 5,
    .lasts = true,
    .reach = REACH_ALIKE,
    .settings = {[FREQUENCY] = {"frequency_hz", 45, 65, 50}},
    .make = make_mains,
};

/* A switching supply: a line of 20 to 200 kHz and harmonics that drifts as it warms (common practice, no
 * source). */
static void make_supply(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)random;
    lasting_tone(order, order->emitter->settings[FREQUENCY], 0.004, 90, &out->sound);
    recipe_partials(&out->sound, (const double[]){1, 0.4, 0.25}, 3);
    normalize(&out->sound);
}

const struct scene_kind kind_supply = {
    .name = "supply pick-up",
    .class = "electrical",
    .source_level_db = 95,
    .max_length_s = 6,
    .min_spacing_s = 5,
    .lasts = true,
    .reach = REACH_ALIKE,
    .settings = {[FREQUENCY] = {"frequency_hz", 3000, 200000, 65000}},
    .make = make_supply,
};

/* Midshipman's hum: 98 to 100 Hz and harmonics, flat, for minutes (McIver et al. 2014, J. Exp. Biol. 217,
 * 2377); level from memory. */
static void make_hum(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)random;
    double level[10];
    for (uint32_t k = 0; k < 10; k++)
        level[k] = pow(0.7, k);
    lasting_tone(order, order->emitter->settings[FREQUENCY], 0.001, 60, &out->sound);
    recipe_partials(&out->sound, level, 10);
    normalize(&out->sound);
}

const struct scene_kind kind_fish_hum = {
    .name = "fish hum",
    .class = "fish",
    .source_level_db = 150,
    .max_length_s = 6,
    .min_spacing_s = 5,
    .lasts = true,
    .settings = {[FREQUENCY] = {"frequency_hz", 60, 200, 99}},
    .make = make_hum,
};
