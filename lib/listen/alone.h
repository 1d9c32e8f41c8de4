/* Impulses that stand alone: a hammer and airguns keep a rhythm, a charge does not. An impulse of the
 * reference channel is a sound of the first class of manner 'impulse' that it fits (T90 at most max_s,
 * rms90 min_snr_db above the background) when none
 * came for memory_s before it and none comes for as long after it, and the two intervals before it differ by
 * more than 5 %: shots each 20 s are a rhythm too. It stays an impulse too. */
#ifndef LISTEN_ALONE_H
#define LISTEN_ALONE_H

#include "call/catalogue.h"
#include "call/found.h"
#include "level/impulses.h"
#include <stdbool.h>
#include <stdint.h>

/* Plain data; reset before use. */
struct alone {
    const struct call_class *classes; /* borrowed */
    uint32_t n_classes;
    double rate_hz;
    double last_onset;    /* -INFINITY before the first */
    double last_interval; /* to it from the one before; NAN or INFINITY: none */
    bool waits;
    struct found_call waiting;
};

void alone_reset(struct alone *alone, const struct call_class *classes, uint32_t n_classes, double rate_hz);
/* The next impulse, in order of onset. */
void alone_take(struct alone *alone, const struct found_impulse *impulse);
/* Writes the impulse that has stood alone long enough at end_frame; `all`: at the sound's end. False when
 * there is none. */
bool alone_give(struct alone *alone, uint64_t end_frame, bool all, struct found_call *out);

#endif
