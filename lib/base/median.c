/* The median of a few numbers. */
#include "base/median.h"
#include <math.h>
#include <stdlib.h>

int median_compare(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

double median_of(double *values, uint32_t n)
{
    if (n == 0)
        return NAN;
    qsort(values, n, sizeof *values, median_compare);
    return n % 2 ? values[n / 2] : (values[n / 2 - 1] + values[n / 2]) / 2;
}
