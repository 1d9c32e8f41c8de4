/* Groups the pulses of a stretch by likeness: which of them one animal made.
 *
 * Every two pulses have a log-likelihood ratio, one animal against two: the likeness of their shapes
 * (call/pulse_shape.h) and their difference in level, normal with a spread of 3 dB or of 8 dB. Two that are
 * nearer in time than an animal of the class calls are of two animals. Groups are merged, those with the
 * greatest mean ratio first, while that is above 0 (average linkage, Sokal and Michener 1958); then each
 * pulse goes to the group whose mean it is most like. */
#ifndef CALL_ALIKE_H
#define CALL_ALIKE_H

#include "base/status.h"
#include "call/trigger.h"
#include <stdbool.h>
#include <stdint.h>

#define ALIKE_MOST 96 /* pulses of a stretch */
#define ALIKE_SPREAD_DB 3.0

struct alike;

/* STATUS_NO_MEMORY; the caller owns *out. */
enum status alike_create(struct alike **out);
/* Groups n (at most ALIKE_MOST) pulses in order of arrival; hidden ones are left alone. A pulse of a group of
 * fewer than `least` may join a greater one that it is not too unlike. group[i] is the number of the first
 * pulse that the group had when it was made; pulses of one group share it. */
void alike_find(struct alike *alike, const struct pulse *pulses, const bool *hidden, uint32_t n,
                double least_apart_frames, uint32_t least, uint32_t *group);
void alike_destroy(struct alike *alike);

#endif
