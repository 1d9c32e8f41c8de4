/* Whistles that differ in their bounds; recipe_whistle draws them. */
#include "scene/recipe.h"
#include <math.h>

/* Whistles of bottlenose dolphins and their like: 2 to 24 kHz, 0.1 to 2 s, 0 to 4 inflections, 114 to 163 dB
 * (Frankel et al. 2014, J. Acoust. Soc. Am. 135, 1624: median 138; louder ones elsewhere); harmonics, steps
 * and gaps as Roch et al. 2011 (J. Acoust. Soc. Am. 130, 2212) meet them. */
static void make_varied(const struct kind_order *order, struct random *random, struct emission *out)
{
    static const struct recipe_whistle form = {.low_hz = 3000,
                                               .high_hz = 24000,
                                               .shortest_s = 0.2,
                                               .longest_s = 1.5,
                                               .least_knots = 3,
                                               .most_knots = 8,
                                               .most_hz_s = 40000,
                                               .second_low_db = -25,
                                               .second_high_db = -10,
                                               .steps_share = 0.15,
                                               .gaps_share = 0.3};
    recipe_whistle(&form, order->rate_hz, random, &out->sound);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 0.2 + 1.2 * random_exponential(random);
}

const struct scene_kind kind_varied_whistle = {
    .name = "varied delphinid whistle",
    .class = "delphinid whistle",
    .group = GROUP_DELPHINID,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.0213 /* 1024 samples at 48 kHz */,
    .source_level_db = 155,
    .min_rate_hz = 24000,
    .max_length_s = 1.5,
    .min_spacing_s = 0.25,
    .make = make_varied,
    .spacing_s = spacing_s,
};

/* Rough-toothed dolphin: 1.2 to 9.7 kHz, 115 to 826 ms, some 4.5 steps, 149.5 dB (abstract read; Lima et al.
 * 2012, J. Acoust. Soc. Am. 131, from memory). */
static void make_stepped(const struct kind_order *order, struct random *random, struct emission *out)
{
    static const struct recipe_whistle form = {.low_hz = 1200,
                                               .high_hz = 9700,
                                               .shortest_s = 0.115,
                                               .longest_s = 0.826,
                                               .least_knots = 5,
                                               .most_knots = 7,
                                               .most_hz_s = 15000,
                                               .second_low_db = -25,
                                               .second_high_db = -12,
                                               .steps_share = 1};
    recipe_whistle(&form, order->rate_hz, random, &out->sound);
}

const struct scene_kind kind_stepped_whistle = {
    .name = "stepped whistle",
    .class = "delphinid whistle",
    .group = GROUP_DELPHINID,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.0213,
    .source_level_db = 149.5,
    .min_rate_hz = 24000,
    .max_length_s = 0.9,
    .min_spacing_s = 0.25,
    .make = make_stepped,
    .spacing_s = spacing_s,
};

/* Killer whale: fundamentals of 0.6 to 29 kHz, 0.06 to 18 s, 140 dB (Miller 2006, J. Comp. Physiol. A 192,
 * 449; Wellard et al. 2015, PLoS ONE 10, e0136535). */
static void make_killer(const struct kind_order *order, struct random *random, struct emission *out)
{
    static const struct recipe_whistle form = {.low_hz = 3000,
                                               .high_hz = 14000,
                                               .shortest_s = 0.4,
                                               .longest_s = 3,
                                               .least_knots = 4,
                                               .most_knots = 8,
                                               .most_hz_s = 12000,
                                               .second_low_db = -22,
                                               .second_high_db = -10};
    recipe_whistle(&form, order->rate_hz, random, &out->sound);
}

const struct scene_kind kind_killer_whistle = {
    .name = "killer whale whistle",
    .class = "delphinid whistle",
    .group = GROUP_DELPHINID,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.0213,
    .source_level_db = 140,
    .min_rate_hz = 36000,
    .max_length_s = 3,
    .min_spacing_s = 0.25,
    .make = make_killer,
    .spacing_s = spacing_s,
};

/* Pilot whale: 1 to 20 kHz, 0.3 to 2 s (from memory). */
static void make_pilot(const struct kind_order *order, struct random *random, struct emission *out)
{
    static const struct recipe_whistle form = {.low_hz = 1500,
                                               .high_hz = 9000,
                                               .shortest_s = 0.3,
                                               .longest_s = 2,
                                               .least_knots = 3,
                                               .most_knots = 6,
                                               .most_hz_s = 10000,
                                               .second_low_db = -20,
                                               .second_high_db = -8,
                                               .gaps_share = 0.2};
    recipe_whistle(&form, order->rate_hz, random, &out->sound);
}

const struct scene_kind kind_pilot_whistle = {
    .name = "pilot whale whistle",
    .class = "delphinid whistle",
    .group = GROUP_DELPHINID,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.0213,
    .source_level_db = 165,
    .min_rate_hz = 24000,
    .max_length_s = 2,
    .min_spacing_s = 0.25,
    .make = make_pilot,
    .spacing_s = spacing_s,
};

/* Beluga: means of 2.0 to 5.9 kHz, 0.25 to 1.95 s, 2.3 inflections (Sjare and Smith 1986, Can. J. Zool. 64,
 * 407; Belikov and Bel'kovich 2006, Acoust. Phys. 52, 125); level from memory. */
static void make_beluga(const struct kind_order *order, struct random *random, struct emission *out)
{
    static const struct recipe_whistle form = {.low_hz = 1800,
                                               .high_hz = 6500,
                                               .shortest_s = 0.25,
                                               .longest_s = 1.95,
                                               .least_knots = 4,
                                               .most_knots = 6,
                                               .most_hz_s = 9000,
                                               .second_low_db = -25,
                                               .second_high_db = -12};
    recipe_whistle(&form, order->rate_hz, random, &out->sound);
}

const struct scene_kind kind_beluga_whistle = {
    .name = "beluga whistle",
    .class = "beluga call",
    .group = GROUP_DELPHINID,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.0213,
    .source_level_db = 155,
    .min_rate_hz = 24000,
    .max_length_s = 2,
    .min_spacing_s = 0.25,
    .make = make_beluga,
    .spacing_s = spacing_s,
};
