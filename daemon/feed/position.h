/* The vessel's position from gpsd: one thread that keeps a connection (it comes back by itself, 0.5 to 8 s
 * between attempts) and hands on each fix as it comes, usually one a second. The only code that sees libgps.
 */
#ifndef FEED_POSITION_H
#define FEED_POSITION_H

#include "base/status.h"
#include "place/position.h"
#include <stdbool.h>
#include <stdint.h>

#define POSITION_FEED_SILENT_S 10.0

struct position_feed;

struct position_feed_setup {
    const char *address; /* in digits; copied */
    uint32_t port;
    /* From the feed's thread; occurred_ns is left 0: the fix is of now. */
    void (*take)(void *context, const struct position *position);
    void *context; /* borrowed for the life of the object */
};

struct position_feed_state {
    bool silent;       /* no fix for POSITION_FEED_SILENT_S, or since the start for so long */
    char problem[128]; /* why, in words */
    uint64_t n_fixes;
};

/* STATUS_NO_MEMORY. The caller owns *out. */
enum status position_feed_create(const struct position_feed_setup *setup, struct position_feed **out);
/* STATUS_SYSTEM when no thread can be had. */
enum status position_feed_start(struct position_feed *feed);
/* Ends the thread, within about 0.3 s; NULL is taken. */
void position_feed_stop(struct position_feed *feed);
void position_feed_destroy(struct position_feed *feed);

/* From any thread. */
void position_feed_get_state(struct position_feed *feed, struct position_feed_state *out);

#endif
