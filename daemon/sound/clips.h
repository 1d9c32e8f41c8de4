/* Clips: what is worth keeping for ever is taken out of the ring once its sound is there, and kept as FLAC. A
 * thread of its own, which alone waits for the disk; what became of each request is asked for by the watch.
 */
#ifndef SOUND_CLIPS_H
#define SOUND_CLIPS_H

#include "base/status.h"
#include "flow.h"
#include "record/marks.h"
#include "sound/disk_ring.h"
#include <stdbool.h>

#define CLIPS_MAX_WAITING 64
#define CLIPS_LONGEST_S 60.0

struct clip_request {
    uint32_t stream, channel; /* from 1 */
    int64_t start_ns, end_ns; /* watch time; at most CLIPS_LONGEST_S of it are kept, the last */
    enum sound_reason reason;
    double low_hz, high_hz; /* of what it is kept for; NAN where nothing is known */
    uint32_t n_causes;
    char causes[SOUND_MAX_CAUSES][FLOW_ID_SIZE];
};

struct clips_setup {
    const char *folder;     /* made when it is not there; copied */
    struct disk_ring *ring; /* borrowed */
    uint32_t run;
};

struct clips;

/* STATUS_NO_MEMORY; STATUS_SYSTEM: no thread. The caller owns *out. */
enum status clips_create(const struct clips_setup *setup, struct clips **out);
/* Ends the thread; what waits is given up. Takes NULL. */
void clips_destroy(struct clips *clips);

/* Any thread; waits for nothing. STATUS_FULL: too many wait; it is counted as failed. */
enum status clips_ask(struct clips *clips, const struct clip_request *request);

/* No more sound will come: what waits is kept as far as there is sound, within limit_s. */
void clips_finish(struct clips *clips, double limit_s);

/* The next one that is on the disk; false where there is none. facts->file and counter make its entry. */
bool clips_take_done(struct clips *clips, struct sound_entry_facts *out);

/* In words what could not be kept lately, "" where nothing; how many in all. */
uint64_t clips_get_problem(struct clips *clips, char *out, size_t size);

#endif
