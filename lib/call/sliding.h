/* Sums of slots over windows. */
#ifndef CALL_SLIDING_H
#define CALL_SLIDING_H

#include "dsp/lanes.h"
#include <stdint.h>

#define SLIDING_MOST 64 /* windows at once, a multiple of WIDE_LANES */

/* Means of the n windows of so many slots that end with power[0 .. n - 1]; n at most SLIDING_MOST, a multiple
 * of WIDE_LANES. Gives the greatest of them. Sums of 2, 4, 8 ... slots are made of those before, so that a
 * window takes the logarithm of its length. */
float sliding_means(const float *power, uint32_t n, uint32_t window, float *out);

/* Sum of n slots. */
static inline double short_sum(const float *power, uint32_t n)
{
    lanes sums = {0};
    float rest = 0;
    uint32_t i = 0;
    for (; i + LANES <= n; i += LANES)
        sums += lanes_load(power + i);
    for (; i < n; i++)
        rest += power[i];
    return lanes_sum(sums) + rest;
}

/* Mean of the window that ends with slot `last`. */
static inline double window_power(const float *power, int64_t last, uint32_t window)
{
    return short_sum(power + last + 1 - (int64_t)window, window) / window;
}

#endif
