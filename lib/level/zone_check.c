/* Limits and zones: see the header. */
#include "level/zone_check.h"
#include "level/source.h"
#include <math.h>
#include <string.h>

enum status zone_limit_of(const struct criterion *criterion, struct zone_limit *out)
{
    enum criterion_metric metric = criterion->metric;
    bool of_one = metric == METRIC_PEAK || metric == METRIC_PEAK_TO_PEAK || metric == METRIC_SEL_SINGLE ||
                  (metric == METRIC_SPL && criterion->average == AVERAGE_T90);
    if (!of_one || !isfinite(criterion->limit_range_m) || !(criterion->limit_range_m > 0.0) ||
        !isfinite(criterion->value))
        return STATUS_OUT_OF_RANGE;
    *out =
        (struct zone_limit){metric, criterion->value, criterion->limit_range_m, criterion->limit_exceedance};
    return STATUS_OK;
}

static bool stands_at(double range_m, double wanted_m)
{
    return fabs(range_m - wanted_m) <= ZONE_TOLERANCE * wanted_m * (1.0 + 1e-12);
}

bool zone_is_measured(enum channel_role role, double range_m, double limit_range_m)
{
    return role != ROLE_LISTEN && stands_at(range_m, limit_range_m);
}

enum status zone_tally_push(struct zone_tally *tally, const struct zone_limit *limit,
                            enum criterion_metric metric, double level_db, double low_db, bool measured)
{
    if (metric != limit->metric)
        return STATUS_MISMATCH;
    if (!isfinite(level_db) || !isfinite(low_db))
        return STATUS_OUT_OF_RANGE;
    if (measured) {
        tally->highest_measured_db =
            tally->n_measured ? fmax(tally->highest_measured_db, level_db) : level_db;
        tally->n_measured++;
        tally->n_measured_over += level_db > limit->limit_db;
    } else {
        tally->highest_moved_db = tally->n_moved ? fmax(tally->highest_moved_db, level_db) : level_db;
        tally->n_moved++;
        tally->n_moved_over += level_db > limit->limit_db;
        tally->n_moved_surely += low_db > limit->limit_db;
    }
    return STATUS_OK;
}

struct zone_verdict zone_check_limit(const struct zone_tally *tally, const struct zone_limit *limit)
{
    uint64_t needed = limit->exceedance > 0.0 ? ZONE_LEAST_IMPULSES : 1;
    bool measured = tally->n_measured >= needed, moved = !measured && tally->n_moved >= needed;
    if (!measured && !moved) {
        bool any = tally->n_measured > 0;
        return (struct zone_verdict){ZONE_TOO_FEW, any ? tally->n_measured : tally->n_moved, 0, NAN};
    }
    struct zone_verdict verdict = {
        .grade = ZONE_NOTHING,
        .n = measured ? tally->n_measured : tally->n_moved,
        .n_over = measured ? tally->n_measured_over : tally->n_moved_surely,
        .highest_db = measured ? tally->highest_measured_db : tally->highest_moved_db,
    };
    if ((double)verdict.n_over > limit->exceedance * (double)verdict.n * (1.0 + 1e-12))
        verdict.grade = measured ? ZONE_FIRM : ZONE_INDICATIVE;
    return verdict;
}

enum zone_grade zone_check_distance(const struct zone_distance *distance)
{
    const struct zone_distance *d = distance;
    if (d->relative || isnan(d->distance_m) || !(d->zone_m > 0.0))
        return ZONE_TOO_FEW;
    bool covers = d->range_m >= d->zone_m * (1.0 - ZONE_TOLERANCE) && d->level_db >= d->threshold_db;
    if (zone_is_measured(d->role, d->range_m, SOURCE_NORMAL_M) && covers && d->distance_m > d->zone_m)
        return ZONE_FIRM;
    return d->low_m > d->zone_m ? ZONE_INDICATIVE : ZONE_NOTHING;
}

enum zone_warning zone_warn(const struct trend *trend, double x_full, const struct zone_limit *limit,
                            struct trend_forecast *out)
{
    struct trend_forecast forecast;
    if (trend_get(trend, x_full, &forecast) != STATUS_OK)
        return ZONE_NO_WARNING;
    if (out)
        *out = forecast;
    if (forecast.low_db > limit->limit_db)
        return ZONE_WILL_PASS;
    return forecast.db > limit->limit_db ? ZONE_MAY_PASS : ZONE_NO_WARNING;
}

const char *zone_grade_text(enum zone_grade grade)
{
    return grade == ZONE_FIRM ? "firm" : grade == ZONE_INDICATIVE ? "indicative" : "";
}

enum zone_grade zone_grade_from_text(const char *text)
{
    return strcmp(text, "firm") == 0         ? ZONE_FIRM
           : strcmp(text, "indicative") == 0 ? ZONE_INDICATIVE
                                             : ZONE_NOTHING;
}
