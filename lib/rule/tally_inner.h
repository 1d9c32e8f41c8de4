/* What the files of the tally share; nobody else includes it.
 *
 *   tally.c       create, and what is said
 *   tally_take.c  what is summed, and what counts as said
 */
#ifndef RULE_TALLY_INNER_H
#define RULE_TALLY_INNER_H

#include "level/quieting.h"
#include "rule/tally.h"
#include "rule/tally_counts.h"
#include "rule/tally_limits.h"
#include "rule/tally_quieting.h"
#include "rule/tally_warning.h"

#define TALLY_KEPT_IMPULSES 4096 /* of the job, for the median: more than an hour of blows */

/* One stream's sums. */
struct sums {
    struct exposure *exposure;
    uint32_t channel; /* whose impulses they are; 0 before the first */
    uint32_t n_impulses;
    float sel_db[TALLY_KEPT_IMPULSES]; /* of the job, a ring */
    double peak_db;
    bool changed;
    struct tally_counts counts; /* of the job */
    struct tally_limits limits;
    struct tally_warnings warnings;
    enum zone_warning warned; /* the strongest that was said in this soft start */
    struct quieting quieting; /* of the job */
    struct tally_said falling;
    struct tally_said said[CRITERIA_MAX]; /* of each criterion against the zone, in this job */
    uint64_t n_findings;                  /* said in this run */
};

struct tally {
    struct tally_setup setup;
    struct sums *sums; /* [n_streams] */
    struct source_sea sea;
    char job[IMPULSE_JOB_SIZE];
    int64_t job_ns; /* since when it is open, or none is */
    bool quieting_on;
    bool silent; /* being rebuilt */
    uint32_t run;
    uint64_t n_exposures, n_sources; /* said in this run */
    int64_t said_minute;
};

/* From the source to the channel; NAN where unknown. */
double tally_range_m(const struct tally *tally, uint32_t stream, uint32_t channel);
void tally_take_impulse(struct tally *tally, uint32_t stream, const struct impulse *impulse);
void tally_take_level(struct tally *tally, uint32_t stream, const struct level *level);
void tally_begin_job(struct tally *tally, const char *job, int64_t watch_ns);

#endif
