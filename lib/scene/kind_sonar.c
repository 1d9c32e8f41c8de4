/* Sonar of warships: pings of one frequency or swept, and their reverberation. */
#include "scene/recipe.h"
#include <math.h>

/* 2 to 10 kHz, steady or swept linearly, 0.25 to 2 s, each 20 to 60 s, 215 to 235 dB; reverberation for 1 to
 * 10 s after it (common practice, no source). The reverberation is noise about the ping's band that begins 20
 * dB below it and falls by 60 dB in reverberation_s. */
enum { FREQUENCY, SWEEP, LENGTH, REVERBERATION };

static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    const double *settings = order->emitter->settings;
    double length_s = settings[LENGTH], sweep_hz = settings[SWEEP];
    recipe_tone(&out->sound, length_s, fmin(1, 0.01 / length_s));
    contour_cubic(&out->sound.contour, (double[4]){settings[FREQUENCY], sweep_hz, 0, 0}, length_s);
    sound_normalize_mean_square(&out->sound);
    if (settings[REVERBERATION] <= 0)
        return;
    out->tail = (struct sound){.shape = SOUND_NOISE, .n_parts = 1, .seed = random_bits(random)};
    double band_hz = fmax(20, fmax(fabs(sweep_hz), 2 / length_s));
    out->tail.parts[0] = (struct sound_part){.amplitude = 0.1,
                                             .frequency_hz = settings[FREQUENCY] + sweep_hz / 2,
                                             .delay_s = 0.05 * length_s,
                                             .width_s = 0.83 / band_hz,
                                             .rise_s = length_s,
                                             .decay_s = settings[REVERBERATION] / 6.9};
    sound_measure_length(&out->tail);
}

static double length_s(const struct scene_emitter *emitter)
{
    return 2.1 * emitter->settings[LENGTH] + 1.1 * emitter->settings[REVERBERATION];
}

static const char *problem(const struct scene_emitter *emitter, double rate_hz)
{
    double end_hz = emitter->settings[FREQUENCY] + emitter->settings[SWEEP];
    return end_hz >= 100 && end_hz <= 0.45 * rate_hz
               ? NULL
               : "frequency_hz + sweep_hz; allowed: 100 Hz to 0.45 of the sampling rate";
}

const struct scene_kind kind_naval_sonar = {
    .name = "naval sonar",
    .class = "sonar ping",
    .snr = SNR_CELL,
    .cell_s = 0.0213,
    .source_level_db = 220,
    .min_rate_hz = 24000,
    .max_length_s = 15,
    .min_spacing_s = 30,
    .is_machine = true,
    .settings = {[FREQUENCY] = {"frequency_hz", 1000, 10000, 3500},
                 [SWEEP] = {"sweep_hz", -2000, 2000, 400},
                 [LENGTH] = {"length_s", 0.05, 4, 1},
                 [REVERBERATION] = {"reverberation_s", 0, 20, 4}},
    .make = make,
    .length_s = length_s,
    .problem = problem,
};
