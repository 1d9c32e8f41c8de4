/* The files of the disk ring: which there are, and what each holds. Not thread-safe: the ring's lock guards
 * it. */
#ifndef SOUND_SEGMENTS_H
#define SOUND_SEGMENTS_H

#include "base/status.h"
#include "base/time.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define SEGMENT_NAME_SIZE 64

struct segment {
    uint32_t stream, run, n_channels;
    int64_t start_ns; /* watch time */
    double rate_hz;
    uint64_t n_frames;
    bool open; /* it is still being written */
};

struct segments {
    struct segment *all; /* in order of start_ns */
    size_t n, capacity;
};

void segment_name(const struct segment *segment, char out[SEGMENT_NAME_SIZE]);
int64_t segment_end_ns(const struct segment *segment);
uint64_t segment_bytes(const struct segment *segment);

/* Reads the folder; files of the form that cannot be read are removed, and with keep false all of them. */
enum status segments_find(struct segments *segments, const char *folder, bool keep);
/* STATUS_NO_MEMORY. */
enum status segments_add(struct segments *segments, const struct segment *segment);
void segments_remove(struct segments *segments, size_t i);
/* The open one of a stream, or NULL. Valid until the next add or remove. */
struct segment *segments_open_of(struct segments *segments, uint32_t stream);
/* The oldest that is not open; segments->n where there is none. */
size_t segments_oldest(const struct segments *segments);
void segments_destroy(struct segments *segments);

#endif
