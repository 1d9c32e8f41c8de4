/* Underwater modems. */
#include "scene/recipe.h"
#include <math.h>

/* Chips of one of 16 slots of a band, 8 to 35 kHz, blocks of 0.1 to 2.5 s (common practice, no source). */
enum { FREQUENCY, BAND, CHIP, LENGTH };

static uint32_t chips_of(const struct kind_order *order, struct sound *out)
{
    const double *settings = order->emitter->settings;
    uint32_t n = (uint32_t)fmin(SOUND_MAX_CHIPS, fmax(1, settings[LENGTH] / settings[CHIP]));
    *out = (struct sound){.shape = SOUND_CHIPS,
                          .n_parts = 1,
                          .chip_s = settings[CHIP],
                          .slot_hz = settings[BAND] / 15,
                          .n_chips = n};
    out->parts[0] = (struct sound_part){.amplitude = 1, .frequency_hz = settings[FREQUENCY]};
    return n;
}

static void finish(struct sound *out)
{
    sound_measure_length(out);
    sound_normalize_mean_square(out);
}

static void make_hopping(const struct kind_order *order, struct random *random, struct emission *out)
{
    uint32_t n = chips_of(order, &out->sound);
    for (uint32_t i = 0; i < n; i++)
        out->sound.chips[i] = (uint8_t)(random_bits(random) % 16);
    finish(&out->sound);
}

static void make_chirps(const struct kind_order *order, struct random *random, struct emission *out)
{
    uint32_t n = chips_of(order, &out->sound);
    out->sound.parts[0].chirp_hz_s = order->emitter->settings[BAND] / order->emitter->settings[CHIP];
    for (uint32_t i = 0; i < n; i++)
        out->sound.chips[i] = (uint8_t)(random_bits(random) % 2); /* up or down */
    finish(&out->sound);
}

static double spacing_s(const struct kind_order *order, double length_s, struct random *random)
{
    (void)order;
    return length_s + 2 + 6 * random_exponential(random);
}

static const char *problem(const struct scene_emitter *emitter, double rate_hz)
{
    const double *settings = emitter->settings;
    if (settings[FREQUENCY] + settings[BAND] > 0.45 * rate_hz)
        return "frequency_hz + band_hz; allowed: up to 0.45 of the sampling rate";
    return settings[LENGTH] > SOUND_MAX_CHIPS * settings[CHIP] + 1e-9 ? "length_s; allowed: up to 256 chip_s"
                                                                      : NULL;
}

const struct scene_kind kind_hopping_modem = {
    .name = "hopping modem",
    .class = "modem",
    .snr = SNR_CELL,
    .cell_s = 0.0213,
    .source_level_db = 185,
    .min_rate_hz = 24000,
    .max_length_s = 2.6,
    .min_spacing_s = 2,
    .settings = {[FREQUENCY] = {"frequency_hz", 4000, 35000, 9000},
                 [BAND] = {"band_hz", 500, 15000, 4000},
                 [CHIP] = {"chip_s", 0.001, 0.1, 0.01},
                 [LENGTH] = {"length_s", 0.05, 2.5, 1.2}},
    .make = make_hopping,
    .spacing_s = spacing_s,
    .problem = problem,
};

const struct scene_kind kind_chirp_modem = {
    .name = "chirp modem",
    .class = "modem",
    .snr = SNR_CELL,
    .cell_s = 0.0213,
    .source_level_db = 185,
    .min_rate_hz = 24000,
    .max_length_s = 2.6,
    .min_spacing_s = 2,
    .settings = {[FREQUENCY] = {"frequency_hz", 4000, 35000, 8000},
                 [BAND] = {"band_hz", 500, 15000, 6000},
                 [CHIP] = {"chip_s", 0.005, 0.1, 0.02},
                 [LENGTH] = {"length_s", 0.05, 2.5, 1.5}},
    .make = make_chirps,
    .spacing_s = spacing_s,
    .problem = problem,
};

/* JANUS (STANAG 4748, open; from memory): 9440 to 13600 Hz in 26 slots of 160 Hz, each bit takes one of a
 * pair, chips of 6.25 ms; three wake-up tones (middle, top, bottom of the band) of 4 chips, 0.4 s of silence,
 * 32 chips of a fixed preamble, 144 chips of a base packet. The hopping here is a plain permutation, not the
 * standard's. */
#define HALF_SLOT_HZ 80
#define PREAMBLE UINT32_C(0xaec7cd20) /* 1010 1110 1100 0111 1100 1101 0010 0000 */

static void make_janus(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)order;
    struct sound *sound = &out->sound;
    *sound = (struct sound){
        .shape = SOUND_CHIPS, .n_parts = 1, .chip_s = 0.00625, .slot_hz = HALF_SLOT_HZ, .n_chips = 252};
    sound->parts[0] = (struct sound_part){.amplitude = 1, .frequency_hz = 9440};
    static const uint8_t wake[] = {26, 52, 0};
    uint32_t n = 0;
    for (; n < 12; n++)
        sound->chips[n] = wake[n / 4];
    for (; n < 76; n++)
        sound->chips[n] = SOUND_NO_CHIP;
    for (uint32_t i = 0; n < sound->n_chips; i++, n++) {
        uint32_t bit = i < 32 ? (PREAMBLE >> (31 - i)) & 1 : (uint32_t)(random_bits(random) >> 63);
        uint32_t pair = i * 5 % 13;
        sound->chips[n] = (uint8_t)(2 * (2 * pair + bit) + 1); /* a slot's middle */
    }
    finish(sound);
}

const struct scene_kind kind_janus = {
    .name = "janus modem",
    .class = "modem",
    .snr = SNR_CELL,
    .cell_s = 0.0213,
    .source_level_db = 185,
    .min_rate_hz = 32000,
    .max_length_s = 1.6,
    .min_spacing_s = 2,
    .make = make_janus,
    .spacing_s = spacing_s,
};
