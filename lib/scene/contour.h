/* How a sound's frequency goes: smooth curves, steps and spirals whose phase is known in closed form at any
 * time. */
#ifndef SCENE_CONTOUR_H
#define SCENE_CONTOUR_H

#include <stdint.h>

#define CONTOUR_MAX_SEGMENTS 8

struct contour {
    uint32_t n_segments; /* cubics on equal segments, with the phase worked out at each joint; 0: a spiral */
    double length_s;
    double cubic[CONTOUR_MAX_SEGMENTS][4]; /* Hz, over 0..1 within the segment */
    double cycles[CONTOUR_MAX_SEGMENTS];   /* phase at the segment's start */
    /* A spiral: from_hz exp(-fall_per_s t) (1 + wobble sin(2 pi wobble_hz t)), for as long as one likes. */
    double from_hz, fall_per_s, wobble, wobble_hz;
};

/* Through n + 1 knots (Hz) at equal times, tangents as Catmull and Rom (1974) take them. n is 1..8. */
void contour_through(struct contour *contour, const double *knots_hz, uint32_t n, double length_s);
/* n (1..8) steps of constant frequency and equal length; the phase goes on across them. */
void contour_steps(struct contour *contour, const double *steps_hz, uint32_t n, double length_s);
/* One cubic in x = t / length_s: c0 + c1 x + c2 x2 + c3 x3. */
void contour_cubic(struct contour *contour, const double coefficients[4], double length_s);
/* Exponential from one frequency to another in length_s, with a wobble of that share of itself (0: none). */
void contour_spiral(struct contour *contour, double from_hz, double to_hz, double length_s, double wobble,
                    double wobble_hz);
double contour_hz(const struct contour *contour, double time_s);
/* Phase in cycles since the start. */
double contour_cycles(const struct contour *contour, double time_s);
/* Lowest, highest and mean frequency. */
void contour_extent(const struct contour *contour, double *low_hz, double *high_hz, double *mean_hz);

#endif
