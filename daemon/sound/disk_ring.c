/* The disk ring's thread; see disk_ring.h. */
#include "base/time.h"
#include "clock.h"
#include "sound/disk_ring_inner.h"
#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/statvfs.h>
#include <unistd.h>

#define MEMORY_S 2.0 /* a disk that stands still for longer loses sound */
#define PIECE_FRAMES 4096
#define STEP_NS (TIME_NS_PER_S / 10)
#define LONGEST_SEGMENT_S 60.0 /* or a tenth of the ring, and at least 5 s */
#define SAME_NS 200000         /* times are whole microseconds, and lengths whole frames */
#define HOLE_NS TIME_NS_PER_S  /* a longer hole begins a new file */
#define AGAIN_NS (10 * TIME_NS_PER_S)
#define AGAIN_BYTES (8ULL << 20) /* more than what must stay free, before it writes again */

void disk_ring_path(const struct disk_ring *ring, const struct segment *segment,
                    char out[2 * DISK_RING_PATH_SIZE])
{
    char name[SEGMENT_NAME_SIZE];
    segment_name(segment, name);
    snprintf(out, 2 * DISK_RING_PATH_SIZE, "%s/%s", ring->folder, name);
}

static void set_problem(struct disk_ring *ring, const char *text)
{
    ring->has_problem = *text != '\0';
    pthread_mutex_lock(&ring->lock);
    snprintf(ring->state.problem, sizeof ring->state.problem, "%s", text);
    pthread_mutex_unlock(&ring->lock);
}

/* ---- room: all by the ring's thread */

static bool drop_oldest(struct disk_ring *ring)
{
    char path[2 * DISK_RING_PATH_SIZE];
    pthread_mutex_lock(&ring->lock);
    size_t i = segments_oldest(&ring->segments);
    bool any = i < ring->segments.n;
    if (any) {
        disk_ring_path(ring, &ring->segments.all[i], path);
        segments_remove(&ring->segments, i);
    }
    pthread_mutex_unlock(&ring->lock);
    if (any)
        unlink(path);
    return any;
}

static bool is_too_much(struct disk_ring *ring)
{
    uint64_t bytes = 0;
    int64_t newest_ns = INT64_MIN, oldest_ns = INT64_MAX;
    pthread_mutex_lock(&ring->lock);
    for (size_t i = 0; i < ring->segments.n; i++) {
        const struct segment *segment = &ring->segments.all[i];
        int64_t end_ns = segment_end_ns(segment);
        bytes += segment_bytes(segment);
        newest_ns = end_ns > newest_ns ? end_ns : newest_ns;
        if (!segment->open && end_ns < oldest_ns)
            oldest_ns = end_ns;
    }
    ring->state.bytes = bytes;
    pthread_mutex_unlock(&ring->lock);
    return bytes > ring->setup.most_bytes ||
           (oldest_ns != INT64_MAX && oldest_ns < newest_ns - (int64_t)(ring->setup.minutes * 60e9));
}

static uint64_t free_bytes(const struct disk_ring *ring)
{
    struct statvfs facts;
    return statvfs(ring->folder, &facts) == 0 ? (uint64_t)facts.f_bavail * facts.f_frsize : 0;
}

static void close_segment(struct disk_ring *ring, struct ring_stream *stream)
{
    if (!stream->writer)
        return;
    sound_writer_destroy(stream->writer);
    stream->writer = NULL;
    pthread_mutex_lock(&ring->lock);
    struct segment *segment = segments_open_of(&ring->segments, stream->segment.stream);
    if (segment) {
        segment->n_frames = stream->segment.n_frames;
        segment->open = false;
    }
    pthread_mutex_unlock(&ring->lock);
}

/* The ledger comes first: the ring gives up its oldest sound, then the sound to come. */
static void keep_room(struct disk_ring *ring)
{
    char text[DISK_RING_PROBLEM_SIZE];
    while (is_too_much(ring) && drop_oldest(ring))
        ;
    uint64_t leave = ring->setup.leave_bytes;
    while (free_bytes(ring) < leave && drop_oldest(ring))
        ;
    uint64_t left = free_bytes(ring);
    if (left < leave && !ring->no_room) {
        ring->no_room = true;
        for (uint32_t i = 0; i < ring->setup.n_streams; i++)
            close_segment(ring, &ring->streams[i]);
        while (free_bytes(ring) < leave && drop_oldest(ring))
            ;
        snprintf(text, sizeof text, "less than %llu MiB of the disk are free: sound is not kept",
                 (unsigned long long)(leave >> 20));
        set_problem(ring, text);
    } else if (ring->no_room && left >= leave + (leave < AGAIN_BYTES ? leave : AGAIN_BYTES)) {
        ring->no_room = clock_monotonic_ns() - ring->failed_ns < AGAIN_NS;
    }
}

/* ---- writing */

static enum status open_segment(struct disk_ring *ring, uint32_t number, int64_t start_ns)
{
    struct ring_stream *stream = &ring->streams[number - 1];
    char path[2 * DISK_RING_PATH_SIZE];
    stream->segment = (struct segment){.stream = number,
                                       .run = ring->setup.run,
                                       .n_channels = stream->facts.n_channels,
                                       .start_ns = start_ns,
                                       .rate_hz = stream->facts.rate_hz,
                                       .open = true};
    disk_ring_path(ring, &stream->segment, path);
    enum status status = sound_writer_create(path, stream->facts.rate_hz, stream->facts.n_channels,
                                             ring->setup.zero_unix_ns + start_ns, &stream->writer);
    if (status != STATUS_OK)
        return status;
    pthread_mutex_lock(&ring->lock);
    status = segments_add(&ring->segments, &stream->segment);
    pthread_mutex_unlock(&ring->lock);
    if (status != STATUS_OK) {
        sound_writer_destroy(stream->writer);
        stream->writer = NULL;
        unlink(path);
    }
    return status;
}

static enum status put_silence(struct ring_stream *stream, uint64_t n)
{
    float silence[1024] = {0};
    uint64_t at_once = 1024 / stream->facts.n_channels;
    enum status status = STATUS_OK;
    for (uint64_t done = 0; done < n && status == STATUS_OK; done += at_once)
        status = sound_writer_put(stream->writer, silence, n - done < at_once ? n - done : at_once);
    if (status == STATUS_OK)
        stream->segment.n_frames += n;
    return status;
}

/* Ends the file where sound does not follow on it, or it is long enough; fills a short hole. */
static enum status join(struct disk_ring *ring, struct ring_stream *stream, int64_t start_ns)
{
    if (!stream->writer)
        return STATUS_OK;
    int64_t hole_ns = start_ns - segment_end_ns(&stream->segment);
    if (hole_ns < -SAME_NS || hole_ns >= HOLE_NS || start_ns - stream->segment.start_ns >= ring->segment_ns) {
        close_segment(ring, stream);
        return STATUS_OK;
    }
    if (hole_ns <= SAME_NS)
        return STATUS_OK;
    return put_silence(stream, (uint64_t)llround((double)hole_ns * 1e-9 * stream->facts.rate_hz));
}

static void lose(struct disk_ring *ring, const struct ring_stream *stream, uint64_t n_frames)
{
    pthread_mutex_lock(&ring->lock);
    ring->state.lost_s += (double)n_frames / stream->facts.rate_hz;
    pthread_mutex_unlock(&ring->lock);
}

static void write_piece(struct disk_ring *ring, uint32_t number, const struct ring_mark *mark)
{
    struct ring_stream *stream = &ring->streams[number - 1];
    enum status status = ring->no_room ? STATUS_BUSY : join(ring, stream, mark->ns);
    if (status == STATUS_OK && !stream->writer)
        status = open_segment(ring, number, mark->ns);
    if (status == STATUS_OK)
        status = sound_writer_put(stream->writer, stream->piece, mark->n_frames);
    if (status == STATUS_OK) {
        stream->segment.n_frames += mark->n_frames;
        if (ring->has_problem)
            set_problem(ring, ""); /* it is over when sound is on the disk again */
        return;
    }
    lose(ring, stream, mark->n_frames);
    if (ring->no_room)
        return;
    close_segment(ring, stream);
    ring->no_room = true; /* until keep_room finds room again */
    ring->failed_ns = clock_monotonic_ns();
    set_problem(ring, "the disk does not take sound: it is not kept");
    drop_oldest(ring);
}

/* What the memory holds; true where there was anything. */
static bool drain(struct disk_ring *ring, uint32_t number)
{
    struct ring_stream *stream = &ring->streams[number - 1];
    bool any = false;
    int64_t end_ns = 0;
    for (;;) {
        uint32_t n = 1;
        uint64_t available;
        if (!stream->has_held && (ring_get_marks(&stream->out, &stream->held, 1, &n) != STATUS_OK || n == 0))
            break;
        stream->has_held = true;
        if (ring_available(&stream->out, &available) != STATUS_OK || available < stream->held.n_frames)
            break;
        stream->has_held = false;
        ring_get(&stream->out, stream->piece, stream->held.n_frames, &n);
        write_piece(ring, number, &stream->held);
        end_ns = stream->held.ns + (int64_t)((double)n / stream->facts.rate_hz * 1e9);
        any = true;
    }
    uint64_t dropped = ring_dropped(&stream->out);
    if (dropped != stream->dropped)
        lose(ring, stream, dropped - stream->dropped);
    stream->dropped = dropped;
    if (!any)
        return false;
    if (stream->writer)
        sound_writer_sync(stream->writer);
    pthread_mutex_lock(&ring->lock);
    struct segment *segment = segments_open_of(&ring->segments, number);
    if (segment)
        segment->n_frames = stream->segment.n_frames;
    ring->end_ns[number - 1] = end_ns;
    pthread_mutex_unlock(&ring->lock);
    return true;
}

static bool wait_a_step(struct disk_ring *ring, int64_t until_ns)
{
    struct timespec until = {.tv_sec = until_ns / TIME_NS_PER_S, .tv_nsec = until_ns % TIME_NS_PER_S};
    pthread_mutex_lock(&ring->lock);
    while (!ring->stopping && pthread_cond_timedwait(&ring->wake, &ring->lock, &until) == 0)
        ;
    bool stopping = ring->stopping;
    pthread_mutex_unlock(&ring->lock);
    return stopping;
}

static void *work(void *context)
{
    struct disk_ring *ring = context;
    pthread_setname_np(pthread_self(), "disk ring");
    int64_t next_ns = clock_monotonic_ns(), tidied_ns = 0;
    for (bool stopping = false; !stopping;) {
        next_ns += STEP_NS;
        stopping = wait_a_step(ring, next_ns);
        int64_t now_ns = clock_monotonic_ns();
        next_ns = next_ns < now_ns ? now_ns : next_ns;
        if (now_ns - tidied_ns >= TIME_NS_PER_S) {
            tidied_ns = now_ns;
            keep_room(ring);
        }
        for (uint32_t i = 0; i < ring->setup.n_streams; i++)
            if (ring->streams[i].memory)
                drain(ring, i + 1);
    }
    for (uint32_t i = 0; i < ring->setup.n_streams; i++)
        close_segment(ring, &ring->streams[i]);
    return NULL;
}

/* ---- start and end */

static enum status make_stream(const struct disk_ring_stream *facts, struct ring_stream *stream)
{
    stream->facts = *facts;
    if (facts->n_channels == 0)
        return STATUS_OK;
    uint32_t frames = ring_capacity(facts->rate_hz, MEMORY_S);
    size_t size = (ring_size(facts->n_channels, frames) + 63) / 64 * 64;
    stream->piece = malloc((size_t)PIECE_FRAMES * facts->n_channels * sizeof *stream->piece);
    stream->memory = size ? aligned_alloc(64, size) : NULL;
    if (!stream->memory || !stream->piece)
        return STATUS_NO_MEMORY;
    enum status status = ring_create(&stream->in, stream->memory, size, facts->n_channels, frames);
    return status == STATUS_OK ? ring_attach(&stream->out, stream->memory, size) : status;
}

static enum status find(struct disk_ring *ring)
{
    if (mkdir(ring->folder, 0755) != 0 && errno != EEXIST) {
        snprintf(ring->state.problem, sizeof ring->state.problem, "%.100s cannot be made (%s)", ring->folder,
                 strerror(errno));
        ring->no_room = ring->has_problem = true;
        return STATUS_OK;
    }
    enum status status = segments_find(&ring->segments, ring->folder, ring->setup.run > 1);
    return status == STATUS_NO_MEMORY ? status : STATUS_OK;
}

enum status disk_ring_create(const struct disk_ring_setup *setup, struct disk_ring **out)
{
    struct disk_ring *ring = calloc(1, sizeof *ring);
    if (!ring)
        return STATUS_NO_MEMORY;
    ring->setup = *setup;
    snprintf(ring->folder, sizeof ring->folder, "%s", setup->folder);
    ring->setup.folder = ring->folder;
    ring->segment_ns = (int64_t)(fmax(5, fmin(LONGEST_SEGMENT_S, setup->minutes * 6)) * 1e9);
    pthread_mutex_init(&ring->lock, NULL);
    pthread_condattr_t monotonic;
    pthread_condattr_init(&monotonic);
    pthread_condattr_setclock(&monotonic, CLOCK_MONOTONIC);
    pthread_cond_init(&ring->wake, &monotonic);
    pthread_condattr_destroy(&monotonic);
    enum status status = find(ring);
    for (uint32_t i = 0; i < setup->n_streams && status == STATUS_OK; i++)
        status = make_stream(&setup->streams[i], &ring->streams[i]);
    if (status == STATUS_OK) {
        ring->has_thread = pthread_create(&ring->thread, NULL, work, ring) == 0;
        status = ring->has_thread ? STATUS_OK : STATUS_SYSTEM;
    }
    if (status != STATUS_OK) {
        disk_ring_destroy(ring);
        return status;
    }
    *out = ring;
    return STATUS_OK;
}

void disk_ring_destroy(struct disk_ring *ring)
{
    if (!ring)
        return;
    if (ring->has_thread) {
        pthread_mutex_lock(&ring->lock);
        ring->stopping = true;
        pthread_cond_signal(&ring->wake);
        pthread_mutex_unlock(&ring->lock);
        pthread_join(ring->thread, NULL);
    }
    for (uint32_t i = 0; i < DISK_RING_MAX_STREAMS; i++) {
        free(ring->streams[i].memory);
        free(ring->streams[i].piece);
    }
    segments_destroy(&ring->segments);
    pthread_cond_destroy(&ring->wake);
    pthread_mutex_destroy(&ring->lock);
    free(ring);
}

void disk_ring_push(struct disk_ring *ring, uint32_t stream, int64_t start_ns, const float *samples,
                    uint32_t n)
{
    struct ring_stream *into = &ring->streams[stream - 1];
    if (!into->memory)
        return;
    for (uint32_t at = 0; at < n; at += PIECE_FRAMES) {
        uint32_t piece = n - at < PIECE_FRAMES ? n - at : PIECE_FRAMES;
        const struct ring_mark stamp = {.ns = start_ns + (int64_t)((double)at / into->facts.rate_hz * 1e9)};
        ring_push(&into->in, samples + (size_t)at * into->facts.n_channels, piece, &stamp);
    }
}

int64_t disk_ring_end_ns(struct disk_ring *ring, uint32_t stream)
{
    pthread_mutex_lock(&ring->lock);
    int64_t end_ns = ring->end_ns[stream - 1];
    pthread_mutex_unlock(&ring->lock);
    return end_ns;
}

void disk_ring_get_state(struct disk_ring *ring, struct disk_ring_state *out)
{
    pthread_mutex_lock(&ring->lock);
    *out = ring->state;
    for (size_t i = 0; i < ring->segments.n; i++) {
        int64_t end_ns = segment_end_ns(&ring->segments.all[i]);
        out->to_ns = end_ns > out->to_ns ? end_ns : out->to_ns;
    }
    out->from_ns = ring->segments.n ? ring->segments.all[0].start_ns : out->to_ns;
    pthread_mutex_unlock(&ring->lock);
}
