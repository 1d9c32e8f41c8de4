/* The last half hour of every stream, as WAV files in one folder: a ring whose oldest file goes when a new
 * one needs its place.
 *
 * A stream's thread pushes into memory and never waits; one thread of the ring's own writes. A full or slow
 * disk loses sound of the ring, which is counted and said, and nothing else. Each file holds at most a minute
 * or a tenth of the ring, without a hole of a second or more (shorter ones are silence in it) at a steady
 * rate, and is named STREAM.RUN.MICROSECONDS.wav by the watch time of its first frame, so that a restart
 * finds everything again.
 */
#ifndef SOUND_DISK_RING_H
#define SOUND_DISK_RING_H

#include "base/status.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define DISK_RING_MAX_STREAMS 8
#define DISK_RING_PATH_SIZE 640
#define DISK_RING_PROBLEM_SIZE 160

struct disk_ring_stream {
    double rate_hz;
    uint32_t n_channels; /* 0: nothing of it is kept */
};

struct disk_ring_setup {
    const char *folder;   /* made when it is not there; copied */
    double minutes;       /* what is older goes */
    uint64_t most_bytes;  /* of all files together */
    uint64_t leave_bytes; /* so much of the disk stays free: the ledger comes first */
    uint32_t run;         /* in the first run of a ledger what the folder holds is of another, and goes */
    int64_t zero_unix_ns; /* UTC of watch time zero */
    uint32_t n_streams;
    struct disk_ring_stream streams[DISK_RING_MAX_STREAMS];
};

struct disk_ring;

/* Finds what is there and starts the thread. STATUS_NO_MEMORY; STATUS_SYSTEM: no thread. A folder that cannot
 * be made is a problem of the state, not an error. The caller owns *out. */
enum status disk_ring_create(const struct disk_ring_setup *setup, struct disk_ring **out);
/* Writes what is still in memory; takes NULL. Nobody may push or read any more. */
void disk_ring_destroy(struct disk_ring *ring);

/* From the stream's thread: n frames [n * channels], the first of them at a watch time. Waits for nothing. */
void disk_ring_push(struct disk_ring *ring, uint32_t stream, int64_t start_ns, const float *samples,
                    uint32_t n);

/* Watch time up to which a stream's sound has been written, or lost. Any thread. */
int64_t disk_ring_end_ns(struct disk_ring *ring, uint32_t stream);

/* Sound of one channel from a watch time on; n = 0 of *out_n where the ring has none of it. */
struct disk_ring_sound {
    float *samples; /* owned by the caller (free); silence where sound is missing */
    size_t n;
    double rate_hz;
    double missing_s;
};
/* The ring's own span is cut at to_ns, and at `most` frames. Waits for the disk. STATUS_NOT_FOUND: nothing of
 * it is kept; STATUS_BAD_ARGUMENT: no such stream or channel; STATUS_NO_MEMORY. */
enum status disk_ring_read(struct disk_ring *ring, uint32_t stream, uint32_t channel, int64_t from_ns,
                           int64_t to_ns, size_t most, struct disk_ring_sound *out);

/* Any thread. */
struct disk_ring_state {
    char problem[DISK_RING_PROBLEM_SIZE]; /* "" while all is kept */
    double lost_s;                        /* sound of this run that is not in the ring, all streams */
    int64_t from_ns, to_ns;               /* of the oldest and newest sound; equal where there is none */
    uint64_t bytes;
};
void disk_ring_get_state(struct disk_ring *ring, struct disk_ring_state *out);

#endif
