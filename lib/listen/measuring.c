/* Which channels of a stream measure impulses; see measuring.h. */
#include "listen/measuring.h"
#include "level/source.h"
#include <math.h>

static bool usable(const struct calibration *calibration)
{
    return calibration->known && calibration_has_room(calibration);
}

static bool has_range(double range_m)
{
    return range_m > 0 && isfinite(range_m);
}

/* Decades from 750 m; without a range farther than any. */
static double decades_off(double range_m)
{
    return has_range(range_m) ? fabs(log10(range_m / SOURCE_NORMAL_M)) : INFINITY;
}

/* The lower the better: role first, then whether its levels can be trusted. */
static int class_of(const struct calibration *calibration)
{
    int both = calibration->role == ROLE_MEASURE ? 0 : 2;
    return both + !usable(calibration);
}

static uint32_t choose_reference(uint32_t n, const struct calibration *calibration, const double *range_m)
{
    int best = 4;
    double nearest = INFINITY;
    for (uint32_t i = 0; i < n; i++)
        if (calibration[i].role != ROLE_LISTEN && class_of(&calibration[i]) < best)
            best = class_of(&calibration[i]);
    for (uint32_t i = 0; i < n; i++)
        if (calibration[i].role != ROLE_LISTEN && class_of(&calibration[i]) == best)
            nearest = fmin(nearest, decades_off(range_m[i]));
    for (uint32_t i = 0; i < n; i++)
        if (calibration[i].role != ROLE_LISTEN && class_of(&calibration[i]) == best &&
            decades_off(range_m[i]) <= nearest + MEASURING_DECADES)
            return i + 1;
    return 0;
}

/* Whether a channel that is chosen already stands at this place. */
static bool is_taken(const struct measuring *measuring, uint32_t n, const double *range_m, double at_m)
{
    for (uint32_t i = 0; i < n; i++)
        if (measuring_has(measuring, i + 1) &&
            (!has_range(range_m[i]) || fabs(log10(range_m[i] / at_m)) < MEASURING_DECADES))
            return true;
    return false;
}

struct measuring measuring_choose(uint32_t n_channels, const struct calibration *calibration,
                                  const double *range_m)
{
    static const enum channel_role roles[] = {ROLE_MEASURE, ROLE_BOTH};
    struct measuring measuring = {.reference = choose_reference(n_channels, calibration, range_m)};
    for (int r = 0; r < 2 && measuring.reference; r++)
        for (uint32_t i = 0; i < n_channels; i++)
            if (calibration[i].role == roles[r] && usable(&calibration[i]) && has_range(range_m[i]) &&
                !is_taken(&measuring, n_channels, range_m, range_m[i]))
                measuring.beside |= 1U << i;
    return measuring;
}

bool measuring_has(const struct measuring *measuring, uint32_t channel)
{
    return channel > 0 && (channel == measuring->reference || measuring->beside >> (channel - 1) & 1U);
}
