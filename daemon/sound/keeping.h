/* What is kept of the sound: the disk ring, the clips, and who decides what becomes one, put together. */
#ifndef SOUND_KEEPING_H
#define SOUND_KEEPING_H

#include "base/status.h"
#include "flow.h"
#include "ledger/ledger.h"
#include "record/marks.h"
#include "settings/site.h"
#include "sound/clip_store.h"
#include "sound/disk_ring.h"
#include "stream.h"
#include <stdbool.h>

struct sound_keeping;

struct keeping_setup {
    const struct site *site; /* borrowed for the call */
    struct ledger *ledger;   /* clips and marks of earlier runs; borrowed for the call */
    uint32_t run;
    int64_t zero_unix_ns;
    int64_t start_ns; /* watch time at which the run begins */
    uint32_t n_streams;
    struct stream *const
        *streams; /* opened; what has no pace but its own would outrun any disk, and is not kept */
};

/* *out is NULL where the settings keep no sound. STATUS_NO_MEMORY, STATUS_SYSTEM. A disk that does not take
 * sound is no error. The caller owns *out. */
enum status keeping_create(const struct keeping_setup *setup, struct sound_keeping **out);
/* No more sound comes: what was asked for is kept, within a part of a second. Takes NULL. */
void keeping_finish(struct sound_keeping *keeping);
/* Nobody may push any more. Takes NULL. */
void keeping_destroy(struct sound_keeping *keeping);

/* Sound of a stream, from its thread; see disk_ring_push. context is the keeping. */
void keeping_push(void *context, uint32_t stream, int64_t start_ns, const float *samples, uint32_t n_frames);

/* The watch's thread: an outcome of the watch; a clip whose entry can be written; and that its entry is. */
void keeping_take(struct sound_keeping *keeping, const struct outcome *outcome);
bool keeping_take_done(struct sound_keeping *keeping, struct sound_entry_facts *out);
void keeping_add(struct sound_keeping *keeping, const char *id, const struct sound_entry_facts *facts);
/* In words what is not kept now, "" while all is. */
void keeping_get_problem(struct sound_keeping *keeping, char *out, size_t size);

/* Borrowed; NULL where keeping is. */
struct disk_ring *keeping_ring(struct sound_keeping *keeping);
struct clip_store *keeping_clips(struct sound_keeping *keeping);
/* The channel of a stream (from 1) that people hear when they name none. */
uint32_t keeping_listening_channel(const struct stream_settings *settings, uint32_t n_channels);

#endif
