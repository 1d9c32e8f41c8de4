/* Noises that last: cavitation, rain, flow. */
#include "scene/recipe.h"
#include <math.h>

/* Pieces of PIECE_S that overlap by EDGE_S; see sound.h. */
#define PIECE_S 6.0
#define EDGE_S 1.0

static void lasting_noise(const struct kind_order *order, uint32_t n, struct sound *out)
{
    *out = (struct sound){.shape = SOUND_NOISE,
                          .length_s = PIECE_S,
                          .taper = 2 * EDGE_S / PIECE_S,
                          .n_parts = n,
                          .origin_s = order->since_s,
                          .seed = order->repertoire};
}

/* Cavitation of a ship: 50 Hz to 100 kHz, falling by 6 dB an octave above 100 Hz, swelling at the rates of
 * the shaft and of the blades (Ross 1976, "Mechanics of underwater noise"; from memory). */
enum { SHAFT, BLADES, DEPTH };

static void make_cavitation(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)random;
    const double *settings = order->emitter->settings;
    lasting_noise(order, 11, &out->sound);
    for (uint32_t k = 0; k < 11; k++) {
        double hz = 80 * pow(2, k);
        out->sound.parts[k] = (struct sound_part){.amplitude = k == 0 ? 0.7 : pow(2, -0.5 * (k - 1.0)),
                                                  .frequency_hz = hz,
                                                  .width_s = 0.83 / (0.75 * hz)};
    }
    out->sound.swell_hz[0] = settings[SHAFT];
    out->sound.swell_depth[0] = 0.4 * settings[DEPTH];
    out->sound.swell_hz[1] = settings[SHAFT] * settings[BLADES];
    out->sound.swell_depth[1] = settings[DEPTH];
    sound_normalize_mean_square(&out->sound);
}

const struct scene_kind kind_cavitation = {
    .name = "ship cavitation",
    .class = "ship",
    .source_level_db = 170,
    .max_length_s = 6,
    .min_spacing_s = 5,
    .lasts = true,
    .settings = {[SHAFT] = {"shaft_hz", 0.3, 10, 1.7},
                 [BLADES] = {"blades", 2, 8, 4},
                 [DEPTH] = {"depth", 0, 0.9, 0.5}},
    .make = make_cavitation,
};

/* Rain: 1 to 50 kHz, a hump at 13 to 25 kHz from small drops (Nystuen 1986, J. Acoust. Soc. Am. 79, 972; from
 * memory). Its level is that of its band at each hydrophone. */
static void make_rain(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)random;
    static const double hz[] = {1500, 4500, 9000, 16500, 28000}, level[] = {0.2, 0.4, 0.5, 1, 0.5};
    lasting_noise(order, 5, &out->sound);
    for (uint32_t k = 0; k < 5; k++)
        out->sound.parts[k] = (struct sound_part){
            .amplitude = level[k], .frequency_hz = hz[k], .width_s = 0.83 / fmin(12000, hz[k])};
    sound_normalize_mean_square(&out->sound);
}

const struct scene_kind kind_rain = {
    .name = "rain",
    .class = "rain",
    .source_level_db = 108,
    .max_length_s = 6,
    .min_spacing_s = 5,
    .lasts = true,
    .reach = REACH_EACH,
    .make = make_rain,
};

/* Flow past a hydrophone: below 200 Hz, its density falling with the third to fifth power of frequency (here
 * the fourth), each hydrophone's own (common practice, no source). */
static void make_flow(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)random;
    lasting_noise(order, 7, &out->sound);
    for (uint32_t k = 0; k < 7; k++) {
        double hz = 4 * pow(2, k);
        out->sound.parts[k] = (struct sound_part){
            .amplitude = pow(2, -1.5 * k), .frequency_hz = hz, .width_s = 0.83 / (0.75 * hz)};
    }
    sound_normalize_mean_square(&out->sound);
}

const struct scene_kind kind_flow = {
    .name = "flow noise",
    .class = "flow",
    .source_level_db = 125,
    .max_length_s = 6,
    .min_spacing_s = 5,
    .lasts = true,
    .reach = REACH_EACH,
    .make = make_flow,
};
