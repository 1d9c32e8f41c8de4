/* What each class costs by itself, and all of them together, beside the bare spectra, on one channel of
 * Gaussian noise: nanoseconds a sample, each the least of some rounds in turn. Classes that share a front end
 * cost less together than their sum. */
#include "bench/calls/calls.h"
#include "call/pulses.h"
#include "call/tones.h"
#include "support/bench.h"
#include "support/clicks.h"
#include <math.h>
#include <stdlib.h>

#define ROUNDS 3
#define BLOCK 4096

static void drop(void *context, const struct found_call *found)
{
    (void)context;
    (void)found;
}

/* NAN where it cannot be made. */
static double push_all(const struct call_class *classes, uint32_t n_classes, const struct bench_sound *sound)
{
    struct tones *tones = NULL;
    struct pulses *pulses = NULL;
    struct found_sink sink = {drop, NULL};
    double spent = NAN;
    if (tones_create(classes, n_classes, sound->rate_hz, &tones) == STATUS_OK &&
        pulses_create(classes, n_classes, sound->rate_hz, &pulses) == STATUS_OK) {
        double start = bench_cpu_s();
        for (uint64_t at = 0; at + BLOCK <= sound->n_frames; at += BLOCK) {
            tones_push(tones, sound->frames + at, BLOCK, &sink);
            pulses_push(pulses, sound->frames + at, BLOCK, &sink);
        }
        spent = bench_cpu_s() - start;
    }
    tones_destroy(tones);
    pulses_destroy(pulses);
    return spent;
}

static double class_rate(const struct call_class *call_class)
{
    return fmax(192000, calls_lowest_rate(call_class));
}

static bool make_noise(struct bench_sound *sound, double rate_hz, double seconds, uint64_t seed)
{
    struct random random;
    *sound =
        (struct bench_sound){.rate_hz = rate_hz, .n_channels = 1, .n_frames = (uint64_t)(seconds * rate_hz)};
    sound->frames = calloc(sound->n_frames, sizeof(float));
    random_reset(&random, seed);
    if (sound->frames)
        clicks_add_noise(sound->frames, sound->n_frames, 1, &random);
    return sound->frames;
}

/* Nothing to do costs something too: the copying and the calls. */
static json_t *measure(const char *name, const struct call_class *classes, uint32_t n_classes,
                       const struct bench_sound *sound)
{
    double spent = INFINITY, bare = INFINITY;
    for (int round = 0; round < ROUNDS; round++) {
        spent = fmin(spent, push_all(classes, n_classes, sound));
        bare = fmin(bare, bench_bare_spectra_s(sound));
    }
    double ns = 1e9 / (double)sound->n_frames;
    return json_pack("{s:s, s:f, s:o, s:f, s:o}", "class", name, "rate_hz", sound->rate_hz, "ns_per_sample",
                     calls_number(spent * ns), "bare_spectra_ns", bare * ns, "ratio",
                     calls_number(spent / bare));
}

json_t *calls_costs(const struct calls_setup *setup)
{
    static const double rates_hz[] = {192000, 384000};
    const struct catalogue *catalogue = setup->catalogue;
    json_t *rows = json_array();
    for (int r = 0; r < 2; r++) {
        struct bench_sound sound;
        if (!make_noise(&sound, rates_hz[r], fmax(0.5, 5 * setup->scale), calls_seed(setup, 6, (uint64_t)r)))
            return NULL;
        for (uint32_t c = 0; c < catalogue->n_classes; c++)
            if (class_rate(&catalogue->classes[c]) == rates_hz[r])
                json_array_append_new(rows,
                                      measure(catalogue->classes[c].name, &catalogue->classes[c], 1, &sound));
        json_array_append_new(rows, measure("all", catalogue->classes, catalogue->n_classes, &sound));
        free(sound.frames);
    }
    return json_pack("{s:o}", "rows", rows);
}
