/* What the files of the tally share; nobody else includes it.
 *
 *   tally.c       create, and what is said
 *   tally_take.c  what is summed, and what counts as said
 *   tally_law.c   by which loss law levels are moved
 */
#ifndef RULE_TALLY_INNER_H
#define RULE_TALLY_INNER_H

#include "level/quieting.h"
#include "rule/tally.h"
#include "rule/tally_channel.h"
#include "rule/tally_fit.h"
#include "rule/tally_limits.h"
#include "rule/tally_quieting.h"
#include "rule/tally_together.h"
#include "rule/tally_warning.h"

/* One stream's sums. */
struct sums {
    struct exposure *exposure;
    uint32_t channel; /* whose impulses they are, the reference (rule/blows.h); 0 before the first */
    bool changed;
    struct tally_channel channels[FLOW_MAX_CHANNELS]; /* those beside the reference too */
    struct tally_limits limits;
    struct tally_warnings warnings;
    enum zone_warning warned; /* the strongest that was said in this soft start */
    struct quieting quieting; /* of the job */
    struct tally_said falling;
    /* Of each criterion against the zone, in this job: by ours alone, and with the others. */
    struct tally_said said[CRITERIA_MAX], said_together[CRITERIA_MAX];
    uint64_t n_findings; /* said in this run */
};

struct tally {
    struct tally_setup setup;
    struct sums *sums;     /* [n_streams] */
    struct source_sea sea; /* the law that was fitted, while there is one, before the one that was set */
    struct tally_fit *fit;
    struct together *together; /* NULL where no other source is set */
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

/* tally_law.c: after the fit has changed, distances and levels at 750 m go by it from now on. */
void tally_set_laws(struct tally *tally);
/* The law that moves a level: the first that covers the band of most of the energy. Borrowed until the laws
 * are set again. */
const struct source_law *tally_law_of_channel(const struct tally *tally, const struct tally_channel *channel);
const struct source_law *tally_law_of_impulse(const struct tally *tally, const struct impulse *impulse);

#endif
