/* Gathers the level seconds of each channel into one body a minute.
 *
 * A minute's body ends at the whole minute of watch time, where a second does not follow the one before it,
 * where the bands or the mark `relative` change, where a job opens or closes, and at flush. Only the order
 * and the times of what is taken decide, so the same outcomes give the same bodies. It holds the minute's
 * statistics and those of the hour of watch time that ends with it (since the run began: a restart begins an
 * hour anew). Call order: create; take every outcome of the watch in order; flush; destroy. Memory: about 150
 * kB a channel, all of it from create. */
#ifndef RECORD_MINUTE_H
#define RECORD_MINUTE_H

#include "base/status.h"
#include "flow.h"
#include <stdint.h>

/* A finished body of kind `level`; borrowed for the call. */
struct minute_body {
    int64_t watch_ns; /* when it was complete: the entry's time */
    uint32_t run, stream, channel;
    uint64_t counter; /* per run and stream, from 1: a count of entries, not of seconds */
    const char *body;
    uint32_t n; /* its seconds, oldest first; they have the range of their own time */
    const struct level *seconds;
};

struct minute_sink {
    void (*take)(void *context, const struct minute_body *minute);
    void *context;
};

struct minutes;

/* max_channels: of all streams together. STATUS_BAD_ARGUMENT for 0; STATUS_NO_MEMORY. The caller owns *out.
 */
enum status minutes_create(uint32_t run, uint32_t max_channels, struct minutes **out);
void minutes_destroy(struct minutes *minutes);

/* Takes any outcome: a level is kept, and every other lets time pass, so that a minute whose channel has
 * fallen silent still goes out, 5 s after its end. STATUS_FULL: a channel more than max_channels;
 * STATUS_NO_MEMORY. */
enum status minutes_take(struct minutes *minutes, const struct outcome *outcome,
                         const struct minute_sink *sink);

/* Gives what is held, in order of stream and channel; watch_ns becomes the entries' time. */
enum status minutes_flush(struct minutes *minutes, int64_t watch_ns, const struct minute_sink *sink);

#endif
