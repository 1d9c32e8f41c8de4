/* Beacons and transponders that positions are taken from. */
#include "scene/recipe.h"
#include <math.h>

/* One frequency of 8 to 35 kHz, 5 to 30 ms, each 0.5 to 30 s (common practice, no source). */
enum { FREQUENCY, LENGTH };

static void make(const struct kind_order *order, struct random *random, struct emission *out)
{
    (void)random;
    recipe_ping(order->emitter->settings[FREQUENCY], order->emitter->settings[LENGTH], &out->sound);
}

static double length_s(const struct scene_emitter *emitter)
{
    return emitter->settings[LENGTH];
}

const struct scene_kind kind_beacon = {
    .name = "beacon",
    .class = "beacon",
    .snr = SNR_PULSE,
    .source_level_db = 185,
    .min_rate_hz = 24000,
    .max_length_s = 0.1,
    .min_spacing_s = 2,
    .is_machine = true,
    .settings =
        {[FREQUENCY] = {"frequency_hz", 5000, 100000, 27000}, [LENGTH] = {"length_s", 0.001, 0.1, 0.01}},
    .make = make,
    .length_s = length_s,
};
