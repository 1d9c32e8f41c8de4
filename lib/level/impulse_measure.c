/* The measures of one impulse in a window of sound. */
#include "level/impulse_measure.h"
#include "base/units.h"
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
    m.background_db = units_spl_db(window->background_pa2);
    m.weak = m.rms90_db - m.background_db < WEAK_DB;
    double largest = fmax(greatest + window->mean_pa, -(least + window->mean_pa));
    m.clipped = largest >= window->full_scale_pa * FULL_SCALE && is_clipped(window);
    *out = m;
    return STATUS_OK;
}
