/* What the detectors of one channel hand to lib/listen, in frames of that channel; and why they handed
 * nothing. */
#ifndef CALL_FOUND_H
#define CALL_FOUND_H

#include "call/call.h"
#include <stdint.h>

struct found_call {
    uint32_t class_index;          /* into the catalogue */
    double start_frame, end_frame; /* sub-sample */
    uint64_t known_frame;          /* the last frame that was needed to emit it */
    double low_hz, high_hz;
    uint32_t n_pulses;      /* 0 for a tone */
    double interval_frames; /* 0 for a tone */
    double snr_db;
    double mean_square_pa2;         /* in the call's band, over its time */
    double harmonics_to_hz;         /* of a burst: its highest harmonic that stands out; 0: none */
    double measures[CALL_MEASURES]; /* of an animal's call: call/certainty.h */
};

struct found_sink {
    void (*take)(void *context, const struct found_call *found);
    void *context;
};

/* Every rejection has a name and a counter, so that "nothing found" can be explained. */
enum rejection {
    REJECT_TOO_WEAK,
    REJECT_TOO_SHORT,
    REJECT_TOO_LONG,
    REJECT_STEADY_LINE,
    REJECT_REVERBERATION,
    REJECT_BROADBAND,
    REJECT_SHAPE,
    REJECT_NO_RHYTHM,
    REJECT_MACHINE_RHYTHM,
    REJECT_OWN_SOURCE,
    REJECT_TOO_MANY,
    REJECT_PART_OF_ANOTHER, /* a harmonic or a piece of a call that was found already */
    REJECT_ECHO,            /* this and the rest: of impulses, level/impulses.h */
    REJECT_TOO_HIGH,
    REJECT_NOT_SUDDEN,
    REJECT_LIKE_A_CALL,
    REJECT_NOT_AN_ANIMAL, /* covered by a recognised sound of a machine, of the job or of the sea */
    REJECT_COUNT
};

/* "too weak", "steady line" ...; never NULL. */
const char *rejection_text(enum rejection rejection);

#endif
