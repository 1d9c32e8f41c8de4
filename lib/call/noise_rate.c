/* A table of how often noise gives a pulse. */
#include "call/noise_rate.h"
#include "base/units.h"
#include <math.h>

#define LEAST_RATE 1e-13

void noise_table_fill(const struct window_statistics *statistics, double pulse_s, struct noise_table *out)
{
    double highest = 1;
    while (window_upcrossings(statistics, highest) / pulse_s > LEAST_RATE)
        highest *= 1.2;
    out->step = highest / (NOISE_RATE_POINTS - 1);
    for (int i = 0; i < NOISE_RATE_POINTS; i++)
        out->ln_rate[i] = log(window_upcrossings(statistics, i * out->step) / pulse_s);
}

double noise_table_get(const struct noise_table *table, double snr)
{
    double place = fmax(snr, 0) / table->step;
    if (!(place < NOISE_RATE_POINTS - 1))
        return 0;
    int i = (int)place;
    double part = place - i;
    return exp(table->ln_rate[i] * (1 - part) + table->ln_rate[i + 1] * part);
}

#define LEAST_SLOPE (-30.0)
#define SLOPE_STEP 10.0

double noise_slope(int s)
{
    return LEAST_SLOPE + s * SLOPE_STEP;
}

void noise_tables_fill(const struct window_statistics statistics[NOISE_SLOPES], double pulse_s,
                       struct noise_tables *out)
{
    for (int s = 0; s < NOISE_SLOPES; s++) {
        out->median_ratio[s] = window_quantile(&statistics[s], 0);
        noise_table_fill(&statistics[s], pulse_s, &out->tables[s]);
    }
}

/* Between which two tables a slope lies, and how far. */
static double place_of(double slope_db, int *out_first)
{
    double place = fmin(NOISE_SLOPES - 1, fmax(0, (slope_db - LEAST_SLOPE) / SLOPE_STEP));
    *out_first = (int)fmin(NOISE_SLOPES - 2, place);
    return place - *out_first;
}

double noise_tables_get(const struct noise_tables *tables, double slope_db, double snr)
{
    int s;
    double part = place_of(slope_db, &s);
    double low = noise_table_get(&tables->tables[s], snr),
           high = noise_table_get(&tables->tables[s + 1], snr);
    return low > 0 && high > 0 ? low * pow(high / low, part) : low * (1 - part) + high * part;
}

double noise_tables_get_median(const struct noise_tables *tables, double slope_db)
{
    int s;
    double part = place_of(slope_db, &s);
    return tables->median_ratio[s] * (1 - part) + tables->median_ratio[s + 1] * part;
}

double noise_rate_competing(const struct noise_rate *noise, double snr, double least_snr, double spread_db)
{
    const double step_db = 0.25;
    double rate = noise->get(noise->context, snr);
    double next = noise->get(noise->context, snr * units_power_ratio(step_db));
    if (next < 1e-12) /* far below any rate that matters, and near where the tail underflows */
        return 0;
    double per_db = log(rate / next) / step_db;
    return fmin(noise->get(noise->context, least_snr), rate * per_db * spread_db * sqrt(2 * M_PI));
}
