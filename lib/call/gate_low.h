/* The power from 10 to 50 Hz in steps of 5 ms, where fin whales call: too low for a filter in single
 * precision at high rates. Used by gate.c only.
 *
 * Samples are averaged to 800 Hz (nulls at its multiples: what lies beside them is 23 dB down at 50 Hz off),
 * then filtered in double precision; each step gives the mean over the last 125 ms, five times the band's own
 * response time. */
#ifndef CALL_GATE_LOW_H
#define CALL_GATE_LOW_H

#include "base/status.h"
#include "dsp/filter.h"
#include <stdint.h>

#define GATE_LOW_LOW_HZ 10.0
#define GATE_LOW_HIGH_HZ 50.0
#define GATE_LOW_LOOK 25 /* steps */

struct gate_low {
    struct filter filter;
    uint32_t step_frames, at;
    float recent[GATE_LOW_LOOK]; /* a ring */
};

/* STATUS_BAD_ARGUMENT for steps that are no 5 ms of a rate of 8 kHz or more. */
enum status gate_low_create(double rate_hz, uint32_t step_frames, struct gate_low *out);
void gate_low_reset(struct gate_low *low);
/* Takes one step's samples; returns the power. */
float gate_low_step(struct gate_low *low, const float *samples);

#endif
