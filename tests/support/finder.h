/* One train class's pulse finder by itself, with test pulses that its W and T hold. */
#ifndef SUPPORT_FINDER_H
#define SUPPORT_FINDER_H

#include "base/random.h"
#include "call/bands.h"
#include "call/catalogue.h"
#include "call/found.h"
#include "call/trigger.h"
#include <stddef.h>
#include <stdint.h>

struct finder {
    struct bands *bands;
    struct pulse_search *search;
    struct trigger *trigger;
    float *block;
    uint32_t block_frames;
    uint64_t n_frames; /* taken */
    struct random random;
    uint64_t rejections[REJECT_COUNT];
    struct pulse_sink sink;
};

/* NULL without memory or where the rate does not carry the class. The class is borrowed. */
struct finder *finder_create(const struct call_class *call_class, double rate_hz, uint64_t seed,
                             struct pulse_sink sink);
void finder_destroy(struct finder *finder);
/* Fills the block with noise of variance 1. */
void finder_noise(struct finder *finder);
/* Takes the block as it stands. */
void finder_push(struct finder *finder);

/* A Gabor pulse in the middle of the class's band, 95 % of its energy inside, of energy 2E/N0 = lambda in
 * white noise of variance 1, centred at `frame`. Gives its amplitude; out may be NULL. */
double finder_add_pulse(float *out, size_t n, double rate_hz, double frame, double lambda,
                        const struct call_class *call_class);

#endif
