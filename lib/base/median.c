/* The median of a few numbers. */
#include "base/median.h"
#include <math.h>
#include <stdlib.h>

#define FEW 32 /* sorted faster without qsort's calls */

/* For qsort. */
static int compare(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

void median_sort(double *values, uint32_t n)
{
    if (n > FEW) {
        qsort(values, n, sizeof *values, compare);
        return;
    }
    for (uint32_t i = 1; i < n; i++) {
        double value = values[i];
        uint32_t at = i;
        for (; at > 0 && values[at - 1] > value; at--)
            values[at] = values[at - 1];
        values[at] = value;
    }
}

double median_of(double *values, uint32_t n)
{
    if (n == 0)
        return NAN;
    median_sort(values, n);
    return n % 2 ? values[n / 2] : (values[n / 2 - 1] + values[n / 2]) / 2;
}
