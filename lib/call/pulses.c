/* All train classes of one channel. */
#include "call/pulses.h"
#include "call/bands.h"
#include "call/hidden.h"
#include "call/tied.h"
#include "call/trigger.h"
#include "dsp/decimate.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SLOTS_PER_PULSE 6    /* of the shortest of a stage: costs under 0.1 dB against every sample */
#define BLOCK_SLOTS 64       /* looked at together, where they last no longer ... */
#define LONGEST_BLOCK_S 0.01 /* ... than this; else: */
#define SLOW_BLOCK_SLOTS 8
/* A class with a highest edge of at most rate / 16 runs decimated, at 4.8 times that edge or more. */
#define DECIMATE_BELOW 16
#define DECIMATED_RATE 4.8
#define PIECE_FRAMES 1024 /* pushed to a decimator at a time */
#define MAX_STAGES 8
#define NOWHERE UINT32_MAX
#define SPLIT_RATIO 3.0 /* of its edges, from which a class's band is heard in parts */

/* Classes that run at one rate. */
struct stage {
    uint32_t factor;
    double rate_hz;
    uint32_t slot_frames, block_slots, block_frames, history_slots;
    struct decimator *decimator; /* NULL for factor 1 */
    uint32_t from;               /* stage whose samples it takes; NOWHERE: the channel's own */
    double delay_frames;         /* of all decimators before it, in frames of the channel */
    float *decimated;            /* [PIECE_FRAMES + 1] */
    struct bands *bands;
    struct band_edges edges[BANDS_MAX];
    uint32_t n_edges;
    float *block; /* [block_frames] */
    uint32_t filled;
    uint64_t n_blocks; /* since the last reset */
};

/* One hearable class. */
struct ear {
    const struct call_class *call_class;
    uint32_t class_index, stage;
    struct band_parts band, guards[TRIGGER_GUARDS];
    struct trigger *trigger;
    struct tied tied;
    struct hidden hidden;
    uint64_t rejections[REJECT_COUNT];
};

struct pulses {
    double rate_hz;
    uint64_t first_frame;
    uint32_t n_stages, n_ears, n_classes;
    const struct call_class *classes; /* borrowed */
    struct stage stages[MAX_STAGES];
    struct ear ears[CATALOGUE_MAX_CLASSES];
    const struct found_sink *sink; /* of the push at hand */
    uint64_t known_frame;
    const struct train *given; /* while the sink has it */
};

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

static bool is_hearable(const struct call_class *call_class, double rate_hz)
{
    struct band_edges band = {call_class->low_hz, call_class->high_hz};
    struct band_edges guard = {call_class->train.guard_low_hz, call_class->train.guard_high_hz};
    return call_class->form == CALL_TRAIN && call_class->sound.manner == MANNER_NONE &&
           bands_rate_carries(rate_hz, band) && (guard.high_hz <= 0 || bands_rate_carries(rate_hz, guard));
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

static enum status add_ear(struct pulses *pulses, const struct call_class *call_class, uint32_t class_index)
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
    for (uint32_t e = 0; e < pulses->n_ears; e++) {
        if (pulses->ears[e].stage != index)
            continue;
        uint32_t slots = trigger_get_history(pulses->ears[e].call_class, stage->rate_hz, stage->slot_frames);
        stage->history_slots = slots > stage->history_slots ? slots : stage->history_slots;
    }
    stage->block = calloc(stage->block_frames, sizeof *stage->block);
    if (!stage->block)
        return STATUS_NO_MEMORY;
    enum status status = bands_create(stage->rate_hz, stage->edges, stage->n_edges, stage->slot_frames,
                                      stage->block_slots, stage->history_slots, &stage->bands);
    if (status != STATUS_OK || stage->factor == 1)
        return status;
    stage->decimated = calloc(PIECE_FRAMES + 1, sizeof *stage->decimated);
    return stage->decimated ? create_decimator(pulses, stage) : STATUS_NO_MEMORY;
}

static double noise_rate_of(const void *context, double snr)
{
    return trigger_get_noise_rate(context, snr);
}

static enum status create_ear(struct pulses *pulses, struct ear *ear)
{
    const struct stage *stage = &pulses->stages[ear->stage];
    struct trigger_setup setup = {
        .call_class = ear->call_class,
        .bands = stage->bands,
        .band = ear->band,
        .guards = {ear->guards[0], ear->guards[1]},
        .rate_hz = stage->rate_hz,
        .slot_frames = stage->slot_frames,
        .block_slots = stage->block_slots,
        .history_slots = stage->history_slots,
        .frames_per_frame = stage->factor,
        .delay_frames = stage->delay_frames,
    };
    enum status status = trigger_create(&setup, &ear->trigger);
    if (status != STATUS_OK)
        return status;
    struct noise_rate noise = {noise_rate_of, ear->trigger};
    return tied_create(ear->call_class, pulses->rate_hz, noise, &ear->tied);
}

enum status pulses_create(const struct call_class *classes, uint32_t n_classes, double rate_hz,
                          struct pulses **out)
{
    if (!classes || !out || n_classes > CATALOGUE_MAX_CLASSES || !(rate_hz >= 1000) || !(rate_hz <= 1e6))
        return STATUS_BAD_ARGUMENT;
    struct pulses *pulses = calloc(1, sizeof *pulses);
    if (!pulses)
        return STATUS_NO_MEMORY;
    pulses->rate_hz = rate_hz;
    pulses->classes = classes;
    pulses->n_classes = n_classes;
    enum status status = STATUS_OK;
    for (uint32_t c = 0; c < n_classes && status == STATUS_OK; c++)
        if (is_hearable(&classes[c], rate_hz))
            status = add_ear(pulses, &classes[c], c);
    for (uint32_t e = 0; e < pulses->n_ears && status == STATUS_OK; e++)
        status = add_guards(pulses, &pulses->ears[e]);
    sort_stages(pulses);
    for (uint32_t s = 0; s < pulses->n_stages && status == STATUS_OK; s++)
        status = create_stage(pulses, s);
    for (uint32_t e = 0; e < pulses->n_ears && status == STATUS_OK; e++)
        status = create_ear(pulses, &pulses->ears[e]);
    if (status != STATUS_OK) {
        pulses_destroy(pulses);
        return status;
    }
    *out = pulses;
    return STATUS_OK;
}

void pulses_reset(struct pulses *pulses, uint64_t next_frame)
{
    pulses->first_frame = next_frame;
    for (uint32_t s = 0; s < pulses->n_stages; s++) {
        struct stage *stage = &pulses->stages[s];
        stage->filled = 0;
        stage->n_blocks = 0;
        bands_reset(stage->bands);
        if (stage->decimator)
            decimator_reset(stage->decimator);
    }
    for (uint32_t e = 0; e < pulses->n_ears; e++) {
        trigger_reset(pulses->ears[e].trigger);
        tied_reset(&pulses->ears[e].tied);
        pulses->ears[e].hidden = (struct hidden){0};
    }
}

/* An ear at work on a block: what its trigger and its trains give lands here. */
struct hearing {
    struct pulses *pulses;
    struct ear *ear;
};

/* The catalogue's class of machines' rhythms for pulses of that centroid; n_classes: none. */
static uint32_t machine_class(const struct pulses *pulses, const struct ear *ear, const struct train *train)
{
    double hz = train->centroid_hz;
    if (!(hz > 0))
        hz = (ear->call_class->low_hz + ear->call_class->high_hz) / 2;
    for (uint32_t c = 0; c < pulses->n_classes; c++)
        if (pulses->classes[c].sound.manner == MANNER_RHYTHM && hz >= pulses->classes[c].low_hz &&
            hz <= pulses->classes[c].high_hz)
            return c;
    return pulses->n_classes;
}

static void take_train(void *context, const struct train *train)
{
    const struct hearing *hearing = context;
    struct ear *ear = hearing->ear;
    uint32_t c = train->machine ? machine_class(hearing->pulses, ear, train) : ear->class_index;
    if (c == hearing->pulses->n_classes)
        return;
    if (!train->machine && !train_fits(train, &ear->call_class->train)) {
        ear->rejections[REJECT_SHAPE]++;
        return;
    }
    double half = ear->call_class->train.pulse_s * hearing->pulses->rate_hz / 2;
    double first = (double)hearing->pulses->first_frame;
    struct found_call found = {
        .class_index = c,
        .start_frame = first + fmax(0, train->start_frame - half),
        .end_frame = first + train->end_frame + half,
        .known_frame = hearing->pulses->known_frame,
        .low_hz = ear->call_class->low_hz,
        .high_hz = ear->call_class->high_hz,
        .n_pulses = train->n_pulses,
        .interval_frames = train->interval_frames,
        .snr_db = train->snr_db,
        .mean_square_pa2 =
            (train->end_energy - train->start_energy) / fmax(1, train->end_frame - train->start_frame),
    };
    hearing->pulses->given = train;
    hearing->pulses->sink->take(hearing->pulses->sink->context, &found);
    hearing->pulses->given = NULL;
}

static void take_pulse(void *context, const struct pulse *pulse)
{
    struct hearing *hearing = context;
    struct train_sink sink = {take_train, hearing};
    if (hidden_has(&hearing->ear->hidden, pulse->frame))
        hearing->ear->rejections[REJECT_OWN_SOURCE]++;
    else
        tied_push(&hearing->ear->tied, pulse, &sink, hearing->ear->rejections);
}

static void search_block(struct pulses *pulses, uint32_t index, const float *block)
{
    struct stage *stage = &pulses->stages[index];
    bands_push(stage->bands, block);
    stage->n_blocks++;
    pulses->known_frame =
        pulses->first_frame + stage->n_blocks * stage->block_frames * stage->factor - (stage->factor == 1);
    for (uint32_t e = 0; e < pulses->n_ears; e++) {
        struct ear *ear = &pulses->ears[e];
        if (ear->stage != index)
            continue;
        struct hearing hearing = {pulses, ear};
        struct pulse_sink pulse_sink = {take_pulse, &hearing};
        struct train_sink train_sink = {take_train, &hearing};
        trigger_push(ear->trigger, &pulse_sink, ear->rejections);
        tied_advance(&ear->tied, trigger_get_known(ear->trigger), &train_sink, ear->rejections);
    }
}

static void fill(struct pulses *pulses, uint32_t index, const float *samples, size_t n)
{
    struct stage *stage = &pulses->stages[index];
    while (n > 0) {
        if (stage->filled == 0 && n >= stage->block_frames) { /* nothing to wait for, nothing to copy */
            search_block(pulses, index, samples);
            samples += stage->block_frames;
            n -= stage->block_frames;
            continue;
        }
        size_t room = stage->block_frames - stage->filled, part = n < room ? n : room;
        memcpy(stage->block + stage->filled, samples, part * sizeof *samples);
        stage->filled += (uint32_t)part;
        samples += part;
        n -= part;
        if (stage->filled == stage->block_frames) {
            stage->filled = 0;
            search_block(pulses, index, stage->block);
        }
    }
}

void pulses_push(struct pulses *pulses, const float *pascals, uint32_t n, const struct found_sink *sink)
{
    pulses->sink = sink;
    for (uint32_t done = 0; done < n; done += PIECE_FRAMES) {
        uint32_t part = n - done < PIECE_FRAMES ? n - done : PIECE_FRAMES;
        size_t n_decimated[MAX_STAGES];
        for (uint32_t s = 0; s < pulses->n_stages; s++) {
            struct stage *stage = &pulses->stages[s];
            if (!stage->decimator) {
                fill(pulses, s, pascals + done, part);
                continue;
            }
            const struct stage *from = stage->from == NOWHERE ? NULL : &pulses->stages[stage->from];
            n_decimated[s] = decimator_push(stage->decimator, from ? from->decimated : pascals + done,
                                            from ? n_decimated[stage->from] : part, stage->decimated);
            fill(pulses, s, stage->decimated, n_decimated[s]);
        }
    }
}

void pulses_finish(struct pulses *pulses, const struct found_sink *sink)
{
    pulses->sink = sink;
    for (uint32_t e = 0; e < pulses->n_ears; e++) {
        struct ear *ear = &pulses->ears[e];
        const struct stage *stage = &pulses->stages[ear->stage];
        pulses->known_frame =
            pulses->first_frame + (stage->n_blocks * stage->block_frames + stage->filled) * stage->factor;
        struct hearing hearing = {pulses, ear};
        struct pulse_sink pulse_sink = {take_pulse, &hearing};
        struct train_sink train_sink = {take_train, &hearing};
        trigger_finish(ear->trigger, &pulse_sink);
        tied_finish(&ear->tied, &train_sink, ear->rejections);
    }
}

void pulses_hide(struct pulses *pulses, double start_frame, double end_frame, double low_hz, double high_hz)
{
    double first = (double)pulses->first_frame;
    for (uint32_t e = 0; e < pulses->n_ears; e++) {
        struct ear *ear = &pulses->ears[e];
        if (ear->call_class->low_hz >= high_hz || ear->call_class->high_hz <= low_hz)
            continue;
        hidden_add(&ear->hidden, start_frame - first, end_frame - first);
        tied_hide(&ear->tied, start_frame - first, end_frame - first, ear->rejections);
    }
}

bool pulses_is_hearable(const struct pulses *pulses, uint32_t class_index)
{
    for (uint32_t e = 0; e < pulses->n_ears; e++)
        if (pulses->ears[e].class_index == class_index)
            return true;
    return false;
}

void pulses_get_rejections(const struct pulses *pulses, uint64_t out[][REJECT_COUNT])
{
    for (uint32_t e = 0; e < pulses->n_ears; e++)
        memcpy(out[pulses->ears[e].class_index], pulses->ears[e].rejections,
               sizeof pulses->ears[e].rejections);
}

bool pulses_get_arrivals(const struct pulses *pulses, double *out)
{
    if (!pulses->given)
        return false;
    for (uint32_t i = 0; i < pulses->given->n_pulses; i++)
        out[i] = (double)pulses->first_frame + pulses->given->arrivals[i];
    return true;
}

void pulses_destroy(struct pulses *pulses)
{
    if (!pulses)
        return;
    for (uint32_t e = 0; e < pulses->n_ears; e++) {
        tied_destroy(&pulses->ears[e].tied);
        trigger_destroy(pulses->ears[e].trigger);
    }
    for (uint32_t s = 0; s < pulses->n_stages; s++) {
        bands_destroy(pulses->stages[s].bands);
        decimator_destroy(pulses->stages[s].decimator);
        free(pulses->stages[s].decimated);
        free(pulses->stages[s].block);
    }
    free(pulses);
}
