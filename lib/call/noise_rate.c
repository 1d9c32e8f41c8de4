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
