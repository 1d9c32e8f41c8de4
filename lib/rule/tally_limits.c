/* Limits of one impulse's level, and zones that are too small; see tally_limits.h. */
#include "rule/tally_limits.h"
#include "rule/tally_fill.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

void tally_limits_reset(struct tally_limits *limits, const struct criteria *criteria)
{
    memset(limits, 0, sizeof *limits);
    for (uint32_t c = 0; c < criteria->n && limits->n < TALLY_MAX_LIMITS; c++) {
        struct zone_limit limit;
        if (criterion_applies(&criteria->items[c], SOUND_IMPULSIVE) &&
            zone_limit_of(&criteria->items[c], &limit) == STATUS_OK)
            limits->limits[limits->n++] = (struct tally_limit){.criterion = c, .limit = limit};
    }
}

void tally_limits_begin_job(struct tally_limits *limits)
{
    for (uint32_t i = 0; i < limits->n; i++) {
        limits->limits[i].tally = (struct zone_tally){0};
        limits->limits[i].said = (struct tally_said){ZONE_NOTHING, ""};
    }
}

static double level_of(const struct impulse *impulse, enum criterion_metric metric)
{
    switch (metric) {
    case METRIC_PEAK:
        return impulse->peak_db;
    case METRIC_PEAK_TO_PEAK:
        return impulse->peak_to_peak_db;
    case METRIC_SEL_SINGLE:
        return impulse->sel_db;
    case METRIC_SPL:
        return impulse->rms90_db;
    default:
        return NAN;
    }
}

bool tally_move_level(const struct impulse *impulse, const struct tally_move *move,
                      enum criterion_metric metric, double to_m, struct tally_moved *out)
{
    double level_db = level_of(impulse, metric);
    if (!(move->range_m > 0) || impulse->overlapped || !isfinite(level_db))
        return false;
    double fall_db, fall_spread_db;
    source_law_between(move->law, move->range_m, to_m, &fall_db, &fall_spread_db);
    out->measured = zone_is_measured(move->role, move->range_m, to_m);
    out->level_db = level_db - (out->measured ? 0 : fall_db);
    out->constant_spread_db = hypot(move->level_spread_db, fall_spread_db);
    out->spread_db = hypot(out->constant_spread_db, move->law->scatter_db);
    return true;
}

void tally_limits_push(struct tally_limits *limits, const struct impulse *impulse,
                       const struct tally_move *move)
{
    for (uint32_t i = 0; i < limits->n; i++) {
        struct tally_limit *one = &limits->limits[i];
        struct tally_moved moved;
        /* A refused or missing level says nothing of the limit. */
        if (tally_move_level(impulse, move, one->limit.metric, one->limit.range_m, &moved))
            (void)zone_tally_push(&one->tally, &one->limit, one->limit.metric, moved.level_db,
                                  moved.level_db - TALLY_BOUND * moved.spread_db, moved.measured);
    }
}

void tally_limits_recount(struct tally_limits *limits)
{
    for (uint32_t i = 0; i < limits->n; i++)
        limits->limits[i].tally = (struct zone_tally){0};
}

void tally_clause(const struct criterion *criterion, char out[FLOW_TEXT_SIZE])
{
    snprintf(out, FLOW_TEXT_SIZE, "%s, %s", criterion->set, criterion->name);
}

static void fill(const struct criterion *criterion, const char *code, enum zone_grade grade, const char *job,
                 struct finding_outcome *out)
{
    *out = (struct finding_outcome){0};
    snprintf(out->code, sizeof out->code, "%s", code);
    tally_clause(criterion, out->clause);
    snprintf(out->job, sizeof out->job, "%.*s", IMPULSE_JOB_SIZE - 1, job);
    out->basis = BASIS_SOUND;
    snprintf(out->grade, sizeof out->grade, "%s", zone_grade_text(grade));
}

static bool is_finding(const struct criterion *criterion, const char *code,
                       const struct finding_outcome *finding)
{
    struct finding_outcome wanted;
    fill(criterion, code, ZONE_NOTHING, "", &wanted);
    return strcmp(finding->code, wanted.code) == 0 && strcmp(finding->clause, wanted.clause) == 0;
}

void tally_limits_set_said(struct tally_limits *limits, const struct criteria *criteria,
                           const struct finding_outcome *finding, const struct tally_said *said)
{
    for (uint32_t i = 0; i < limits->n; i++)
        if (is_finding(&criteria->items[limits->limits[i].criterion], TALLY_LIMIT_PASSED, finding))
            limits->limits[i].said = *said;
}

bool tally_is_zone_finding(const struct criterion *criterion, const struct finding_outcome *finding)
{
    return is_finding(criterion, TALLY_ZONE_TOO_SMALL, finding);
}

struct tally_said *tally_limits_next(struct tally_limits *limits, const struct criteria *criteria,
                                     const char *job, struct finding_outcome *out)
{
    for (uint32_t i = 0; i < limits->n; i++) {
        struct tally_limit *one = &limits->limits[i];
        struct zone_verdict verdict = zone_check_limit(&one->tally, &one->limit);
        if (verdict.grade < ZONE_INDICATIVE || verdict.grade <= one->said.grade)
            continue;
        const struct criterion *criterion = &criteria->items[one->criterion];
        fill(criterion, TALLY_LIMIT_PASSED, verdict.grade, job, out);
        snprintf(out->detail, sizeof out->detail,
                 "%llu of %llu impulses over %.1f dB (%s, re %s) at %.0f m, the highest %.1f dB%s",
                 (unsigned long long)verdict.n_over, (unsigned long long)verdict.n, one->limit.limit_db,
                 criterion_metric_text(one->limit.metric), criterion_reference(one->limit.metric),
                 one->limit.range_m, verdict.highest_db,
                 criterion->disputed ? "; sources disagree on the metric" : "");
        return &one->said;
    }
    return NULL;
}

bool tally_zone_finding(const struct criterion *criterion, const struct zone_distance *distance,
                        const char *job, enum zone_grade said, struct finding_outcome *out)
{
    enum zone_grade grade = zone_check_distance(distance);
    bool hurts = criterion->effect == EFFECT_INJURY || criterion->effect == EFFECT_MORTALITY;
    if (!hurts || grade < ZONE_INDICATIVE || grade <= said)
        return false;
    fill(criterion, TALLY_ZONE_TOO_SMALL, grade, job, out);
    char met[NOTE_NAME_SIZE], least[NOTE_NAME_SIZE];
    tally_distance_text(distance->distance_m, NAN, NAN, met);
    tally_distance_text(distance->low_m, NAN, NAN, least);
    snprintf(out->detail, sizeof out->detail,
             "the criterion is met at %s (90 %%: at least %s), beyond the zone of %.0f m", met, least,
             distance->zone_m);
    return true;
}
