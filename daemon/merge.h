/* Brings the events of all streams, the notes, the positions and the passing of time into the one order in
 * which the watch takes them: (known time, stream, kind, counter), and never further than the slowest stream
 * has come.
 *
 * Stream threads put, the watch thread takes. A full queue makes its stream wait. Only a live stream may be
 * left behind, when it lags by more than 0.5 s; its later events then take the watch's present time. */
#ifndef MERGE_H
#define MERGE_H

#include "base/status.h"
#include "flow.h"
#include "settings/notes.h"
#include <stdbool.h>

#define MERGE_LAG_NS (TIME_NS_PER_S / 2)

struct merge;

/* n_streams of 1..SITE_MAX_STREAMS; live[i] says of stream i + 1. Time starts at start_ns. */
enum status merge_create(uint32_t n_streams, const bool *live, int64_t start_ns, struct merge **out);
void merge_destroy(struct merge *merge);

/* From a stream's thread: one event, in order; waits while the stream's queue is full, unless stopped. */
void merge_put(struct merge *merge, const struct event *event);
/* From a stream's thread: it has been heard up to watch_ns; or has ended and holds nobody up any more. */
void merge_progress(struct merge *merge, uint32_t stream, int64_t watch_ns);
void merge_end(struct merge *merge, uint32_t stream);

/* From any thread: a note, to be taken at the watch's present time. Waits until the watch has it, at most one
 * second: then STATUS_TIMEOUT (it may still be taken). out_counter makes the entry's id. */
enum status merge_note(struct merge *merge, const struct note *note, uint64_t *out_counter);

/* From any thread: where something is now, to be taken at the watch's present time. Waits for nobody: a newer
 * one takes the place of one that was not taken yet. */
void merge_position(struct merge *merge, const struct position *position);

/* From the watch's thread. Waits (at most wait_ns) until time can pass; then gives one event, or how far time
 * has passed. STATUS_OK with out_event filled; STATUS_TIMEOUT with *out_ns the time that all streams have
 * reached and no event before it left; STATUS_END when every stream has ended and nothing is left. */
enum status merge_take(struct merge *merge, int64_t wait_ns, struct event *out_event, int64_t *out_ns);
/* The watch tells which counter a note got, and wakes who waits for it. */
void merge_note_taken(struct merge *merge, uint64_t counter);

/* Wakes everybody; puts and takes return at once from now on. */
void merge_stop(struct merge *merge);
/* Streams that were left behind since the last call: bit i for stream i + 1. */
uint32_t merge_get_left_behind(struct merge *merge);

#endif
