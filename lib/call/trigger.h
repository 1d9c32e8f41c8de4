/* The pulses of one class in one channel, from what a search finds in its band (call/pulse_search.h), which
 * classes with the same band and limits share.
 *
 * What follows a pulse within the echo time and has a spectrum like its own belongs to it (surface and bottom
 * echoes, the pulses inside a sperm whale's click): of these the strongest is kept. So is all that follows
 * what is broadband or too long, unless that is a ping. Of at most four of an echo time the strongest of each
 * look are given, so no class ever gives more than 4 / echo time pulses a second. */
#ifndef CALL_TRIGGER_H
#define CALL_TRIGGER_H

#include "base/status.h"
#include "call/catalogue.h"
#include "call/found.h"
#include "call/pulse_search.h"
#include "call/pulse_shape.h"
#include <stdint.h>

struct pulse {
    double frame;  /* arrival, in frames of the input, counted from the last reset */
    double snr;    /* ratio: mean square over pulse_s where it is greatest, less the background, over the
                      background's mean square, in the band as its noise is whitened (call/whitened.h) */
    double energy; /* the band's energy up to the arrival since the last reset, Pa2 times input frames */
    struct pulse_shape shape;
    bool
        foreign; /* looks like no pulse of the class: it may be part of a machine's rhythm, but no animal's */
};

struct pulse_sink {
    void (*take)(void *context, const struct pulse *pulse);
    void *context;
};

struct trigger;

/* Slots of history that the class needs of a bank with such slots. */
uint32_t trigger_get_history(const struct call_class *call_class, double rate_hz, uint32_t slot_frames);
/* Echo time of a class, s: a quarter of the shortest interval, at most 30 ms. */
double trigger_get_echo(const struct call_class *call_class);
/* For a class that the search serves; both are borrowed. STATUS_NO_MEMORY; the caller owns *out. */
enum status trigger_create(const struct call_class *call_class, const struct pulse_search *search,
                           struct trigger **out);
/* When the search is reset. */
void trigger_reset(struct trigger *trigger);
/* Takes what the search has found in the block that it has just taken. Adds to rejections[REJECT_COUNT].
 * Pulses come in order of arrival, at most an echo time and a pulse's length late. */
void trigger_push(struct trigger *trigger, const struct pulse_sink *sink, uint64_t *rejections);
/* Whether there is nothing to take: nothing was found in the last block, and no pulse waits. */
bool trigger_is_idle(const struct trigger *trigger);
/* Gives the pulse that still waits for its echoes. */
void trigger_finish(struct trigger *trigger, const struct pulse_sink *sink);
/* Input frame, counted from the last reset, before which no pulse will come any more. */
double trigger_get_known(const struct trigger *trigger);
void trigger_destroy(struct trigger *trigger);

#endif
