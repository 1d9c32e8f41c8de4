/* Humpback whale. */
#include "base/units.h"
#include "scene/recipe.h"
#include <math.h>

/* Song units (Payne and McVay 1971, Science 173, 585): sweeps, harmonic stacks, grunts, cries. Type by type
 * they return alike within 2 %. */
static void make_humpback_unit(struct random *random, uint64_t repertoire, uint32_t unit, struct sound *out)
{
    struct random type;
    random_reset(&type, repertoire * 131 + unit);
    uint32_t form = (unit + (uint32_t)(repertoire & 3)) % 4;
    double vary = 1 + 0.02 * random_normal(random), length_s, knots[5];
    double level[8];
    uint32_t n = 1;
    if (form == 0) { /* sweep */
        length_s = random_between(&type, 0.8, 2.2);
        double from = random_between(&type, 250, 700), to = from * random_between(&type, 1.4, 2.4);
        for (int i = 0; i < 5; i++)
            knots[i] = from + (to - from) * i / 4.0;
        n = 2;
    } else if (form == 1) { /* harmonic stack that arches */
        length_s = random_between(&type, 1.0, 3.0);
        double base = random_between(&type, 150, 450), arch = random_between(&type, 0.1, 0.35);
        for (int i = 0; i < 5; i++)
            knots[i] = base * (1 + arch * sin(0.785398 * i));
        n = 5;
    } else if (form == 2) { /* pulsed grunt */
        length_s = random_between(&type, 0.4, 1.0);
        double base = random_between(&type, 90, 180);
        for (int i = 0; i < 5; i++)
            knots[i] = base * (1 - 0.03 * i);
        n = 6;
    } else { /* cry */
        length_s = random_between(&type, 0.6, 1.8);
        double base = random_between(&type, 600, 1400);
        for (int i = 0; i < 5; i++)
            knots[i] = base * (1 + 0.12 * sin(1.3 * i));
        n = 4;
    }
    for (int i = 0; i < 5; i++)
        knots[i] *= vary;
    recipe_tone(out, length_s, 0.25);
    contour_through(&out->contour, knots, 4, length_s);
    out->pulse_rate_hz = form == 2 ? random_between(&type, 15, 45) : 0;
    for (uint32_t k = 0; k < n; k++)
        level[k] = units_amplitude_ratio(-7.0 * k);
    recipe_partials(out, level, n);
}

static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    make_humpback_unit(random, order->repertoire, order->unit, &out->sound);
    sound_normalize_mean_square(&out->sound);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return fmax(random_between(random, 1.5, 4.0), length_s + 0.4);
}

const struct scene_kind kind_humpback_song = {
    .name = "humpback song",
    .class = "humpback song",
    .group = GROUP_BALEEN_WHALE,
    .is_animal = true,
    .snr = SNR_CELL,
    .cell_s = 0.128,
    .source_level_db = 168, /* Au et al. 2006, J. Acoust. Soc. Am. 120, 1103: units of song 151 to 173 dB */
    .min_rate_hz = 8000,
    .max_length_s = 3.0,
    .min_spacing_s = 1.5,
    .is_song = true,
    .make = make,
    .spacing_s = spacing_s,
};
