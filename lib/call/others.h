/* What is heard beside animals: sounds of machines, of the job and of the sea, recognised on the first
 * channel of a stream that listens (with the second one, where there is one, for what tells hydrophones
 * apart). Classes of the catalogue with animal = false say what each must be like; this code knows their
 * manners:
 *
 *   burst, hops      call/bursts.h: straight tones that come again alike; chips that hop
 *   line, pick-up, flow  call/lines.h: lines that last, on one or on both channels; low noise of one
 *                    hydrophone alone
 *   grunts           call/grunts.h: short rows of pulses that come again alike
 *   beats, hump, snaps  call/swells.h: noise by its swelling, its spectrum and its sharp peaks
 *
 * The manners 'rhythm' and 'impulse' need nothing of this: they come from call/trains.h and
 * level/impulses.h. The rules and their numbers are the project's own. */
#ifndef CALL_OTHERS_H
#define CALL_OTHERS_H

#include "base/status.h"
#include "call/catalogue.h"
#include "call/found.h"
#include <stdbool.h>
#include <stdint.h>

struct others;

/* For a stream of rate_hz (8 kHz to 1 MHz); `pair`: a second channel comes with every push. The classes are
 * borrowed. Allocates all that is ever needed and plans its FFTs (not thread-safe: at start only).
 * STATUS_BAD_ARGUMENT, STATUS_NO_MEMORY. The caller owns *out. */
enum status others_create(const struct call_class *classes, uint32_t n_classes, double rate_hz, bool pair,
                          struct others **out);
/* Forgets what is open; the next sample is frame next_frame. */
void others_reset(struct others *others, uint64_t next_frame);
/* Takes n samples in pascals of the first channel and, where made for a pair, of the second. How they are cut
 * changes nothing. */
void others_push(struct others *others, const float *first, const float *second, uint32_t n,
                 const struct found_sink *sink);
/* Whether a straight tone that has lasted for a tenth of a second is still open close beside this call, and
 * stands out far more: what the call is, a machine's skirt or not, is known when that tone ends. */
bool others_hold(const struct others *others, const struct found_call *call);
/* Ends what is open. */
void others_finish(struct others *others, const struct found_sink *sink);
/* Whether the rate carries half of the octaves of the class's band and its manner is one of those above, with
 * the channels that it needs. */
bool others_can_hear(const struct others *others, uint32_t class_index);
void others_destroy(struct others *others);

/* ---- for its parts only */

/* One frame of the first channel, 4 to 8 ms long; frames follow each other without overlap. */
struct other_frame {
    const float *samples, *power; /* [n], [n / 2 + 1], one-sided (dsp/spectrum.h) */
    uint32_t n;
    double bin_hz;
    uint64_t start_frame;
};

/* What the parts share. */
struct other_setup {
    const struct call_class *classes;
    uint32_t n_classes;
    double rate_hz, bin_hz, frame_s;
    uint32_t n; /* samples of a frame */
    bool pair;
};

#endif
