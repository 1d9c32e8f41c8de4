/* Blue whale. */
#include "scene/recipe.h"
#include <math.h>

/* North-East Pacific B call, strongest at its third harmonic near 48 Hz (McDonald et al. 2006, J. Cetacean
 * Res. Manage. 8, 55). */
static void make_blue_moan(struct sound *out)
{
    double knots[7];
    for (int i = 0; i < 7; i++)
        knots[i] = 16.2 - 0.9 * pow(i / 6.0, 1.5);
    recipe_tone(out, 15.0, 0.1);
    contour_through(&out->contour, knots, 6, 15.0);
    recipe_partials(out, (const double[]){0.5, 0.35, 1.0, 0.2, 0.2}, 5);
}

static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    (void)random;
    make_blue_moan(&out->sound);
    sound_normalize_mean_square(&out->sound);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return 60 + 5 * random_normal(random);
}

const struct scene_kind kind_blue_moan = {
    .name = "blue whale moan",
    .class = "blue whale B call",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_BAND,
    .source_level_db = 186,
    .min_rate_hz = 500,
    .max_length_s = 15,
    .min_spacing_s = 40,
    .make = make,
    .spacing_s = spacing_s,
};

/* North-East Pacific A call: pulsed 1.5 times a second, strong near 90 Hz, 17 to 20 s (PMEL description;
 * McDonald et al. 2006); level from memory. */
static void make_a(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    recipe_tone(&out->sound, random_between(random, 17, 20), 0.05);
    double vary = 1 + 0.01 * random_normal(random);
    contour_cubic(&out->sound.contour, (double[4]){90 * vary, -1.5, 0, 0}, out->sound.length_s);
    out->sound.pulse_rate_hz = 1.5;
    sound_normalize_mean_square(&out->sound);
}

static double a_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return 120 + 10 * random_normal(random);
}

const struct scene_kind kind_blue_a = {
    .name = "blue whale A call",
    .class = "blue whale A call",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_BAND,
    .source_level_db = 182,
    .min_rate_hz = 500,
    .max_length_s = 20,
    .min_spacing_s = 60,
    .make = make_a,
    .spacing_s = a_spacing_s,
};

/* D call: down from 90 to 30 Hz (here 80 to 40) in 1 to 4 s, irregular (Berchok et al. 2004); level from
 * memory. */
static void make_d(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    double vary = 1 + 0.06 * random_normal(random);
    recipe_tone(&out->sound, random_between(random, 1.5, 4), 1);
    contour_spiral(&out->sound.contour, 80 * vary, 40 * vary, out->sound.length_s, 0, 0);
    sound_normalize_mean_square(&out->sound);
}

static double d_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 5 + 30 * random_exponential(random);
}

const struct scene_kind kind_blue_d = {
    .name = "blue whale D call",
    .class = "blue whale D call",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.512,
    .source_level_db = 170,
    .min_rate_hz = 500,
    .max_length_s = 4,
    .min_spacing_s = 6,
    .make = make_d,
    .spacing_s = d_spacing_s,
};

/* Antarctic Z call: 25 to 28 Hz for 8 to 12 s, down within 2 s, 18 to 19 Hz for some 8 s; each 60 to 65 s;
 * 189 dB (Sirovic et al. 2007, J. Acoust. Soc. Am. 122, 1208; from memory). */
static void make_z(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    (void)random;
    static const double knots[] = {27, 27, 26.9, 26.8, 26.6, 19, 18.7, 18.5, 18.3};
    recipe_tone(&out->sound, 20, 0.1);
    contour_through(&out->sound.contour, knots, 8, 20);
    sound_normalize_mean_square(&out->sound);
}

static double z_spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    (void)length_s;
    return random_between(random, 60, 65);
}

const struct scene_kind kind_blue_z = {
    .name = "blue whale Z call",
    .class = "blue whale Z call",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_BAND,
    .source_level_db = 189,
    .min_rate_hz = 200,
    .max_length_s = 20,
    .min_spacing_s = 50,
    .make = make_z,
    .spacing_s = z_spacing_s,
};
