/* The running median of a band's windows, as the mean power it stands for: stepped up or down by a small
 * ratio with each window (trigger.h says why). */
#ifndef CALL_WINDOW_MEDIAN_H
#define CALL_WINDOW_MEDIAN_H

#include "call/bands.h"
#include <stdbool.h>

#define WINDOW_MEDIAN_SETTLE 64       /* windows that set the first one */
#define WINDOW_MEDIAN_FLOOR_PA2 1e-30 /* below any background: digital silence */

/* Plain data. */
struct window_median {
    double mean_pa2;
    double median_ratio; /* median over mean of the window's power in Gaussian noise */
    double deviation;    /* relative standard deviation of a window */
    double steps[2];     /* ratios: down, up */
};

/* For windows so distributed (bands.h), and steps of 1 + step. */
struct window_median window_median_of(const struct window_statistics *statistics, double step);
/* Forgets the sound: below any background. */
void window_median_reset(struct window_median *median);
/* Starts from [WINDOW_MEDIAN_SETTLE] powers of windows, which it sorts. */
void window_median_settle(struct window_median *median, float *windows);
/* Follows one more window; gives whether it lies above the median. Either side is as likely, so no branch
 * hangs on it. */
static inline bool window_median_follow(struct window_median *median, double window_pa2)
{
    const bool above = window_pa2 > median->mean_pa2 * median->median_ratio;
    const double mean_pa2 = median->mean_pa2 * median->steps[above];
    median->mean_pa2 = mean_pa2 > WINDOW_MEDIAN_FLOOR_PA2 ? mean_pa2 : WINDOW_MEDIAN_FLOOR_PA2;
    return above;
}

#endif
