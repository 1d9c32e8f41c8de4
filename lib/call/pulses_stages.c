/* The sound of one channel at the rates that the train classes need, each with its bank of bands. */
#include "call/pulses_inside.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

/* Of the shortest of a stage: a window is at most an eighth of a pulse off its place, a sixteenth on average:
 * 0.3 dB of a pulse with a flat top, less of any other. */
#define SLOTS_PER_PULSE 4
#define BLOCK_SLOTS 64       /* looked at together, where they last no longer ... */
#define LONGEST_BLOCK_S 0.01 /* ... than this; else: */
#define SLOW_BLOCK_SLOTS 8
#define TELL_S 0.005
/* A class with a highest edge of at most rate / 16 runs decimated, at 4.8 times that edge or more. */
#define DECIMATE_BELOW 16
#define DECIMATED_RATE 4.8
#define SPLIT_RATIO 3.0 /* of its edges, from which a class's band is heard in parts */

static double highest_hz(const struct call_class *call_class)
{
    const struct train_shape *shape = &call_class->train;
    return fmax(call_class->high_hz, fmax(shape->guard_high_hz, shape->upper_high_hz));
}

static uint32_t factor_of(const struct call_class *call_class, double rate_hz)
{
    double highest = highest_hz(call_class);
    if (highest * DECIMATE_BELOW > rate_hz)
        return 1;
    uint32_t factor = 1; /* powers of two: the rates that share one are few */
    while (2 * factor * DECIMATED_RATE * highest <= rate_hz)
        factor *= 2;
    return factor;
}

/* Index of a band in a stage's list, added where it is new; BANDS_MAX when the list is full. */
static uint32_t add_edges(struct stage *stage, double low_hz, double high_hz)
{
    for (uint32_t i = 0; i < stage->n_edges; i++)
        if (stage->edges[i].low_hz == low_hz && stage->edges[i].high_hz == high_hz)
            return i;
    if (stage->n_edges == BANDS_MAX)
        return BANDS_MAX;
    stage->edges[stage->n_edges] = (struct band_edges){low_hz, high_hz};
    return stage->n_edges++;
}

static struct stage *stage_of(struct pulses *pulses, uint32_t factor, uint32_t *out_index)
{
    uint32_t s = 0;
    while (s < pulses->n_stages && pulses->stages[s].factor != factor)
        s++;
    if (s == MAX_STAGES)
        return NULL;
    if (s == pulses->n_stages) {
        pulses->stages[s].factor = factor;
        pulses->stages[s].rate_hz = pulses->rate_hz / factor;
        pulses->n_stages++;
    }
    *out_index = s;
    return &pulses->stages[s];
}

/* Adds a class's band to its stage, in parts where it is wide: an octave each, so that in noise that falls
 * steeply none is far from white. */
static enum status add_parts(struct stage *stage, double low_hz, double high_hz, struct band_parts *out)
{
    double ratio = high_hz / low_hz;
    out->n = ratio < SPLIT_RATIO ? 1 : (uint32_t)fmin(BANDS_MAX_PARTS, fmax(2, round(log2(ratio))));
    for (uint32_t p = 0; p < out->n; p++) {
        double from = p == 0 ? low_hz : low_hz * pow(ratio, (double)p / out->n);
        double to = p + 1 == out->n ? high_hz : low_hz * pow(ratio, (p + 1.0) / out->n);
        out->bands[p] = add_edges(stage, from, to);
        if (out->bands[p] == BANDS_MAX)
            return STATUS_BAD_ARGUMENT;
    }
    return STATUS_OK;
}

enum status stages_add_ear(struct pulses *pulses, const struct call_class *call_class, uint32_t class_index)
{
    struct ear *ear = &pulses->ears[pulses->n_ears];
    *ear = (struct ear){.call_class = call_class, .class_index = class_index};
    struct stage *stage = stage_of(pulses, factor_of(call_class, pulses->rate_hz), &ear->stage);
    if (!stage)
        return STATUS_BAD_ARGUMENT;
    uint32_t slot = (uint32_t)fmax(1, round(call_class->train.pulse_s * stage->rate_hz / SLOTS_PER_PULSE));
    if (!stage->slot_frames || slot < stage->slot_frames)
        stage->slot_frames = slot;
    pulses->n_ears++;
    return add_parts(stage, call_class->low_hz, call_class->high_hz, &ear->band);
}

/* A guard band: that of a class in its parts where one has the same edges, else a band of its own. */
static enum status add_guard(struct pulses *pulses, uint32_t stage, double low_hz, double high_hz,
                             struct band_parts *out)
{
    for (uint32_t e = 0; e < pulses->n_ears; e++) {
        const struct ear *ear = &pulses->ears[e];
        if (ear->stage == stage && ear->call_class->low_hz == low_hz && ear->call_class->high_hz == high_hz) {
            *out = ear->band;
            return STATUS_OK;
        }
    }
    out->n = 1;
    out->bands[0] = add_edges(&pulses->stages[stage], low_hz, high_hz);
    return out->bands[0] == BANDS_MAX ? STATUS_BAD_ARGUMENT : STATUS_OK;
}

/* Once all classes have their bands. */
static enum status add_guards(struct pulses *pulses, struct ear *ear)
{
    const struct train_shape *shape = &ear->call_class->train;
    struct band_edges upper = {shape->upper_low_hz, shape->upper_high_hz};
    enum status status = STATUS_OK;
    if (shape->guard_high_hz > 0)
        status = add_guard(pulses, ear->stage, shape->guard_low_hz, shape->guard_high_hz, &ear->guards[0]);
    if (status == STATUS_OK && upper.high_hz > 0 &&
        bands_rate_carries(pulses->stages[ear->stage].rate_hz, upper))
        status = add_guard(pulses, ear->stage, upper.low_hz, upper.high_hz, &ear->guards[1]);
    return status;
}

/* A stage takes the samples of the slowest stage before it that is still faster: what both need is filtered
 * once. Stages stand in order of their factors, which are powers of two. */
static enum status create_decimator(struct pulses *pulses, struct stage *stage)
{
    stage->from = NOWHERE;
    uint32_t factor = stage->factor;
    for (uint32_t s = 0; &pulses->stages[s] != stage; s++)
        if (pulses->stages[s].factor > 1) {
            stage->from = s;
            factor = stage->factor / pulses->stages[s].factor;
        }
    enum status status = decimator_create(factor, &stage->decimator);
    if (status != STATUS_OK)
        return status;
    stage->delay_frames = decimator_get_delay(stage->decimator);
    if (stage->from != NOWHERE) {
        const struct stage *from = &pulses->stages[stage->from];
        stage->delay_frames = from->delay_frames + stage->delay_frames * from->factor;
    }
    return STATUS_OK;
}

/* Puts the stages in order of their factors. */
static void sort_stages(struct pulses *pulses)
{
    for (uint32_t s = 1; s < pulses->n_stages; s++)
        for (uint32_t t = s; t > 0 && pulses->stages[t - 1].factor > pulses->stages[t].factor; t--) {
            struct stage swap = pulses->stages[t];
            pulses->stages[t] = pulses->stages[t - 1];
            pulses->stages[t - 1] = swap;
            for (uint32_t e = 0; e < pulses->n_ears; e++) {
                uint32_t *stage = &pulses->ears[e].stage;
                *stage = *stage == t ? t - 1 : *stage == t - 1 ? t : *stage;
            }
        }
}

static enum status create_stage(struct pulses *pulses, uint32_t index)
{
    struct stage *stage = &pulses->stages[index];
    const double block_s = BLOCK_SLOTS * stage->slot_frames / stage->rate_hz;
    stage->block_slots = block_s <= LONGEST_BLOCK_S ? BLOCK_SLOTS : SLOW_BLOCK_SLOTS;
    stage->block_frames = stage->block_slots * stage->slot_frames;
    stage->tell_blocks = (uint32_t)fmax(1, floor(TELL_S * stage->rate_hz / stage->block_frames));
    for (uint32_t e = 0; e < pulses->n_ears; e++) {
        if (pulses->ears[e].stage != index)
            continue;
        uint32_t slots = trigger_get_history(pulses->ears[e].call_class, stage->rate_hz, stage->slot_frames);
        stage->history_slots = slots > stage->history_slots ? slots : stage->history_slots;
    }
    enum status status = bands_create(stage->rate_hz, stage->edges, stage->n_edges, stage->slot_frames,
                                      stage->block_slots, stage->history_slots, &stage->bands);
    if (status != STATUS_OK || stage->factor == 1)
        return status;
    stage->decimated = calloc(PIECE_FRAMES + 1, sizeof *stage->decimated);
    return stage->decimated ? create_decimator(pulses, stage) : STATUS_NO_MEMORY;
}

enum status stages_create(struct pulses *pulses)
{
    enum status status = STATUS_OK;
    for (uint32_t e = 0; e < pulses->n_ears && status == STATUS_OK; e++)
        status = add_guards(pulses, &pulses->ears[e]);
    sort_stages(pulses);
    for (uint32_t s = 0; s < pulses->n_stages && status == STATUS_OK; s++)
        status = create_stage(pulses, s);
    return status;
}

void stages_reset(struct pulses *pulses)
{
    for (uint32_t s = 0; s < pulses->n_stages; s++) {
        struct stage *stage = &pulses->stages[s];
        stage->filled = 0;
        stage->n_blocks = 0;
        bands_reset(stage->bands);
        if (stage->decimator)
            decimator_reset(stage->decimator);
    }
}

static void fill(struct pulses *pulses, uint32_t index, const float *samples, size_t n)
{
    struct stage *stage = &pulses->stages[index];
    while (n > 0) {
        size_t room = stage->block_frames - stage->filled, part = n < room ? n : room;
        memcpy(bands_get_room(stage->bands) + stage->filled, samples, part * sizeof *samples);
        stage->filled += (uint32_t)part;
        samples += part;
        n -= part;
        if (stage->filled == stage->block_frames) {
            stage->filled = 0;
            pulses_search(pulses, index);
        }
    }
}

void stages_push(struct pulses *pulses, const float *pascals, uint32_t n, const struct lowered *lowered)
{
    const float *decimated[MAX_STAGES];
    size_t n_decimated[MAX_STAGES];
    for (uint32_t s = 0; s < pulses->n_stages; s++) {
        struct stage *stage = &pulses->stages[s];
        if (!stage->decimator) {
            fill(pulses, s, pascals, n);
            continue;
        }
        const bool first = stage->from == NOWHERE;
        decimated[s] = stage->decimated;
        if (first && stage->factor == lowered->factor) {
            decimated[s] = lowered->samples;
            n_decimated[s] = lowered->n;
        } else {
            n_decimated[s] = decimator_push(stage->decimator, first ? pascals : decimated[stage->from],
                                            first ? n : n_decimated[stage->from], stage->decimated);
        }
        fill(pulses, s, decimated[s], n_decimated[s]);
    }
}

void stages_destroy(struct pulses *pulses)
{
    for (uint32_t s = 0; s < pulses->n_stages; s++) {
        bands_destroy(pulses->stages[s].bands);
        decimator_destroy(pulses->stages[s].decimator);
        free(pulses->stages[s].decimated);
    }
}
