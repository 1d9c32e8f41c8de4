/* Running median of a band's windows. */
#include "call/window_median.h"
#include <math.h>
#include <stdlib.h>

struct window_median window_median_of(const struct window_statistics *statistics, double step)
{
    return (struct window_median){.mean_pa2 = WINDOW_MEDIAN_FLOOR_PA2,
                                  .median_ratio = window_quantile(statistics, 0),
                                  .deviation = sqrt(2 / statistics->freedom),
                                  .steps = {1 / (1 + step), 1 + step}};
}

void window_median_reset(struct window_median *median)
{
    median->mean_pa2 = WINDOW_MEDIAN_FLOOR_PA2;
}

static int compare_floats(const void *a, const void *b)
{
    float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

void window_median_settle(struct window_median *median, float *windows)
{
    qsort(windows, WINDOW_MEDIAN_SETTLE, sizeof *windows, compare_floats);
    median->mean_pa2 =
        fmax(WINDOW_MEDIAN_FLOOR_PA2, windows[WINDOW_MEDIAN_SETTLE / 2] / median->median_ratio);
}
