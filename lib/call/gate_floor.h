/* What one band holds at each time since an own source's impulse, in bins of 0.25 s: reverberation between
 * shots is alike from shot to shot. Used by gate.c only.
 *
 * Each bin follows its mean power over the impulses in dB, by half of the difference and at most 1.5 dB an
 * impulse (a stochastic approximation with a bounded score: Huber 1964), so that an animal's call in one of
 * them says little. */
#ifndef CALL_GATE_FLOOR_H
#define CALL_GATE_FLOOR_H

#include <stdint.h>

#define GATE_FLOOR_BIN_S 0.25
#define GATE_FLOOR_BINS 120 /* 30 s */

/* Plain data; zeros are a floor that knows nothing. */
struct gate_floor {
    float level[GATE_FLOOR_BINS];
    uint32_t n_learned[GATE_FLOOR_BINS];
    float quiet; /* the least level that is known well enough; 0: none */
    uint32_t bin, n_steps;
    double sum; /* of the bin at hand */
};

/* The next step's power, time_s after the impulse; bins that were heard for less than half of steps_a_bin do
 * not count. */
void gate_floor_take(struct gate_floor *floor, double time_s, float power, uint32_t steps_a_bin);
/* What the tail adds at this time: the bin's level over that of the quietest time, 1 or more; 1 where fewer
 * than three impulses have told. */
double gate_floor_ratio(const struct gate_floor *floor, double time_s);

#endif
