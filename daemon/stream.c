/* One stream's thread; see stream.h. */
#include "stream.h"
#include "base/time.h"
#include "clock.h"
#include "float_mode.h"
#include "listen/blocks.h"
#include <math.h>
#include <pthread.h>
#include <stdatomic.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define DRIFT_WINDOW_NS (60 * TIME_NS_PER_S)
#define DRIFT_LIMIT_NS                                                                                       \
    (TIME_NS_PER_S / 20) /* a map that is wrong by more than 50 ms is changed, and said                      \
                          */

/* How far the sound card's clock and the computer's have drifted apart: the least delay of arrivals in each
 * window, since only the earliest arrivals are free of scheduling delay. */
struct drift {
    int64_t window_end_ns, least_ns, baseline_ns;
    bool has_baseline;
};

struct stream {
    struct stream_setup setup;
    const struct input_kind *kind;
    void *input;
    struct input_facts facts;
    struct listen *listen;
    struct blocks *blocks;
    float *samples; /* [block * channels] */
    struct merge *merge;
    struct time_map map;
    bool anchored; /* a live stream's map is set at its first sound */
    uint64_t next_frame;
    int64_t start_monotonic_ns, start_ns;
    struct drift drift;
    pthread_t thread;
    bool running;
    atomic_bool stop;
    int64_t accounts_ns;  /* monotonic time at which the accounts were last looked at */
    pthread_mutex_t lock; /* guards what follows */
    struct stream_state state;
    uint32_t n_accounts;
    struct class_account accounts[LISTEN_MAX_ACCOUNTS];
};

enum status stream_open(const struct stream_setup *setup, struct problems *problems, struct stream **out)
{
    const struct input_kind *kind = input_find(setup->settings->input);
    if (!kind)
        return STATUS_NOT_FOUND;
    struct stream *stream = calloc(1, sizeof *stream);
    if (!stream)
        return STATUS_NO_MEMORY;
    stream->setup = *setup;
    stream->kind = kind;
    pthread_mutex_init(&stream->lock, NULL);
    enum status status = kind->open(setup->settings, problems, &stream->input, &stream->facts);
    if (status != STATUS_OK) {
        stream->input = NULL;
        stream_destroy(stream);
        return status;
    }
    *out = stream;
    return STATUS_OK;
}

const struct input_facts *stream_get_facts(const struct stream *stream)
{
    return &stream->facts;
}

enum status stream_next_note(struct stream *stream, double *out_at_s, struct note *out)
{
    return stream->kind->next_note ? stream->kind->next_note(stream->input, INFINITY, out, out_at_s)
                                   : STATUS_END;
}

static void take_event(void *context, const struct event *event)
{
    struct stream *stream = context;
    merge_put(stream->merge, event);
}

static void take_column(void *context, const struct column *column)
{
    struct stream *stream = context;
    if (stream->setup.columns.take)
        stream->setup.columns.take(stream->setup.columns.context, stream->setup.number, column);
}

static void take_block(void *context, const struct block *block)
{
    struct stream *stream = context;
    const struct event_sink sink = {take_event, stream};
    if (listen_push(stream->listen, block, &sink) != STATUS_OK) {
        pthread_mutex_lock(&stream->lock);
        stream->state.status = STATUS_BUG;
        pthread_mutex_unlock(&stream->lock);
    }
    merge_progress(stream->merge, stream->setup.number, listen_get_time(stream->listen));
}

/* The present watch time by the monotonic clock. */
static int64_t present_ns(const struct stream *stream)
{
    return stream->start_ns + clock_monotonic_ns() - stream->start_monotonic_ns;
}

static void change_map(struct stream *stream, int64_t change_ns)
{
    stream->map.anchor_ns = time_of_frame(&stream->map, stream->next_frame) + change_ns;
    stream->map.anchor_frame = stream->next_frame;
    listen_set_map(stream->listen, &stream->map);
    pthread_mutex_lock(&stream->lock);
    stream->state.map = stream->map;
    stream->state.map_change_ns = change_ns;
    stream->state.map_changes++;
    pthread_mutex_unlock(&stream->lock);
}

static void follow_clock(struct stream *stream, uint32_t n_frames)
{
    struct drift *drift = &stream->drift;
    uint64_t end = stream->next_frame + n_frames;
    int64_t now_ns = present_ns(stream);
    if (!stream->anchored) {
        stream->anchored = true;
        int64_t first_ns = now_ns - (int64_t)((double)n_frames * 1e9 / stream->map.rate_hz);
        change_map(stream, first_ns - time_of_frame(&stream->map, stream->next_frame));
        drift->window_end_ns = now_ns + DRIFT_WINDOW_NS;
        drift->least_ns = INT64_MAX;
    }
    int64_t delay_ns = now_ns - time_of_frame(&stream->map, end);
    drift->least_ns = delay_ns < drift->least_ns ? delay_ns : drift->least_ns;
    if (now_ns < drift->window_end_ns)
        return;
    if (!drift->has_baseline) {
        drift->has_baseline = true;
        drift->baseline_ns = drift->least_ns;
    }
    int64_t change_ns = drift->least_ns - drift->baseline_ns;
    if (change_ns > DRIFT_LIMIT_NS || change_ns < -DRIFT_LIMIT_NS)
        change_map(stream, change_ns);
    drift->window_end_ns = now_ns + DRIFT_WINDOW_NS;
    drift->least_ns = INT64_MAX;
}

/* A recording or scene at real pace gives its sound when it would have sounded. */
static void keep_pace(const struct stream *stream, uint32_t n_frames)
{
    if (stream->facts.live || !stream->setup.settings->real_pace)
        return;
    double played_s = (double)(stream->next_frame + n_frames) / stream->map.rate_hz;
    clock_wait_until_ns(stream->start_monotonic_ns + (int64_t)(played_s * 1e9));
}

static void note_accounts(struct stream *stream)
{
    pthread_mutex_lock(&stream->lock);
    stream->n_accounts = listen_get_accounts(stream->listen, stream->accounts);
    pthread_mutex_unlock(&stream->lock);
}

static void note_state(struct stream *stream, const struct input_piece *piece)
{
    char health[sizeof stream->state.health] = "";
    if (stream->kind->get_health)
        stream->kind->get_health(stream->input, health, sizeof health);
    struct timespec cpu;
    clock_gettime(CLOCK_THREAD_CPUTIME_ID, &cpu);
    pthread_mutex_lock(&stream->lock);
    struct stream_state *state = &stream->state;
    if (piece->n_frames > 0)
        state->last_sound_ns = clock_monotonic_ns();
    state->heard_s += (double)piece->n_frames / stream->map.rate_hz;
    state->lost_s += (double)piece->lost_before / stream->map.rate_hz;
    state->heard_ns = listen_get_time(stream->listen);
    state->cpu_s = (double)cpu.tv_sec + (double)cpu.tv_nsec * 1e-9;
    memcpy(state->health, health, sizeof health);
    pthread_mutex_unlock(&stream->lock);
    int64_t now_ns = clock_monotonic_ns();
    if (now_ns - stream->accounts_ns >= TIME_NS_PER_S) {
        stream->accounts_ns = now_ns;
        note_accounts(stream);
    }
}

static void give_sound(const struct stream *stream, const struct input_piece *piece)
{
    const struct stream_sound *sound = &stream->setup.sound;
    if (sound->take && piece->n_frames > 0)
        sound->take(sound->context, stream->setup.number,
                    time_of_frame(&stream->map, stream->next_frame + piece->lost_before), stream->samples,
                    piece->n_frames);
}

static enum status take_piece(struct stream *stream, uint32_t max_frames)
{
    const struct block_sink sink = {take_block, stream};
    struct input_piece piece = {0};
    enum status status = stream->kind->read(stream->input, stream->samples, max_frames, &piece);
    if (status == STATUS_TIMEOUT) {
        note_state(stream, &(struct input_piece){0});
        return STATUS_OK;
    }
    if (status != STATUS_OK)
        return status;
    if (stream->facts.live)
        follow_clock(stream, piece.n_frames + (uint32_t)piece.lost_before);
    keep_pace(stream, piece.n_frames + (uint32_t)piece.lost_before);
    give_sound(stream, &piece);
    blocks_push(stream->blocks, piece.lost_before, stream->samples, piece.n_frames, &sink);
    stream->next_frame += piece.lost_before + piece.n_frames;
    note_state(stream, &piece);
    return STATUS_OK;
}

/* The input has ended, the watch has not: what it would have given is lost, by the monotonic clock. */
static void go_on_without(struct stream *stream)
{
    const struct block_sink sink = {take_block, stream};
    while (!atomic_load(&stream->stop)) {
        clock_wait_until_ns(clock_monotonic_ns() + TIME_NS_PER_S / 4);
        int64_t behind_ns = present_ns(stream) - time_of_frame(&stream->map, stream->next_frame);
        if (behind_ns <= 0)
            continue;
        uint64_t lost = (uint64_t)((double)behind_ns * 1e-9 * stream->map.rate_hz);
        blocks_push(stream->blocks, lost, NULL, 0, &sink);
        stream->next_frame += lost;
        note_state(stream, &(struct input_piece){.lost_before = lost});
    }
}

static void *run_stream(void *context)
{
    struct stream *stream = context;
    const struct block_sink blocks = {take_block, stream};
    const struct event_sink events = {take_event, stream};
    char name[16];
    snprintf(name, sizeof name, "stream %u", stream->setup.number % 100);
    pthread_setname_np(pthread_self(), name);
    float_mode_flush_to_zero();
    uint32_t max_frames = flow_block_frames(stream->facts.rate_hz);
    enum status status = STATUS_OK;
    while (status == STATUS_OK && !atomic_load(&stream->stop))
        status = take_piece(stream, max_frames);
    pthread_mutex_lock(&stream->lock);
    stream->state.ended = status != STATUS_OK;
    if (status != STATUS_OK && status != STATUS_END)
        stream->state.status = status;
    pthread_mutex_unlock(&stream->lock);
    if (status != STATUS_OK && stream->setup.goes_on)
        go_on_without(stream);
    blocks_finish(stream->blocks, &blocks);
    listen_finish(stream->listen, &events);
    note_accounts(stream);
    merge_progress(stream->merge, stream->setup.number, listen_get_time(stream->listen));
    merge_end(stream->merge, stream->setup.number);
    return NULL;
}

static enum status build(struct stream *stream, uint32_t run, int64_t start_ns)
{
    struct listen_setup setup = {.stream = stream->setup.number,
                                 .run = run,
                                 .n_channels = stream->facts.n_channels,
                                 .rate_hz = stream->facts.rate_hz,
                                 .map = {.anchor_ns = start_ns, .rate_hz = stream->facts.rate_hz},
                                 .catalogue = stream->setup.catalogue};
    if (stream->setup.columns.take)
        setup.columns = (struct column_sink){take_column, stream};
    for (uint32_t i = 0; i < setup.n_channels; i++) {
        setup.calibration[i] = stream->setup.settings->channels[i].calibration;
        setup.range_m[i] = channel_range_m(&stream->setup.settings->channels[i]);
    }
    stream->map = setup.map;
    enum status status = listen_create(&setup, &stream->listen);
    if (status == STATUS_OK)
        status = blocks_create(setup.stream, setup.n_channels, setup.rate_hz, &stream->blocks);
    if (status == STATUS_OK) {
        stream->samples = calloc((size_t)flow_block_frames(setup.rate_hz) * setup.n_channels, sizeof(float));
        status = stream->samples ? STATUS_OK : STATUS_NO_MEMORY;
    }
    return status;
}

enum status stream_prepare(struct stream *stream, uint32_t run, int64_t start_ns, double skip_s)
{
    enum status status = build(stream, run, start_ns);
    stream->start_ns = start_ns;
    if (status == STATUS_OK && skip_s > 0 && stream->kind->skip)
        status = stream->kind->skip(stream->input, skip_s);
    return status == STATUS_END ? STATUS_OK : status;
}

enum status stream_start(struct stream *stream, struct merge *merge)
{
    stream->merge = merge;
    stream->start_monotonic_ns = clock_monotonic_ns();
    if (pthread_create(&stream->thread, NULL, run_stream, stream) != 0)
        return STATUS_SYSTEM;
    stream->running = true;
    return STATUS_OK;
}

void stream_stop(struct stream *stream)
{
    if (!stream || !stream->running)
        return;
    atomic_store(&stream->stop, true);
    pthread_join(stream->thread, NULL);
    stream->running = false;
}

void stream_destroy(struct stream *stream)
{
    if (!stream)
        return;
    stream_stop(stream);
    if (stream->input)
        stream->kind->close(stream->input);
    listen_destroy(stream->listen);
    blocks_destroy(stream->blocks);
    free(stream->samples);
    pthread_mutex_destroy(&stream->lock);
    free(stream);
}

void stream_get_state(struct stream *stream, struct stream_state *out)
{
    pthread_mutex_lock(&stream->lock);
    *out = stream->state;
    pthread_mutex_unlock(&stream->lock);
}

uint32_t stream_get_accounts(struct stream *stream, struct class_account out[LISTEN_MAX_ACCOUNTS])
{
    pthread_mutex_lock(&stream->lock);
    uint32_t n = stream->n_accounts;
    memcpy(out, stream->accounts, n * sizeof out[0]);
    pthread_mutex_unlock(&stream->lock);
    return n;
}
