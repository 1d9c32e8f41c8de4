/* One call, one event: a call that several channels of a stream hear is given once, as the channel that heard
 * it best tells it. */
#ifndef LISTEN_JOINER_H
#define LISTEN_JOINER_H

#include "call/found.h"
#include <stdbool.h>
#include <stdint.h>

#define JOINER_HELD 160
#define JOINER_REMEMBERED 64

struct joined_call {
    uint32_t channel; /* from 1 */
    struct found_call found;
};

/* Plain data; reset before use. */
struct joiner {
    uint64_t hold_frames; /* how long a call waits for another channel's; 0 with one channel */
    uint32_t n_held, n_given;
    struct joined_call held[JOINER_HELD];        /* known_frame is when it may go */
    struct joined_call given[JOINER_REMEMBERED]; /* ring of the last ones given */
};

struct joined_sink {
    void (*take)(void *context, const struct joined_call *call);
    void *context;
};

void joiner_reset(struct joiner *joiner, uint64_t hold_frames);
/* A call that a channel found. It is the same call as another of its class when the two overlap by half of
 * the shorter one. False when it was one too many (more than JOINER_HELD wait at once) and was dropped. */
bool joiner_take(struct joiner *joiner, uint32_t channel, const struct found_call *found);
/* Gives, in order of known_frame, the calls that may go before end_frame. */
void joiner_give(struct joiner *joiner, uint64_t end_frame, const struct joined_sink *sink);

#endif
