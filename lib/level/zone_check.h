/* Whether a limit's statistic has passed, or a criterion reaches beyond the permit's zone, and how sure that
 * is.
 *
 * Firm: measured, with a channel that survives the source (role measure or both), within 5 % of the limit's
 * range. Indicative: worked out from another range, and only where the lower bound of its 90 % interval
 * passes. A limit that some part of the impulses may exceed (the SEL that at most 5 % exceed, SEL05) is
 * judged over the job and not before 100 impulses; one that none may exceed by each impulse. Where there is a
 * firm statistic it decides alone. The metric of a limit is never guessed: a peak is not a peak to peak, 6 dB
 * apart.
 *
 * Who calls leaves out impulses that are not ours, relative, refused or overlapped; weak ones count. A
 * clipped one counts as what it read: it may be over unseen, never under. */
#ifndef LEVEL_ZONE_CHECK_H
#define LEVEL_ZONE_CHECK_H

#include "base/status.h"
#include "level/calibration.h"
#include "level/criterion.h"
#include "level/trend.h"
#include <stdbool.h>
#include <stdint.h>

#define ZONE_LEAST_IMPULSES 100
#define ZONE_TOLERANCE 0.05

enum zone_grade {
    ZONE_NOTHING,    /* judged, and not passed */
    ZONE_TOO_FEW,    /* not judged yet */
    ZONE_INDICATIVE, /* finding, grade "indicative" */
    ZONE_FIRM        /* finding, grade "firm" */
};

struct zone_limit {
    enum criterion_metric metric;
    double limit_db;
    double range_m;    /* where it must be kept */
    double exceedance; /* part of the impulses that may exceed it: 0.05; 0: none may */
};

/* What a job has shown against one limit. Plain data; all zero is empty. */
struct zone_tally {
    uint64_t n_measured, n_measured_over;
    uint64_t n_moved, n_moved_over, n_moved_surely; /* surely: the lower bound is over */
    double highest_measured_db, highest_moved_db;   /* meaningful where the count is above 0 */
};

struct zone_verdict {
    enum zone_grade grade;
    uint64_t n, n_over; /* impulses judged, and those that count as over */
    double highest_db;  /* NAN where none was judged */
};

/* A limit of a set of criteria; STATUS_OUT_OF_RANGE where the criterion has no range, or is no level of one
 * impulse (peak, peak to peak, single SEL, SPL over T90). */
enum status zone_limit_of(const struct criterion *criterion, struct zone_limit *out);
/* Whether a channel stands where the limit holds and survives the source. */
bool zone_is_measured(enum channel_role role, double range_m, double limit_range_m);

/* Takes one impulse: its level at the limit's range and the lower bound of that. STATUS_MISMATCH when the
 * metric is not the limit's, STATUS_OUT_OF_RANGE for numbers that are not finite; the tally is untouched
 * then. */
enum status zone_tally_push(struct zone_tally *tally, const struct zone_limit *limit,
                            enum criterion_metric metric, double level_db, double low_db, bool measured);
struct zone_verdict zone_check_limit(const struct zone_tally *tally, const struct zone_limit *limit);

/* How far a criterion reaches against the zone. */
struct zone_distance {
    double zone_m;
    double distance_m,
        low_m; /* of the criterion, and the lower bound of its 90 % interval; may be INFINITY */
    enum channel_role role;
    double range_m;                /* of the channel it was worked out from; NAN where unknown */
    double level_db, threshold_db; /* at that channel */
    bool relative;                 /* uncalibrated: compared with nothing */
};

/* Firm when a channel within 5 % of 750 m, no nearer than the zone's edge give or take that, has the
 * threshold or more; indicative when low_m is beyond the zone. */
enum zone_grade zone_check_distance(const struct zone_distance *distance);

enum zone_warning { ZONE_NO_WARNING, ZONE_MAY_PASS, ZONE_WILL_PASS };

/* Early warning: the level at the limit's range that a soft start's trend leads to at full power (x_full of
 * the trend's x). ZONE_MAY_PASS when it is over the limit, ZONE_WILL_PASS when its lower bound is. No warning
 * while trend_get has no answer; out (may be NULL) is filled when it has one. For people: never a finding. */
enum zone_warning zone_warn(const struct trend *trend, double x_full, const struct zone_limit *limit,
                            struct trend_forecast *out);

/* "firm", "indicative", "" for the others; never NULL. */
const char *zone_grade_text(enum zone_grade grade);
enum zone_grade zone_grade_from_text(const char *text); /* ZONE_NOTHING for any other text */

#endif
