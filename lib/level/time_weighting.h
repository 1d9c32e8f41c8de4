/* Exponential time weighting, fast and slow (time constants of IEC 61672-1:2013, 5.8: 125 ms and 1 s).
 *
 * The weighted mean square y obeys tau dy/dt = p^2 - y. Over a cell of constant mean square m that lasts T,
 * y becomes m + (y - m) exp(-T / tau), exactly. After a burst the level falls by 10 lg(e) / tau: 34.74 dB/s
 * (fast) and 4.343 dB/s (slow). */
#ifndef LEVEL_TIME_WEIGHTING_H
#define LEVEL_TIME_WEIGHTING_H

#define TIME_WEIGHTING_FAST_S 0.125
#define TIME_WEIGHTING_SLOW_S 1.0

/* Plain data; all zero after silence. */
struct time_weighting {
    double fast_pa2, slow_pa2;         /* weighted mean squares now */
    double fast_max_pa2, slow_max_pa2; /* their greatest since the last take */
};

/* What a cell of `seconds` leaves of the past. */
struct time_weighting_decay {
    double fast, slow;
};
struct time_weighting_decay time_weighting_decay(double seconds);
/* Takes a cell. */
void time_weighting_push(struct time_weighting *weighting, double mean_square_pa2,
                         struct time_weighting_decay decay);
/* Ends a second: the maxima begin anew. */
void time_weighting_begin(struct time_weighting *weighting);

#endif
