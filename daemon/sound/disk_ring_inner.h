/* What the disk ring's thread and its readers share; see disk_ring.h. */
#ifndef SOUND_DISK_RING_INNER_H
#define SOUND_DISK_RING_INNER_H

#include "ring/ring.h"
#include "sound/disk_ring.h"
#include "sound/segments.h"
#include "sound/sound_file.h"
#include <pthread.h>

struct ring_stream {
    struct disk_ring_stream facts;
    void *memory;
    struct ring in, out; /* the stream's side; the thread's */
    struct ring_mark held;
    bool has_held;
    float *piece; /* [PIECE_FRAMES * channels] */
    struct sound_writer *writer;
    struct segment segment; /* that the writer writes: its n_frames are ahead of the list's */
    uint64_t dropped;       /* of the memory, as last looked at */
};

struct disk_ring {
    struct disk_ring_setup setup;
    char folder[DISK_RING_PATH_SIZE];
    struct ring_stream streams[DISK_RING_MAX_STREAMS];
    pthread_t thread;
    bool has_thread, no_room, has_problem;
    int64_t failed_ns; /* monotonic time at which the disk last refused */
    int64_t segment_ns;
    pthread_mutex_t lock; /* guards what follows */
    pthread_cond_t wake;
    bool stopping;
    struct segments segments;
    int64_t end_ns[DISK_RING_MAX_STREAMS];
    struct disk_ring_state state;
};

/* Where a file of the ring is. */
void disk_ring_path(const struct disk_ring *ring, const struct segment *segment,
                    char out[2 * DISK_RING_PATH_SIZE]);

#endif
