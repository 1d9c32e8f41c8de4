/* Arithmetic of many strikes; see strikes.h. */
#include "level/strikes.h"
#include "base/units.h"
#include <math.h>

double strikes_cumulative_db(double sel_db, double n)
{
    return sel_db + units_power_db(n);
}

double strikes_possible(double sel_db, double cumulative_db)
{
    double n = units_power_ratio(cumulative_db - sel_db), whole = floor(n);
    /* Levels of whole decibels meet the criterion exactly: that strike reaches it. */
    return fabs(n - round(n)) < 1e-9 * n ? fmax(round(n) - 1, 0) : whole;
}

double strikes_sum_db(const double *level_db, uint32_t n)
{
    double sum = 0;
    for (uint32_t i = 0; i < n; i++)
        sum += units_power_ratio(level_db[i]);
    return units_power_db(sum);
}

double strikes_mean_db(const double *level_db, uint32_t n)
{
    return strikes_sum_db(level_db, n) - (n ? units_power_db(n) : 0);
}

double strikes_less_background_db(double level_db, double background_db)
{
    if (level_db - background_db < STRIKES_LEAST_OVER_BACKGROUND_DB)
        return NAN;
    return units_power_db(units_power_ratio(level_db) - units_power_ratio(background_db));
}

double strikes_sel_from_mean_db(double leq_db, double background_db, double n, double seconds)
{
    if (!(n > 0 && seconds > 0))
        return NAN;
    return strikes_less_background_db(leq_db, background_db) - units_power_db(n / seconds);
}
