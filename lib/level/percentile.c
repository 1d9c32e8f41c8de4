/* Exceedance levels of sorted values. */
#include "level/percentile.h"
#include "base/units.h"
#include <math.h>
#include <string.h>

/* The first place whose value is not below x. */
static uint32_t place_of(const double *sorted, uint32_t n, double x)
{
    uint32_t low = 0, high = n;
    while (low < high) {
        uint32_t middle = low + (high - low) / 2;
        if (sorted[middle] < x)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}

void percentile_insert(double *sorted, uint32_t n, double x)
{
    uint32_t at = place_of(sorted, n, x);
    memmove(sorted + at + 1, sorted + at, (n - at) * sizeof *sorted);
    sorted[at] = x;
}

void percentile_remove(double *sorted, uint32_t n, double x)
{
    uint32_t at = place_of(sorted, n, x);
    if (at < n)
        memmove(sorted + at, sorted + at + 1, (n - at - 1) * sizeof *sorted);
}

double percentile_exceeded_db(const double *sorted, uint32_t n, double percent)
{
    if (n == 0)
        return NAN;
    double rank = (n - 1) * (1 - percent / 100), whole = floor(rank), part = rank - whole;
    uint32_t i = (uint32_t)whole;
    if (part == 0 || i + 1 >= n)
        return sorted[i];
    if (isinf(sorted[i])) /* silence: nothing lies between it and a sound */
        return sorted[i];
    return sorted[i] + part * (sorted[i + 1] - sorted[i]);
}

double percentile_energy_mean_db(const double *levels_db, uint32_t n)
{
    double sum = 0;
    for (uint32_t i = 0; i < n; i++)
        sum += units_power_ratio(levels_db[i]);
    return n ? units_power_db(sum / n) : NAN;
}
