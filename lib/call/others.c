/* What is heard beside animals: frames and their spectrum for the parts that know the manners. */
#include "call/others.h"
#include "call/bursts.h"
#include "call/grunts.h"
#include "call/lines.h"
#include "call/swells.h"
#include "dsp/spectrum.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define LEAST_FRAME_S 0.004
#define CARRIED 0.46 /* of the rate */

struct others {
    struct other_setup setup;
    uint64_t next_frame; /* of the next sample */
    uint32_t filled;
    float *first, *second, *power;
    struct spectrum *spectrum;
    struct bursts *bursts;
    struct lines *lines;
    struct swells *swells;
    struct grunts *grunts;
};

static enum status fill(struct others *others)
{
    const struct other_setup *setup = &others->setup;
    others->first = calloc(setup->n, sizeof(float));
    others->second = calloc(setup->n, sizeof(float));
    others->power = calloc(setup->n / 2 + 1, sizeof(float));
    if (!others->first || !others->second || !others->power)
        return STATUS_NO_MEMORY;
    enum status status = spectrum_create(setup->n, WINDOW_HANN, &others->spectrum);
    if (status == STATUS_OK)
        status = bursts_create(setup, &others->bursts);
    if (status == STATUS_OK)
        status = lines_create(setup, &others->lines);
    if (status == STATUS_OK)
        status = swells_create(setup, &others->swells);
    double slow_hz = 0, late_frames = 0;
    if (status == STATUS_OK) {
        lines_describe_slow(others->lines, &slow_hz, &late_frames);
        status = grunts_create(setup, slow_hz, late_frames, &others->grunts);
    }
    return status;
}

enum status others_create(const struct call_class *classes, uint32_t n_classes, double rate_hz, bool pair,
                          struct others **out)
{
    if (n_classes > CATALOGUE_MAX_CLASSES || !(rate_hz >= 8000 && rate_hz <= 1e6))
        return STATUS_BAD_ARGUMENT;
    struct others *others = calloc(1, sizeof *others);
    if (!others)
        return STATUS_NO_MEMORY;
    uint32_t n = 16;
    while (n < LEAST_FRAME_S * rate_hz)
        n *= 2;
    others->setup = (struct other_setup){.classes = classes,
                                         .n_classes = n_classes,
                                         .rate_hz = rate_hz,
                                         .bin_hz = rate_hz / n,
                                         .frame_s = n / rate_hz,
                                         .n = n,
                                         .pair = pair};
    enum status status = fill(others);
    if (status != STATUS_OK) {
        others_destroy(others);
        return status;
    }
    *out = others;
    return STATUS_OK;
}

void others_destroy(struct others *others)
{
    if (!others)
        return;
    bursts_destroy(others->bursts);
    lines_destroy(others->lines);
    swells_destroy(others->swells);
    grunts_destroy(others->grunts);
    spectrum_destroy(others->spectrum);
    free(others->first);
    free(others->second);
    free(others->power);
    free(others);
}

void others_reset(struct others *others, uint64_t next_frame)
{
    others->next_frame = next_frame;
    others->filled = 0;
    bursts_reset(others->bursts);
    lines_reset(others->lines, next_frame);
    swells_reset(others->swells);
    grunts_reset(others->grunts, next_frame);
}

static void take_frame(struct others *others, const struct found_sink *sink)
{
    const struct other_setup *setup = &others->setup;
    spectrum_power(others->spectrum, others->first, others->power);
    const struct other_frame frame = {.samples = others->first,
                                      .power = others->power,
                                      .n = setup->n,
                                      .bin_hz = setup->bin_hz,
                                      .start_frame = others->next_frame - setup->n};
    bursts_push(others->bursts, &frame, sink);
    lines_push(others->lines, &frame, setup->pair ? others->second : NULL, sink);
    swells_push(others->swells, &frame, sink);
    const float *slow;
    uint32_t n = lines_get_slow(others->lines, &slow);
    grunts_push(others->grunts, slow, n, frame.start_frame + frame.n - 1, sink);
}

void others_push(struct others *others, const float *first, const float *second, uint32_t n,
                 const struct found_sink *sink)
{
    while (n > 0) {
        uint32_t room = others->setup.n - others->filled, part = n < room ? n : room;
        memcpy(others->first + others->filled, first, part * sizeof *first);
        first += part;
        if (others->setup.pair) {
            memcpy(others->second + others->filled, second, part * sizeof *second);
            second += part;
        }
        others->filled += part;
        others->next_frame += part;
        n -= part;
        if (others->filled == others->setup.n) {
            take_frame(others, sink);
            others->filled = 0;
        }
    }
}

bool others_hold(const struct others *others, const struct found_call *call)
{
    return bursts_hold(others->bursts, call);
}

void others_finish(struct others *others, const struct found_sink *sink)
{
    bursts_finish(others->bursts, others->next_frame > 0 ? others->next_frame - 1 : 0, sink);
}

bool others_can_hear(const struct others *others, uint32_t class_index)
{
    if (class_index >= others->setup.n_classes)
        return false;
    const struct call_class *class = &others->setup.classes[class_index];
    enum manner manner = class->sound.manner;
    double high = fmin(class->high_hz, CARRIED * others->setup.rate_hz);
    bool needs_pair = manner == MANNER_PICK_UP || manner == MANNER_FLOW;
    return manner >= MANNER_BURST && manner <= MANNER_SNAPS && (others->setup.pair || !needs_pair) &&
           high > class->low_hz && log(high / class->low_hz) >= 0.5 * log(class->high_hz / class->low_hz);
}
