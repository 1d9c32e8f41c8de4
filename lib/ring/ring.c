#include "ring/ring.h"
#include <limits.h>
#include <stdalign.h>
#include <stdatomic.h>
#include <stdbool.h>
#include <string.h>

/* The race test builds this file with RING_RELAXED to see that the race detector then objects. */
#ifdef RING_RELAXED
#define RING_ACQUIRE memory_order_relaxed
#define RING_RELEASE memory_order_relaxed
#else
#define RING_ACQUIRE memory_order_acquire
#define RING_RELEASE memory_order_release
#endif

#define RING_MAGIC UINT64_C(0x676e697268737568) /* "hushring" */
#define LINE 64                                 /* bytes: what each side writes has cache lines of its own */
#define FRAMES_PER_MARK 64 /* a mark's room is never the limit for pushes of so many frames */

struct ring_memory {
    uint64_t magic;
    uint32_t version, n_channels, capacity_frames, capacity_marks;
    alignas(LINE) _Atomic uint64_t written; /* the writer's line */
    _Atomic uint64_t marks_written;
    _Atomic uint64_t dropped;
    alignas(LINE) _Atomic uint64_t read; /* the reader's line */
    _Atomic uint64_t marks_read;
    alignas(LINE) char end[LINE];
};

/* Between processes an atomic must not be a lock of one of them. */
_Static_assert(ATOMIC_LLONG_LOCK_FREE == 2 && sizeof(_Atomic uint64_t) == 8, "64-bit atomics are lock-free");
_Static_assert(sizeof(struct ring_memory) % LINE == 0, "marks begin on a cache line");
_Static_assert(sizeof(struct ring_mark) == 40, "the layout in shared memory is fixed");

uint32_t ring_capacity(double rate_hz, double seconds)
{
    uint32_t n = FRAMES_PER_MARK;
    while (n < RING_MAX_FRAMES && (double)n < rate_hz * seconds)
        n *= 2;
    return n;
}

static uint32_t marks_for(uint32_t capacity_frames)
{
    const uint32_t least = 64;
    uint32_t n = capacity_frames / FRAMES_PER_MARK;
    return n < least ? least : n;
}

static size_t marks_bytes(uint32_t capacity_marks)
{
    size_t bytes = capacity_marks * sizeof(struct ring_mark);
    return (bytes + LINE - 1) / LINE * LINE;
}

size_t ring_size(uint32_t n_channels, uint32_t capacity_frames)
{
    if (n_channels < 1 || n_channels > RING_MAX_CHANNELS || capacity_frames < FRAMES_PER_MARK ||
        capacity_frames > RING_MAX_FRAMES || (capacity_frames & (capacity_frames - 1)) != 0)
        return 0;
    return sizeof(struct ring_memory) + marks_bytes(marks_for(capacity_frames)) +
           (size_t)capacity_frames * n_channels * sizeof(float);
}

static void view(struct ring *out, void *memory, uint32_t n_channels, uint32_t capacity_frames)
{
    char *bytes = memory;
    memset(out, 0, sizeof *out);
    out->memory = memory;
    out->n_channels = n_channels;
    out->capacity_frames = capacity_frames;
    out->capacity_marks = marks_for(capacity_frames);
    out->marks = (struct ring_mark *)(void *)(bytes + sizeof(struct ring_memory));
    out->samples = (float *)(void *)(bytes + sizeof(struct ring_memory) + marks_bytes(out->capacity_marks));
}

enum status ring_create(struct ring *out, void *memory, size_t size, uint32_t n_channels,
                        uint32_t capacity_frames)
{
    size_t need = ring_size(n_channels, capacity_frames);
    if (!out || !memory || need == 0 || size < need || (uintptr_t)memory % LINE != 0)
        return STATUS_BAD_ARGUMENT;
    struct ring_memory *m = memory;
    memset(m, 0, sizeof *m);
    m->version = RING_VERSION;
    m->n_channels = n_channels;
    m->capacity_frames = capacity_frames;
    m->capacity_marks = marks_for(capacity_frames);
    m->magic = RING_MAGIC;
    view(out, memory, n_channels, capacity_frames);
    return STATUS_OK;
}

enum status ring_attach(struct ring *out, void *memory, size_t size)
{
    if (!out || !memory || (uintptr_t)memory % LINE != 0)
        return STATUS_BAD_ARGUMENT;
    if (size < sizeof(struct ring_memory))
        return STATUS_BAD_FORMAT;
    const struct ring_memory *m = memory;
    uint32_t n_channels = m->n_channels, capacity_frames = m->capacity_frames;
    size_t need = ring_size(n_channels, capacity_frames);
    if (m->magic != RING_MAGIC || m->version != RING_VERSION || need == 0 || size < need ||
        m->capacity_marks != marks_for(capacity_frames))
        return STATUS_BAD_FORMAT;
    view(out, memory, n_channels, capacity_frames);
    return STATUS_OK;
}

/* Copies n frames to or from the ring, in two pieces where they pass its end. */
static void copy_in(struct ring *ring, uint64_t at, const float *samples, uint32_t n)
{
    uint32_t start = (uint32_t)(at & (ring->capacity_frames - 1)), first = ring->capacity_frames - start;
    size_t frame = ring->n_channels;
    if (first > n)
        first = n;
    memcpy(ring->samples + start * frame, samples, first * frame * sizeof(float));
    memcpy(ring->samples, samples + first * frame, (n - first) * frame * sizeof(float));
}

static void copy_out(const struct ring *ring, uint64_t at, float *samples, uint32_t n)
{
    uint32_t start = (uint32_t)(at & (ring->capacity_frames - 1)), first = ring->capacity_frames - start;
    size_t frame = ring->n_channels;
    if (first > n)
        first = n;
    memcpy(samples, ring->samples + start * frame, first * frame * sizeof(float));
    memcpy(samples + first * frame, ring->samples, (n - first) * frame * sizeof(float));
}

/* Room for frames, as far as the reader's index can be believed: an impossible one gives no room. */
static uint32_t room(const struct ring *ring)
{
    uint64_t used = ring->written - atomic_load_explicit(&ring->memory->read, RING_ACQUIRE);
    uint64_t marks_used = ring->marks_written - atomic_load_explicit(&ring->memory->marks_read, RING_ACQUIRE);
    if (used >= ring->capacity_frames || marks_used >= ring->capacity_marks)
        return 0;
    return ring->capacity_frames - (uint32_t)used;
}

uint32_t ring_push(struct ring *ring, const float *samples, uint32_t n_frames, const struct ring_mark *stamp)
{
    uint32_t free_frames = room(ring), taken = n_frames < free_frames ? n_frames : free_frames;
    struct ring_memory *m = ring->memory;
    if (taken > 0) {
        struct ring_mark *mark = &ring->marks[ring->marks_written & (ring->capacity_marks - 1)];
        mark->frame = ring->written;
        mark->dropped_before = ring->pending_dropped;
        mark->ns = stamp->ns;
        mark->first_ns = stamp->first_ns;
        mark->n_frames = taken;
        mark->overrun = stamp->overrun;
        copy_in(ring, ring->written, samples, taken);
        ring->pending_dropped = 0;
        ring->written += taken;
        ring->marks_written++;
        /* The mark first: who sees a frame must find its mark. */
        atomic_store_explicit(&m->marks_written, ring->marks_written, RING_RELEASE);
        atomic_store_explicit(&m->written, ring->written, RING_RELEASE);
    }
    ring->pending_dropped += n_frames - taken;
    ring->dropped += n_frames - taken;
    atomic_store_explicit(&m->dropped, ring->dropped, memory_order_relaxed); /* a count, and guards nothing */
    return taken;
}

/* A mark, copied once out of memory that the other side can still write, must follow the mark before it. */
static bool follows(const struct ring *ring, const struct ring_mark *mark)
{
    return mark->frame == ring->written && mark->n_frames > 0 && mark->n_frames <= ring->capacity_frames &&
           mark->dropped_before < INT64_MAX / 2 && mark->overrun <= 1;
}

enum status ring_get_marks(struct ring *ring, struct ring_mark *out, uint32_t max, uint32_t *out_n)
{
    uint64_t written = atomic_load_explicit(&ring->memory->marks_written, RING_ACQUIRE);
    uint64_t waiting = written - ring->marks_read;
    if (waiting > ring->capacity_marks)
        return STATUS_BAD_FORMAT;
    uint32_t n = waiting < max ? (uint32_t)waiting : max;
    for (uint32_t i = 0; i < n; i++) {
        out[i] = ring->marks[(ring->marks_read + i) & (ring->capacity_marks - 1)];
        if (!follows(ring, &out[i]))
            return STATUS_BAD_FORMAT;
        ring->written += out[i].n_frames; /* the reader's use of it: where the next mark must be */
    }
    ring->marks_read += n;
    atomic_store_explicit(&ring->memory->marks_read, ring->marks_read, RING_RELEASE);
    *out_n = n;
    return STATUS_OK;
}

enum status ring_available(struct ring *ring, uint64_t *out_frames)
{
    uint64_t waiting = atomic_load_explicit(&ring->memory->written, RING_ACQUIRE) - ring->read;
    if (waiting > ring->capacity_frames)
        return STATUS_BAD_FORMAT;
    *out_frames = waiting;
    return STATUS_OK;
}

enum status ring_get(struct ring *ring, float *samples, uint32_t max, uint32_t *out_n)
{
    uint64_t waiting;
    enum status status = ring_available(ring, &waiting);
    if (status != STATUS_OK)
        return status;
    uint32_t n = waiting < max ? (uint32_t)waiting : max;
    copy_out(ring, ring->read, samples, n);
    ring->read += n;
    atomic_store_explicit(&ring->memory->read, ring->read, RING_RELEASE);
    *out_n = n;
    return STATUS_OK;
}

uint64_t ring_dropped(const struct ring *ring)
{
    return atomic_load_explicit(&ring->memory->dropped, memory_order_relaxed);
}
