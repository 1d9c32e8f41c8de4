/* The limits among the criteria, for one stream's impulses of the running job. For lib/rule/tally only. */
#ifndef RULE_TALLY_LIMITS_H
#define RULE_TALLY_LIMITS_H

#include "flow.h"
#include "level/criterion.h"
#include "level/source.h"
#include "level/zone_check.h"
#include <stdint.h>

#define TALLY_MAX_LIMITS 16
#define TALLY_LIMIT_PASSED "limit passed"
#define TALLY_ZONE_TOO_SMALL "zone too small"

/* The strongest finding of the job so far about one thing. */
struct tally_said {
    enum zone_grade grade;
    char id[FLOW_ID_SIZE]; /* the newest finding's */
};

struct tally_limit {
    uint32_t criterion; /* its index */
    struct zone_limit limit;
    struct zone_tally tally;
    struct tally_said said;
};

/* Plain data. */
struct tally_limits {
    uint32_t n;
    struct tally_limit limits[TALLY_MAX_LIMITS];
};

/* Those criteria that limit one impulse's level at a range. */
void tally_limits_reset(struct tally_limits *limits, const struct criteria *criteria);
/* A new job begins: nothing was passed in it yet. */
void tally_limits_begin_job(struct tally_limits *limits);
/* What was counted is counted again; what was said stays. */
void tally_limits_recount(struct tally_limits *limits);
/* What a finding about the criterion has as its clause. */
void tally_clause(const struct criterion *criterion, char out[FLOW_TEXT_SIZE]);

/* How levels move from the channel to the limit's range. */
struct tally_move {
    enum channel_role role;
    double range_m;               /* NAN: unknown; then nothing is judged */
    const struct source_law *law; /* that covers the impulse; borrowed */
    double level_spread_db;
};
/* One level there. */
struct tally_moved {
    bool measured; /* the channel stands there: nothing was moved */
    double level_db;
    double constant_spread_db; /* standard deviation of what is wrong in all levels alike */
    double spread_db;          /* of this one */
};
#define TALLY_BOUND 1.6449 /* standard deviations to the bounds of a 90 % interval */
/* False where the range is unknown, another impulse overlaps this one, or it has no such level. */
bool tally_move_level(const struct impulse *impulse, const struct tally_move *move,
                      enum criterion_metric metric, double to_m, struct tally_moved *out);
void tally_limits_push(struct tally_limits *limits, const struct impulse *impulse,
                       const struct tally_move *move);

/* The next limit whose finding is stronger than what was said of it in this job: what was said of it, for the
 * caller to set, and the finding is filled but for its causes; NULL when there is none. */
struct tally_said *tally_limits_next(struct tally_limits *limits, const struct criteria *criteria,
                                     const char *job, struct finding_outcome *out);
/* A finding that was said of one of the limits; others change nothing. */
void tally_limits_set_said(struct tally_limits *limits, const struct criteria *criteria,
                           const struct finding_outcome *finding, const struct tally_said *said);

/* The same for a criterion of injury that reaches beyond the zone; `said` is what was said of it in this
 * job. */
bool tally_zone_finding(const struct criterion *criterion, const struct zone_distance *distance,
                        const char *job, enum zone_grade said, struct finding_outcome *out);
bool tally_is_zone_finding(const struct criterion *criterion, const struct finding_outcome *finding);

#endif
