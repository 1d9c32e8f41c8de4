/* One writer, one reader, no lock: frames of interleaved float samples, and with them the marks from which
 * lost frames are counted, in memory that the two sides may share between processes.
 *
 * Nothing in the memory is a pointer and its layout has a version. Each side keeps its own index and the
 * geometry in its own `struct ring`; of the other side it believes only an index that is possible, so that
 * garbage in the memory is an error of the reader's caller and never a wild access.
 *
 * Method: Lamport, "Proving the correctness of multiprocess programs", IEEE Trans. Softw. Eng. SE-3 (1977),
 * with the release and acquire operations of C11 (ISO/IEC 9899:2011, 7.17.3). Indices are 64 bits wide and
 * count for ever: at 384 kHz they last 1.5 million years. */
#ifndef RING_RING_H
#define RING_RING_H

#include "base/status.h"
#include <stddef.h>
#include <stdint.h>

#define RING_VERSION 1
#define RING_MAX_CHANNELS 64
#define RING_MAX_FRAMES (UINT32_C(1) << 24)

/* What is known of one push. */
struct ring_mark {
    uint64_t frame;          /* the ring's number (from 0, of the frames it took) of the push's first frame */
    uint64_t dropped_before; /* frames for which there was no room, between the frame before and this one */
    int64_t ns;              /* when it was pushed, on the writer's monotonic clock */
    int64_t
        first_ns; /* when its first frame was sampled, same clock, as the driver says; 0: it does not say */
    uint32_t n_frames; /* how many of its frames were taken */
    uint32_t overrun;  /* 1: the driver says that frames were lost before this push */
};

struct ring_memory;

/* One side's view; make one with ring_create or ring_attach and use it from one thread. */
struct ring {
    struct ring_memory *memory; /* borrowed */
    struct ring_mark *marks;
    float *samples;
    uint32_t n_channels, capacity_frames, capacity_marks;
    uint64_t written, read;             /* frames: the writer's own is `written`, the reader's `read` */
    uint64_t marks_written, marks_read; /* marks likewise */
    uint64_t dropped, pending_dropped;  /* the writer's: all that were dropped, and those no mark tells yet */
};

/* The least power of two of frames that holds so many seconds; at most RING_MAX_FRAMES. */
uint32_t ring_capacity(double rate_hz, double seconds);

/* Bytes that a ring of this geometry needs; 0 when the geometry is not allowed (1 to RING_MAX_CHANNELS
 * channels, a power of two from 64 to RING_MAX_FRAMES frames). */
size_t ring_size(uint32_t n_channels, uint32_t capacity_frames);

/* Lays out an empty ring in the memory, which must be aligned to 64 bytes and outlive every view of it.
 * STATUS_BAD_ARGUMENT when the geometry is not allowed or the memory too small or not aligned. */
enum status ring_create(struct ring *out, void *memory, size_t size, uint32_t n_channels,
                        uint32_t capacity_frames);

/* The other side: reads the geometry that ring_create wrote, once. STATUS_BAD_FORMAT when it is not a ring of
 * this version or does not fit into `size`; STATUS_BAD_ARGUMENT when the memory is not aligned. */
enum status ring_attach(struct ring *out, void *memory, size_t size);

/* Writer. Takes as many of n frames as there is room for, the first ones, and counts the rest as dropped.
 * stamp: ns, first_ns and overrun are used. Returns how many it took. Waits for nothing, allocates nothing.
 */
uint32_t ring_push(struct ring *ring, const float *samples, uint32_t n_frames, const struct ring_mark *stamp);

/* Reader. Up to max marks that were not read before, in order: all those of the frames that ring_available
 * counted before the call, and maybe more. A mark stays inside the checks: frames ascend from mark to mark by
 * what the mark before took. STATUS_BAD_FORMAT: the memory holds the impossible; the ring is of no more use.
 */
enum status ring_get_marks(struct ring *ring, struct ring_mark *out, uint32_t max, uint32_t *out_n);

/* Reader. Frames that could be read now. STATUS_BAD_FORMAT as above. */
enum status ring_available(struct ring *ring, uint64_t *out_frames);

/* Reader. Takes up to max frames into samples [max * n_channels]. STATUS_BAD_FORMAT as above. */
enum status ring_get(struct ring *ring, float *samples, uint32_t max, uint32_t *out_n);

/* Reader. Frames dropped so far, those included that no mark tells yet. */
uint64_t ring_dropped(const struct ring *ring);

#endif
