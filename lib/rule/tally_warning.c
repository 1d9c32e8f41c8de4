/* Early warning of a soft start; see tally_warning.h. */
#include "rule/tally_warning.h"
#include "base/time.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

void tally_warnings_reset(struct tally_warnings *warnings, const struct criteria *criteria,
                          double zone_edge_m, double length_s)
{
    memset(warnings, 0, sizeof *warnings);
    warnings->start_ns = -1;
    warnings->length_s = length_s > 0 ? length_s : 0;
    for (uint32_t c = 0; c < criteria->n && warnings->n < TALLY_MAX_WARNINGS; c++) {
        const struct criterion *criterion = &criteria->items[c];
        struct tally_warning one = {.criterion = c};
        bool hurts = criterion->effect == EFFECT_INJURY || criterion->effect == EFFECT_MORTALITY;
        bool of_one = criterion->metric == METRIC_PEAK || criterion->metric == METRIC_PEAK_TO_PEAK ||
                      criterion->metric == METRIC_SEL_SINGLE;
        if (!criterion_applies(criterion, SOUND_IMPULSIVE) || criterion->weighting)
            continue;
        if (hurts && of_one && zone_edge_m > 0)
            one.limit = (struct zone_limit){criterion->metric, criterion->value, zone_edge_m, 0};
        else if (hurts || zone_limit_of(criterion, &one.limit) != STATUS_OK)
            continue;
        warnings->items[warnings->n++] = one;
    }
}

void tally_warnings_phase(struct tally_warnings *warnings, enum phase phase, int64_t watch_ns)
{
    if (phase != PHASE_SOFT_START) {
        warnings->start_ns = -1;
        return;
    }
    if (warnings->start_ns >= 0)
        return;
    warnings->start_ns = warnings->last_ns = watch_ns;
    for (uint32_t i = 0; i < warnings->n; i++)
        warnings->items[i].trend = (struct trend){0};
}

void tally_warnings_recount(struct tally_warnings *warnings)
{
    for (uint32_t i = 0; i < warnings->n; i++)
        warnings->items[i].trend = (struct trend){0};
}

void tally_warnings_push(struct tally_warnings *warnings, const struct impulse *impulse,
                         const struct tally_move *move)
{
    if (warnings->start_ns < 0 || impulse->time_ns < warnings->start_ns)
        return;
    warnings->last_ns = impulse->time_ns;
    for (uint32_t i = 0; i < warnings->n; i++) {
        struct tally_warning *one = &warnings->items[i];
        struct tally_moved moved;
        if (!tally_move_level(impulse, move, one->limit.metric, one->limit.range_m, &moved))
            continue;
        one->move_spread_db = moved.constant_spread_db;
        trend_push(&one->trend, time_to_s(impulse->time_ns - warnings->start_ns), moved.level_db);
    }
}

static enum zone_warning judge(const struct tally_warning *one, double end_s, struct trend_forecast *forecast)
{
    struct zone_limit surely = one->limit;
    surely.limit_db += TALLY_BOUND * one->move_spread_db;
    enum zone_warning warning = zone_warn(&one->trend, end_s, &one->limit, forecast);
    if (warning == ZONE_NO_WARNING || forecast->db - forecast->low_db > TALLY_WARNING_HALF_DB)
        return ZONE_NO_WARNING;
    return zone_warn(&one->trend, end_s, &surely, NULL) == ZONE_WILL_PASS ? ZONE_WILL_PASS : ZONE_MAY_PASS;
}

enum zone_warning tally_warnings_text(const struct tally_warnings *warnings, const struct criteria *criteria,
                                      char out[FLOW_TEXT_SIZE])
{
    enum zone_warning strongest = ZONE_NO_WARNING;
    double most_db = 0;
    out[0] = '\0';
    if (warnings->start_ns < 0 || !(warnings->length_s > 0))
        return strongest;
    double end_s = fmax(warnings->length_s, time_to_s(warnings->last_ns - warnings->start_ns));
    for (uint32_t i = 0; i < warnings->n; i++) {
        const struct tally_warning *one = &warnings->items[i];
        const struct criterion *criterion = &criteria->items[one->criterion];
        struct trend_forecast forecast;
        enum zone_warning warning = judge(one, end_s, &forecast);
        double over_db = forecast.db - one->limit.limit_db;
        if (warning == ZONE_NO_WARNING || warning < strongest || (warning == strongest && over_db <= most_db))
            continue;
        strongest = warning;
        most_db = over_db;
        snprintf(
            out, FLOW_TEXT_SIZE,
            "%.60s (%.60s) rises to %.1f dB (90 %%: %.1f to %.1f) at %.0f m by the end of the soft start "
            "and %s the %s of %.1f dB",
            criterion->name, criterion->set, forecast.db, forecast.low_db - TALLY_BOUND * one->move_spread_db,
            forecast.high_db + TALLY_BOUND * one->move_spread_db, one->limit.range_m,
            warning == ZONE_WILL_PASS ? "will pass" : "may pass",
            criterion->effect == EFFECT_LIMIT ? "limit" : "criterion", one->limit.limit_db);
    }
    return strongest;
}
