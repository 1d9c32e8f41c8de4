/* Which channels of a stream measure impulses, and which of them counts.
 *
 * One channel a stream, the reference, counts for the job: its impulses are the blows, start phases, and make
 * the sums, limits and findings. Others that stand at another range are measured beside it: their impulses
 * say what was received there and how sound falls with range, and count for nothing else. */
#ifndef LISTEN_MEASURING_H
#define LISTEN_MEASURING_H

#include "level/calibration.h"
#include <stdbool.h>
#include <stdint.h>

/* Ranges within a twentieth of a decade (12 %) are one place: so much loss of sound is less than what two
 * hydrophones at one place differ by (sea/fit.h counts places alike). */
#define MEASURING_DECADES 0.05

struct measuring {
    uint32_t reference; /* channel, from 1; 0: none measures */
    uint32_t beside;    /* bit 0: channel 1; without the reference */
};

/* Reference: of the channels that only measure, else of those that do both: those before others that are
 * calibrated and have room for the expected peak; of these the one nearest 750 m in the ratio of ranges
 * (ISO 18406:2017 for piles), the first of several within MEASURING_DECADES of the nearest, or of those
 * without a range. Beside it: calibrated channels with room and a range, measure before both, the first at
 * each place. range_m[n]: slant range from the source; NAN, 0 or less: unknown. */
struct measuring measuring_choose(uint32_t n_channels, const struct calibration *calibration,
                                  const double *range_m);

/* Whether the channel's impulses are measured. */
bool measuring_has(const struct measuring *measuring, uint32_t channel);

#endif
