/* The rhythm of an own source's impulses: when the next is expected. Used by gate.c only.
 *
 * A second-order phase-locked loop (Best, "Phase-locked loops", from memory): the phase is that of the last
 * impulse that came in time, the interval follows the errors by a share. Up to three beats may fail; what
 * comes between the beats does not move them, unless it keeps coming. */
#ifndef CALL_GATE_RHYTHM_H
#define CALL_GATE_RHYTHM_H

#include <stdbool.h>
#include <stdint.h>

/* Plain data; zeros are a rhythm that knows nothing. */
struct gate_rhythm {
    double last_s;     /* the last impulse in time */
    double previous_s; /* the last of all */
    double interval_s; /* 0: not known */
    double spread_s;   /* mean size of the errors */
    uint32_t n_heard, n_fitting, n_off;
};

/* An impulse was heard; times rise. */
void gate_rhythm_take(struct gate_rhythm *rhythm, double onset_s);
/* Whether an impulse may arrive at this time: within four mean errors (20 ms to 15 % of the interval, at most
 * 0.5 s) of a beat. False until three intervals in a row agreed within 15 %. */
bool gate_rhythm_expects(const struct gate_rhythm *rhythm, double time_s);

#endif
