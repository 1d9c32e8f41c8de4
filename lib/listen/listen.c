/* One stream's composition; see listen.h.
 *
 * What the ears find while a block is taken is gathered, put in order of the time at which it became known,
 * numbered and given. Known times stay within the block, so that the order over all blocks is the order of
 * giving. */
#include "base/units.h"
#include "listen/listen_inner.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define MAX_PIECE_S 10.0
#define HOLD_S 0.05 /* how long a call waits for the same call on another channel */

/* Watch time at which what needed `frame` became known: its end, within the block that is being taken. */
static int64_t known_ns(const struct listen *listen, uint64_t frame)
{
    if (frame + 1 > listen->block_end)
        frame = listen->block_end - 1;
    if (frame < listen->block_first)
        frame = listen->block_first;
    return time_of_frame(&listen->setup.map, frame + 1);
}

int64_t listen_time_at(const struct listen *listen, double frame)
{
    double whole = floor(frame);
    if (whole < 0)
        whole = frame = 0;
    double rest_ns = (frame - whole) * 1e9 / listen->setup.map.rate_hz;
    return time_round_us(time_of_frame(&listen->setup.map, (uint64_t)whole) + (int64_t)llround(rest_ns));
}

static bool goes_before(const struct event *a, const struct event *b)
{
    return a->known_ns != b->known_ns ? a->known_ns < b->known_ns : a->kind < b->kind;
}

static void give_pending(struct listen *listen)
{
    for (uint32_t i = 1; i < listen->n_pending; i++) {
        struct event event = listen->pending[i];
        uint32_t at = i;
        for (; at > 0 && goes_before(&event, &listen->pending[at - 1]); at--)
            listen->pending[at] = listen->pending[at - 1];
        listen->pending[at] = event;
    }
    for (uint32_t i = 0; i < listen->n_pending; i++) {
        struct event *event = &listen->pending[i];
        if (event->kind != EVENT_CALL) /* sounds name calls: they have theirs already */
            event->counter = ++listen->counters[event->kind];
        listen->sink->take(listen->sink->context, event);
    }
    listen->n_pending = 0;
}

struct event *listen_add_event(struct listen *listen, enum event_kind kind, uint64_t known_frame)
{
    if (listen->n_pending == LISTEN_MAX_PENDING)
        give_pending(listen);
    struct event *event = &listen->pending[listen->n_pending++];
    memset(event, 0, sizeof *event);
    event->kind = kind;
    event->stream = listen->setup.stream;
    event->run = listen->setup.run;
    event->known_ns = known_ns(listen, known_frame);
    if (kind == EVENT_CALL) /* added in the order in which they are given */
        event->counter = ++listen->counters[kind];
    return event;
}

/* Unheard time in adjoining pieces of at most 10 s. */
static void add_unheard(struct listen *listen, uint32_t channel, uint64_t start, uint64_t end, uint64_t known,
                        enum unheard_cause cause)
{
    uint64_t longest = (uint64_t)(MAX_PIECE_S * listen->setup.rate_hz);
    for (uint64_t at = start; at < end; at += longest) {
        struct event *event = listen_add_event(listen, EVENT_UNHEARD, known);
        event->as.unheard = (struct unheard){
            .channel = channel,
            .low_hz = 0,
            .high_hz = listen->setup.rate_hz / 2,
            .start_ns = time_of_frame(&listen->setup.map, at),
            .end_ns = time_of_frame(&listen->setup.map, end - at < longest ? end : at + longest),
            .cause = cause};
    }
}

static void take_level(void *context, uint32_t channel, const struct found_level *level)
{
    struct listen *listen = context;
    struct event *event = listen_add_event(listen, EVENT_LEVEL, level->known_frame);
    struct level *out = &event->as.level;
    out->channel = channel;
    out->start_ns = time_of_frame(&listen->setup.map, level->start_frame);
    out->seconds = level->frames / listen->setup.rate_hz;
    out->spl_db = level->spl_db;
    out->peak_db = level->peak_db;
    out->sel_db = level->spl_db + units_power_db(out->seconds);
    out->fast_max_db = level->fast_max_db;
    out->slow_max_db = level->slow_max_db;
    out->moments = level->moments;
    out->high_hz = listen->setup.rate_hz / 2;
    out->relative = level->relative;
    out->n_bands = level->n_bands;
    memcpy(out->band_db, level->band_db, sizeof out->band_db);
}

static void take_fault(void *context, uint32_t channel, const struct found_fault *fault)
{
    static const enum unheard_cause causes[HEALTH_CAUSE_COUNT] = {
        [HEALTH_CLIPPING] = UNHEARD_CLIPPING,      [HEALTH_DEAD] = UNHEARD_DEAD_CHANNEL,
        [HEALTH_FROZEN] = UNHEARD_DEAD_CHANNEL,    [HEALTH_TOO_QUIET] = UNHEARD_TOO_QUIET,
        [HEALTH_DUPLICATE] = UNHEARD_DEAD_CHANNEL,
    };
    add_unheard(context, channel, fault->start_frame, fault->end_frame, fault->known_frame,
                causes[fault->cause]);
}

static void take_impulse(void *context, uint32_t channel, const struct found_impulse *found)
{
    struct listen *listen = context;
    if (!measuring_has(&listen->measuring, channel))
        return;
    listen->n_impulses += channel == listen->measuring.reference;
    if (channel == listen->measuring.reference)
        listen_take_alone(listen, found);
    struct event *event = listen_add_event(listen, EVENT_IMPULSE, found->known_frame);
    const struct ear *ear = &listen->ears[channel - 1];
    struct impulse *impulse = &event->as.impulse;
    *impulse = (struct impulse){.channel = channel,
                                .time_ns = listen_time_at(listen, found->onset_frame),
                                .sel_db = found->sel_db,
                                .peak_db = found->peak_db,
                                .peak_to_peak_db = found->peak_to_peak_db,
                                .rms90_db = found->rms90_db,
                                .t90_s = found->t90_s,
                                .background_db = found->background_db,
                                .effective_s = found->effective_s,
                                .kurtosis = found->kurtosis,
                                .window_s = found->window_s,
                                .positive_impulse_pa_s = ear->relative ? NAN : found->positive_impulse_pa_s,
                                .n_bands = found->n_bands,
                                .relative = ear->relative,
                                .clipped = found->clipped,
                                .overlapped = found->overlapped,
                                .weak = found->weak,
                                .beside = channel != listen->measuring.reference,
                                .whose = IMPULSE_UNKNOWN};
    for (uint32_t b = 0; b < found->n_bands; b++)
        impulse->band_sel_db[b] = found->band_sel_db[b];
    if (!calibration_has_room(&listen->setup.calibration[channel - 1]))
        impulse_refuse_levels(impulse);
}

/* What one channel's source covers it covers for the stream, whose listening channels are close together. */
static void take_masked(void *context, uint32_t channel, const struct gate_masked *masked)
{
    struct listen *listen = context;
    (void)channel;
    for (uint32_t i = 0; i < listen->setup.n_channels; i++)
        if (listen->ears[i].listens)
            pulses_hide(listen->ears[i].pulses, masked->start_frame, masked->end_frame, masked->low_hz,
                        masked->high_hz);
    struct event *event = listen_add_event(listen, EVENT_UNHEARD, listen->block_end - 1);
    event->as.unheard = (struct unheard){.channel = 0,
                                         .low_hz = masked->low_hz,
                                         .high_hz = masked->high_hz,
                                         .start_ns = listen_time_at(listen, masked->start_frame),
                                         .end_ns = listen_time_at(listen, masked->end_frame),
                                         .cause = UNHEARD_OWN_SOURCE};
}

/* The first channel that listens masks the stream: a blow reaches it at another time than a far measuring
 * channel. */
static void choose_channels(struct listen *listen)
{
    const struct listen_setup *setup = &listen->setup;
    for (uint32_t i = setup->n_channels; i > 0; i--)
        if (setup->calibration[i - 1].role != ROLE_MEASURE)
            listen->strip_channel = i;
    listen->measuring = measuring_choose(setup->n_channels, setup->calibration, setup->range_m);
    bool has_source = listen->measuring.reference > 0 && setup->catalogue->n_classes > 0;
    listen->gate_channel = has_source ? listen->strip_channel : 0;
}

static enum status create_ears(struct listen *listen)
{
    const struct listen_setup *setup = &listen->setup;
    struct ear_setup ear = {
        .rate_hz = setup->rate_hz,
        .max_frames = flow_block_frames(setup->rate_hz),
        .classes = setup->catalogue->classes,
        .n_classes = setup->catalogue->n_classes,
        .sink = {take_level, take_fault, take_impulse, listen_take_call, take_masked, listen}};
    uint32_t listening = 0;
    for (uint32_t i = 0; i < setup->n_channels; i++) {
        ear.channel = i + 1;
        ear.calibration = setup->calibration[i];
        ear.measures_impulses = measuring_has(&listen->measuring, ear.channel);
        ear.gates = ear.channel == listen->gate_channel;
        ear.finds_impulses = ear.gates || ear.measures_impulses;
        enum status status = ear_create(&ear, &listen->ears[i]);
        if (status != STATUS_OK)
            return status;
        listening += listen->ears[i].listens;
        if (listen->gate_channel > 0 && ear.channel >= listen->gate_channel)
            listen->ears[i].tail_of = listen->ears[listen->gate_channel - 1].gate;
    }
    joiner_reset(&listen->joiner, listening > 1 ? (uint64_t)(HOLD_S * setup->rate_hz) : 0);
    return listen_create_calls(listen);
}

enum status listen_create(const struct listen_setup *setup, struct listen **out)
{
    if (setup->n_channels < 1 || setup->n_channels > FLOW_MAX_CHANNELS || setup->stream < 1 ||
        !(setup->rate_hz >= 8000 && setup->rate_hz <= 1e6) || setup->rate_hz != floor(setup->rate_hz))
        return STATUS_BAD_ARGUMENT;
    struct listen *listen = calloc(1, sizeof *listen);
    if (!listen)
        return STATUS_NO_MEMORY;
    listen->setup = *setup;
    choose_channels(listen);
    enum status status = create_ears(listen);
    if (status == STATUS_OK && listen->strip_channel > 0 && setup->columns.take)
        status =
            strips_create(setup->rate_hz, listen->ears[listen->strip_channel - 1].relative, &listen->strips);
    if (status != STATUS_OK) {
        listen_destroy(listen);
        return status;
    }
    *out = listen;
    return STATUS_OK;
}

void listen_destroy(struct listen *listen)
{
    if (!listen)
        return;
    for (uint32_t i = 0; i < listen->setup.n_channels; i++)
        ear_destroy(&listen->ears[i]);
    strips_destroy(listen->strips);
    others_destroy(listen->others);
    free(listen);
}

static void take_gap(struct listen *listen, const struct block *block)
{
    for (uint32_t i = 0; i < listen->setup.n_channels; i++)
        ear_reset(&listen->ears[i], block->first_frame);
    if (listen->others) {
        const struct found_sink sink = {listen_take_other, listen};
        others_finish(listen->others, &sink);
        others_reset(listen->others, block->first_frame);
    }
    if (listen->strips)
        strips_reset(listen->strips, block->first_frame);
    add_unheard(listen, 0, block->first_frame - block->lost_before, block->first_frame,
                block->first_frame - 1, UNHEARD_GAP);
}

static void take_sound(struct listen *listen, const struct block *block)
{
    uint64_t first = block->first_frame, end = first + block->n_frames;
    for (uint32_t i = 0; i < block->n_channels; i++)
        if (!ear_push(&listen->ears[i], block->samples, block->n_frames, block->n_channels))
            add_unheard(listen, i + 1, first, end, end - 1, UNHEARD_GAP);
    if (listen->strips)
        strips_push(listen->strips, listen->ears[listen->strip_channel - 1].pascals, block->n_frames,
                    &listen->setup.map, &listen->setup.columns);
}

/* Two channels that are bit for bit the same are one hydrophone. */
static void compare_channels(struct listen *listen)
{
    for (uint32_t later = 1; later < listen->setup.n_channels; later++)
        for (uint32_t earlier = 0; earlier < later; earlier++)
            ear_compare(&listen->ears[earlier], &listen->ears[later]);
}

enum status listen_push(struct listen *listen, const struct block *block, const struct event_sink *sink)
{
    if (block->n_channels != listen->setup.n_channels ||
        block->n_frames > flow_block_frames(listen->setup.rate_hz) ||
        block->first_frame != listen->next_frame + block->lost_before)
        return STATUS_BAD_ARGUMENT;
    listen->sink = sink;
    listen->block_first = block->n_frames ? block->first_frame : block->first_frame - 1;
    listen->block_end = block->first_frame + block->n_frames;
    if (block->lost_before > 0)
        take_gap(listen, block);
    if (block->n_frames > 0) {
        take_sound(listen, block);
        compare_channels(listen);
        listen_push_others(listen, block->n_frames);
    }
    listen_give_calls(listen, false);
    listen->next_frame = listen->block_end;
    give_pending(listen);
    return STATUS_OK;
}

enum status listen_finish(struct listen *listen, const struct event_sink *sink)
{
    if (listen->next_frame == 0)
        return STATUS_OK;
    listen->sink = sink;
    listen->block_first = listen->next_frame - 1;
    listen->block_end = listen->next_frame;
    for (uint32_t i = 0; i < listen->setup.n_channels; i++)
        ear_finish(&listen->ears[i]);
    if (listen->others) {
        const struct found_sink other = {listen_take_other, listen};
        others_finish(listen->others, &other);
    }
    listen_give_calls(listen, true);
    give_pending(listen);
    return STATUS_OK;
}

int64_t listen_get_time(const struct listen *listen)
{
    return time_of_frame(&listen->setup.map, listen->next_frame);
}

void listen_set_map(struct listen *listen, const struct time_map *map)
{
    listen->setup.map = *map;
}
