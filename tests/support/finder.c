/* One class's pulse finder by itself; see finder.h. */
#include "support/finder.h"
#include "support/clicks.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define BLOCK_SLOTS 64

static enum status create_parts(struct finder *finder, const struct call_class *call_class, double rate_hz)
{
    const struct train_shape *shape = &call_class->train;
    uint32_t slot = (uint32_t)fmax(1, round(shape->pulse_s * rate_hz / 6));
    double ratio = call_class->high_hz / call_class->low_hz, middle = call_class->low_hz * sqrt(ratio);
    bool wide = ratio >= 3,
         guarded = shape->guard_high_hz > 0; /* heard in two parts, as call/pulses has it */
    struct band_edges edges[3] = {{call_class->low_hz, wide ? middle : call_class->high_hz}};
    uint32_t n = 1;
    if (wide)
        edges[n++] = (struct band_edges){middle, call_class->high_hz};
    if (guarded)
        edges[n++] = (struct band_edges){shape->guard_low_hz, shape->guard_high_hz};
    struct search_setup setup = {.call_class = call_class,
                                 .band = {.n = wide ? 2 : 1, .bands = {0, 1}},
                                 .guards = {{.n = guarded, .bands = {n - 1}}},
                                 .history_slots = trigger_get_history(call_class, rate_hz, slot),
                                 .rate_hz = rate_hz,
                                 .slot_frames = slot,
                                 .block_slots = BLOCK_SLOTS,
                                 .frames_per_frame = 1};
    enum status status =
        bands_create(rate_hz, edges, n, slot, BLOCK_SLOTS, setup.history_slots, &finder->bands);
    setup.bands = finder->bands;
    if (status == STATUS_OK)
        status = pulse_search_create(&setup, &finder->search);
    if (status == STATUS_OK)
        status = trigger_create(call_class, finder->search, &finder->trigger);
    finder->block_frames = BLOCK_SLOTS * slot;
    finder->block = calloc(finder->block_frames, sizeof(float));
    return finder->block ? status : STATUS_NO_MEMORY;
}

struct finder *finder_create(const struct call_class *call_class, double rate_hz, uint64_t seed,
                             struct pulse_sink sink)
{
    struct finder *finder = calloc(1, sizeof *finder);
    if (!finder || create_parts(finder, call_class, rate_hz) != STATUS_OK) {
        finder_destroy(finder);
        return NULL;
    }
    random_reset(&finder->random, seed);
    finder->sink = sink;
    return finder;
}

void finder_destroy(struct finder *finder)
{
    if (!finder)
        return;
    trigger_destroy(finder->trigger);
    pulse_search_destroy(finder->search);
    bands_destroy(finder->bands);
    free(finder->block);
    free(finder);
}

void finder_noise(struct finder *finder)
{
    memset(finder->block, 0, finder->block_frames * sizeof(float));
    clicks_add_noise(finder->block, finder->block_frames, 1, &finder->random);
}

void finder_push(struct finder *finder)
{
    bands_push(finder->bands, finder->block);
    pulse_search_push(finder->search);
    trigger_push(finder->trigger, &finder->sink, finder->rejections);
    finder->n_frames += finder->block_frames;
}

double finder_add_pulse(float *out, size_t n, double rate_hz, double frame, double lambda,
                        const struct call_class *call_class)
{
    double sigma_s = 2.0 * 0.159 / (call_class->high_hz - call_class->low_hz) * 1.25;
    double middle_hz = (call_class->low_hz + call_class->high_hz) / 2;
    /* Energy A^2 sigma sqrt(pi) / 2 (frequencies far above 1 / sigma); white noise of variance 1 has N0 = 2 /
     * rate. */
    double amplitude = sqrt(lambda / rate_hz / (sigma_s * sqrt(M_PI) / 2));
    if (out)
        clicks_add_gabor(out, n, rate_hz, frame, amplitude, middle_hz, sigma_s);
    return amplitude;
}
