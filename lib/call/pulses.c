/* All train classes of one channel. */
#include "call/pulses.h"
#include "call/pulses_inside.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

static bool is_hearable(const struct call_class *call_class, double rate_hz)
{
    struct band_edges band = {call_class->low_hz, call_class->high_hz};
    struct band_edges guard = {call_class->train.guard_low_hz, call_class->train.guard_high_hz};
    return call_class->form == CALL_TRAIN && call_class->sound.manner == MANNER_NONE &&
           bands_rate_carries(rate_hz, band) && (guard.high_hz <= 0 || bands_rate_carries(rate_hz, guard));
}

static double noise_rate_of(const void *context, double snr)
{
    return pulse_search_get_noise_rate(context, snr);
}

/* The search that serves the ear: that of an earlier one or a new one. */
static enum status find_search(struct pulses *pulses, struct ear *ear)
{
    struct stage *stage = &pulses->stages[ear->stage];
    struct search_setup setup = {
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
    for (uint32_t s = 0; s < pulses->n_searches; s++)
        if (pulse_search_serves(pulse_search_get_setup(pulses->searches[s]), &setup)) {
            ear->search = pulses->searches[s];
            return STATUS_OK;
        }
    enum status status = pulse_search_create(&setup, &ear->search);
    if (status == STATUS_OK) {
        pulses->searches[pulses->n_searches++] = ear->search;
        stage->searches[stage->n_searches++] = ear->search;
    }
    return status;
}

static enum status create_ear(struct pulses *pulses, struct ear *ear)
{
    enum status status = find_search(pulses, ear);
    if (status == STATUS_OK)
        status = trigger_create(ear->call_class, ear->search, &ear->trigger);
    if (status != STATUS_OK)
        return status;
    struct stage *stage = &pulses->stages[ear->stage];
    stage->ears[stage->n_ears++] = (uint32_t)(ear - pulses->ears);
    struct noise_rate noise = {noise_rate_of, ear->search};
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
            status = stages_add_ear(pulses, &classes[c], c);
    if (status == STATUS_OK)
        status = stages_create(pulses);
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
    pulses->n_frames = 0;
    stages_reset(pulses);
    for (uint32_t s = 0; s < pulses->n_searches; s++)
        pulse_search_reset(pulses->searches[s]);
    for (uint32_t e = 0; e < pulses->n_ears; e++) {
        trigger_reset(pulses->ears[e].trigger);
        tied_reset(&pulses->ears[e].tied);
        pulses->ears[e].hidden = (struct hidden){0};
        pulses->ears[e].behind = false;
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
    train_measure(train, ear->call_class, found.measures);
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

/* What an ear makes of a block. Where nothing was found and nothing waits for its echoes, only time has gone
 * on: that is told to the trains now and then, and before the next pulse. */
static void hear(struct pulses *pulses, struct ear *ear, const struct stage *stage)
{
    struct hearing hearing = {pulses, ear};
    struct pulse_sink pulse_sink = {take_pulse, &hearing};
    struct train_sink train_sink = {take_train, &hearing};
    const bool idle = trigger_is_idle(ear->trigger);
    if (idle && stage->n_blocks % stage->tell_blocks != 0) {
        ear->behind = true;
        return;
    }
    if (!idle && ear->behind)
        tied_advance(&ear->tied,
                     pulse_search_get_known(ear->search) - (double)stage->block_frames * stage->factor,
                     &train_sink, ear->rejections);
    ear->behind = false;
    trigger_push(ear->trigger, &pulse_sink, ear->rejections);
    tied_advance(&ear->tied, trigger_get_known(ear->trigger), &train_sink, ear->rejections);
}

void pulses_search(struct pulses *pulses, uint32_t index)
{
    struct stage *stage = &pulses->stages[index];
    bands_push_room(stage->bands);
    stage->n_blocks++;
    pulses->known_frame =
        pulses->first_frame + stage->n_blocks * stage->block_frames * stage->factor - (stage->factor == 1);
    for (uint32_t s = 0; s < stage->n_searches; s++)
        pulse_search_push(stage->searches[s]);
    for (uint32_t e = 0; e < stage->n_ears; e++)
        hear(pulses, &pulses->ears[stage->ears[e]], stage);
}

void pulses_push(struct pulses *pulses, const float *pascals, uint32_t n, const struct found_sink *sink)
{
    pulses_push_lowered(pulses, pascals, n, &(struct lowered){.factor = 1}, sink);
}

/* A decimator gives its first sample with the first that it takes: of n since the reset, n / factor, rounded
 * up. */
void pulses_push_lowered(struct pulses *pulses, const float *pascals, uint32_t n,
                         const struct lowered *lowered, const struct found_sink *sink)
{
    pulses->sink = sink;
    struct lowered left = *lowered, part = *lowered;
    for (uint32_t done = 0; done < n; done += PIECE_FRAMES) {
        const uint32_t take = n - done < PIECE_FRAMES ? n - done : PIECE_FRAMES;
        const uint64_t before = (pulses->n_frames + left.factor - 1) / left.factor;
        pulses->n_frames += take;
        const uint64_t after = (pulses->n_frames + left.factor - 1) / left.factor;
        part.n = left.factor > 1 ? (uint32_t)(after - before) : 0;
        part.samples = left.samples;
        stages_push(pulses, pascals + done, take, &part);
        left.samples += part.n;
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
    for (uint32_t s = 0; s < pulses->n_searches; s++)
        pulse_search_destroy(pulses->searches[s]);
    stages_destroy(pulses);
    free(pulses);
}
