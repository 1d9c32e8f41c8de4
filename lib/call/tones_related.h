/* How two contours stand to each other: lines of one sound, or sounds of their own. Used by tones_judge.c
 * only. */
#ifndef CALL_TONES_RELATED_H
#define CALL_TONES_RELATED_H

#include "call/tones_trace.h"

double related_duration(const struct contour *c); /* input frames */
/* Of their times, in input frames; negative where they are apart. */
double related_overlap(const struct contour *a, const struct contour *b);
/* Run together for most of their common time. */
bool related_is_same_line(const struct contour *a, const struct contour *b);
/* One is a whole multiple of the other for most of their common time, or goes from one low multiple to the
 * next; or both sweep and keep their ratio,
 * whatever it is: harmonics of a fundamental that may be too weak to be traced. */
bool related_is_harmonic(const struct contour *a, const struct contour *b);
/* One jumps about within the time and the frequencies of the other: the same sound in a window that cannot
 * follow it. */
bool related_is_blurred(const struct contour *blurred, const struct contour *clear);
/* Each goes its own way: both sweep without jumping and do not keep their ratio, and no harmonic does that.
 */
bool related_is_apart(const struct contour *a, const struct contour *b);
/* One sweeps without jumping, never meets the other and does not keep its ratio to it, which may stand still.
 */
bool related_is_across(const struct contour *a, const struct contour *b);
/* Weak is above strong, weaker, and mostly within its time, or far weaker and begun within it or just after:
 * an overtone, its distortion or its echo, though no multiple can be told (at the tenth harmonic any
 * frequency is near one). Not when it sweeps on a course of its own. */
bool related_is_overtone(double rate_hz, const struct contour *weak, const struct contour *strong);

#endif
