/* How much of a window of sound is one tone at a time: what tells a long call with a hard onset from a blow.
 */
#ifndef LEVEL_TONE_PART_H
#define LEVEL_TONE_PART_H

#include "base/status.h"
#include <stddef.h>
#include <stdint.h>

struct tone_part;

/* Averages samples in slots of slot_frames, to about 4 kHz. The caller owns *out. STATUS_NO_MEMORY. */
enum status tone_part_create(uint32_t slot_frames, struct tone_part **out);
void tone_part_destroy(struct tone_part *tone_part);
/* Over frames of 256 slots (64 ms, Hann window, half overlap) that begin in [from, to): the energy within 2
 * bins (about 40 Hz on either side) of each frame's strongest bin, over all energy above 20 Hz; 0 .. 1.
 * Frames whose strongest bin lies below 120 Hz count as if they had no tone: there 5 bins are most of what a
 * shot has. */
double tone_part_measure(struct tone_part *tone_part, const float *samples, size_t n, size_t from, size_t to);

#endif
