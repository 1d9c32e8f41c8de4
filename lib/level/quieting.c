/* Insertion loss of a quieting measure, and its fall: see the header. */
#include "level/quieting.h"
#include "base/student.h"
#include "base/units.h"
#include <math.h>

#define LEAST_SPREAD_DB                                                                                      \
    0.2 /* levels are never steadier than this in the sea (common practice, no source)                       \
         */
#define SPREAD_BOUND                                                                                         \
    1.2 /* upper 95 % bound of a standard deviation from 50 normal values, over the value                    \
         */
#define LEAST_K 0.5

static void sum_push(struct quieting_sum *sum, double x)
{
    double off = x - sum->mean;
    sum->n++;
    sum->mean += off / (double)sum->n;
    sum->square += off * (x - sum->mean);
}

static double sum_variance(const struct quieting_sum *sum)
{
    return sum->square / ((double)sum->n - 1.0);
}

void quieting_reset(struct quieting *quieting)
{
    *quieting = (struct quieting){0};
}

static void watch_level(struct quieting *quieting, int matched, double level_db)
{
    struct quieting_sum *base = &quieting->base[matched];
    struct page *page = &quieting->page[matched];
    if (base->n < QUIETING_BASE_IMPULSES) {
        sum_push(base, level_db);
        return;
    }
    double spread_db = fmax(SPREAD_BOUND * sqrt(sum_variance(base)), LEAST_SPREAD_DB);
    if (page->h == 0.0) {
        double k = fmax(0.5 * QUIETING_FALL_DB / spread_db, LEAST_K);
        page_reset(page, k + 2.0 / sqrt(QUIETING_BASE_IMPULSES), page_threshold(k, QUIETING_RUN_LENGTH));
    }
    quieting->falling[matched] = page_push(page, (level_db - base->mean) / spread_db);
}

enum status quieting_push(struct quieting *quieting, const struct quieting_impulse *impulse)
{
    if (!isfinite(impulse->sel_db) || impulse->n_bands > LEVEL_MAX_BANDS)
        return STATUS_OUT_OF_RANGE;
    bool fed = isfinite(impulse->energy_kj) && impulse->energy_kj > 0.0;
    for (int matched = 0; matched < (fed ? 2 : 1); matched++) {
        double off_db = matched ? units_power_db(impulse->energy_kj) : 0.0;
        sum_push(&quieting->broadband[impulse->on][matched], impulse->sel_db - off_db);
        for (uint32_t i = 0; i < impulse->n_bands; i++)
            if (isfinite(impulse->band_db[i]))
                sum_push(&quieting->band[impulse->on][matched][i], impulse->band_db[i] - off_db);
        if (impulse->on)
            watch_level(quieting, matched, impulse->sel_db - off_db);
    }
    return STATUS_OK;
}

static struct quieting_loss compare(const struct quieting_sum *off, const struct quieting_sum *on)
{
    if (off->n < QUIETING_LEAST_IMPULSES || on->n < QUIETING_LEAST_IMPULSES)
        return (struct quieting_loss){NAN, NAN, NAN};
    double a = sum_variance(off) / (double)off->n, b = sum_variance(on) / (double)on->n,
           db = off->mean - on->mean;
    if (!(a + b > 0.0))
        return (struct quieting_loss){db, db, db};
    double dof = (a + b) * (a + b) / (a * a / ((double)off->n - 1.0) + b * b / ((double)on->n - 1.0));
    double half = student_quantile(0.95, dof) * sqrt(a + b);
    return (struct quieting_loss){db, db - half, db + half};
}

/* Matched only when every impulse was fed: a mixture would compare some with others. */
static int matched_of(const struct quieting *quieting)
{
    return quieting->broadband[0][1].n == quieting->broadband[0][0].n &&
           quieting->broadband[1][1].n == quieting->broadband[1][0].n;
}

enum status quieting_get(const struct quieting *quieting, struct insertion_loss *out)
{
    int matched = matched_of(quieting);
    const struct quieting_sum *off = &quieting->broadband[0][matched], *on = &quieting->broadband[1][matched];
    if (off->n < QUIETING_LEAST_IMPULSES || on->n < QUIETING_LEAST_IMPULSES)
        return STATUS_NOT_FOUND;
    *out = (struct insertion_loss){
        .matched = matched, .n_off = off->n, .n_on = on->n, .broadband = compare(off, on)};
    for (uint32_t i = 0; i < LEVEL_MAX_BANDS; i++) {
        const struct quieting_sum *without = &quieting->band[0][matched][i];
        out->band[i] = compare(without, &quieting->band[1][matched][i]);
        out->without_db[i] = without->n < QUIETING_LEAST_IMPULSES ? NAN : without->mean;
        if (isfinite(out->band[i].db))
            out->n_bands = i + 1;
    }
    return STATUS_OK;
}

bool quieting_falls(const struct quieting *quieting, double *out_db)
{
    int matched = quieting->broadband[1][1].n == quieting->broadband[1][0].n;
    bool falls = quieting->falling[matched];
    double spread_db = fmax(SPREAD_BOUND * sqrt(sum_variance(&quieting->base[matched])), LEAST_SPREAD_DB);
    if (out_db)
        *out_db = falls ? spread_db * page_rise(&quieting->page[matched]) : 0.0;
    return falls;
}

double quieting_reduction_db(const double *level_db, const double *loss_db, uint32_t n,
                             const struct weighting *weighting)
{
    double quieted_db[LEVEL_MAX_BANDS];
    if (n > LEVEL_MAX_BANDS)
        return NAN;
    for (uint32_t i = 0; i < n; i++)
        quieted_db[i] = level_db[i] - (isnan(loss_db[i]) ? 0.0 : loss_db[i]);
    return weighting_sum_db(weighting, BAND_WEIGHTING_CENTRE, level_db, n) -
           weighting_sum_db(weighting, BAND_WEIGHTING_CENTRE, quieted_db, n);
}
