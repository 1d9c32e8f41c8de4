/* The measures of one impulse in a window of sound. */
#include "level/impulse_measure.h"
#include "base/units.h"
#include "level/moments.h"
#include <math.h>
#include <stdint.h>

#define ENERGY_PART 0.9
#define WEAK_DB 10.0
/* One step of 16 bits below, and a little for the rounding of samples to pascals. */
#define FULL_SCALE (1.0 - 1.01 * 0x1p-15)

/* First crossing of a level by the running sum at or after frame `from`, or the last one before `until`. */
struct crossings {
    double t5, t50, t95;
};

/* Walks the running sum once; total is its end. */
static struct crossings find_crossings(const struct impulse_window *window, double total)
{
    struct crossings found = {NAN, NAN, NAN};
    double before = 0;
    for (size_t i = 0; i < window->n; i++) {
        double p = window->pascals[i] - window->mean_pa;
        double after = before + p * p - window->background_pa2;
        double start = (double)i - 0.5, step = after - before;
        if (isnan(found.t50) && before < 0.05 * total && after >= 0.05 * total)
            found.t5 = start + (0.05 * total - before) / step;
        if (isnan(found.t50) && after >= 0.5 * total)
            found.t50 = start + (0.5 * total - before) / step;
        if (!isnan(found.t50) && after >= 0.95 * total) {
            found.t95 = start + (0.95 * total - before) / step;
            return found;
        }
        before = after;
    }
    return found;
}

static bool is_clipped(const struct impulse_window *window)
{
    const double limit = window->full_scale_pa * FULL_SCALE;
    for (size_t i = 1; i < window->n; i++)
        if (fabsf(window->pascals[i]) >= limit && fabsf(window->pascals[i - 1]) >= limit)
            return true;
    return false;
}

static double positive_impulse(const struct impulse_window *window)
{
    size_t peak = 0;
    for (size_t i = 1; i < window->n; i++)
        peak = window->pascals[i] > window->pascals[peak] ? i : peak;
    double sum = 0;
    for (size_t i = peak; i < window->n && window->pascals[i] > window->mean_pa; i++)
        sum += window->pascals[i] - window->mean_pa;
    for (size_t i = peak; i > 0 && window->pascals[i - 1] > window->mean_pa; i--)
        sum += window->pascals[i - 1] - window->mean_pa;
    return sum / window->rate_hz;
}

/* total: sum of the squares less the background's. */
static void measure_shape(const struct impulse_window *window, double total, struct impulse_measures *m)
{
    double sums[4] = {0};
    for (size_t i = 0; i < window->n; i++) {
        double p = window->pascals[i] - window->mean_pa, square = p * p;
        sums[0] += p;
        sums[1] += square;
        sums[2] += square * p;
        sums[3] += square * square;
    }
    const double n = (double)window->n, b = window->background_pa2;
    double fourths = sums[3] - 6 * b * total - 3 * b * b * n;
    struct moments moments = moments_of_sums(n, sums, 0);
    m->kurtosis = moments_kurtosis(&moments);
    m->window_s = n / window->rate_hz;
    m->effective_s = fourths > 0 ? total * total / fourths / window->rate_hz : NAN;
    m->positive_impulse_pa_s = positive_impulse(window);
}

enum status impulse_measure(const struct impulse_window *window, struct impulse_measures *out)
{
    double sum = 0, least = INFINITY, greatest = -INFINITY;
    for (size_t i = 0; i < window->n; i++) {
        double p = window->pascals[i] - window->mean_pa;
        sum += p * p;
        least = p < least ? p : least;
        greatest = p > greatest ? p : greatest;
    }
    const double total = sum - window->background_pa2 * (double)window->n;
    if (!(total > 0))
        return STATUS_NOT_FOUND;
    struct crossings at = find_crossings(window, total);
    if (!(at.t95 > at.t5))
        return STATUS_NOT_FOUND;
    struct impulse_measures m = {.t5_frame = at.t5, .t50_frame = at.t50, .t95_frame = at.t95};
    m.exposure_pa2_s = total / window->rate_hz;
    m.t90_s = (at.t95 - at.t5) / window->rate_hz;
    m.sel_db = units_sel_db(m.exposure_pa2_s);
    m.rms90_db = units_spl_db(ENERGY_PART * m.exposure_pa2_s / m.t90_s);
    m.peak_db = units_peak_db(fmax(greatest, -least));
    m.peak_to_peak_db = units_peak_db(greatest - least);
    measure_shape(window, total, &m);
    m.background_db = units_spl_db(window->background_pa2);
    m.weak = m.rms90_db - m.background_db < WEAK_DB;
    double largest = fmax(greatest + window->mean_pa, -(least + window->mean_pa));
    m.clipped = largest >= window->full_scale_pa * FULL_SCALE && is_clipped(window);
    *out = m;
    return STATUS_OK;
}
