/* What the files of the tally share; nobody else includes it.
 *
 *   tally.c       create, and what is said
 *   tally_take.c  what is summed, and what counts as said
 *   tally_law.c   by which loss law levels are moved
 *   tally_correct.c  sums made again, since a person has said whose impulses are
 */
#ifndef RULE_TALLY_INNER_H
#define RULE_TALLY_INNER_H

#include "level/quieting.h"
#include "rule/tally.h"
#include "rule/tally_channel.h"
#include "rule/tally_fill.h"
#include "rule/tally_fit.h"
#include "rule/tally_limits.h"
#include "rule/tally_quieting.h"
#include "rule/tally_sounding.h"
#include "rule/tally_together.h"
#include "rule/tally_warning.h"

#define TALLY_MAX_KEPT                                                                                       \
    131072u /* impulses of a job that can be counted again, on all channels of the stream */

/* What the sums need of an impulse. */
struct tally_kept {
    int64_t time_ns;
    uint64_t counter, order; /* order: among those of all streams */
    double range_m, t90_s, positive_impulse_pa_s;
    uint32_t run;
    int16_t sel_db, peak_db, peak_to_peak_db, rms90_db, band_db[LEVEL_MAX_BANDS]; /* 0.01 dB */
    uint8_t channel, n_bands, whose;
    bool refused, relative, clipped, overlapped, weak, beside, quieting_on;
};

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
    uint64_t n_findings;         /* said in this run */
    struct exposure *before_job; /* as it was when the job began; for impulses only */
    struct tally_kept *kept;     /* [TALLY_MAX_KEPT], owned; the same */
    uint32_t n_kept, n_beyond;   /* of the job; beyond: not kept */
    bool corrected;              /* some of them just now */
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
    struct tally_sounding sounding;
    bool silent;     /* being rebuilt */
    uint64_t n_kept; /* impulses, of all streams */
    uint32_t run;
    uint64_t n_exposures, n_sources; /* said in this run */
    int64_t said_minute;
};

/* How far away the source was when a channel heard a sound, NAN where unknown: what the watch said of it, the
 * setup's where it said nothing (RANGE_UNSET). Kept as the channel's last, and returned. */
double tally_set_range(struct tally *tally, uint32_t stream, uint32_t channel, double said_m,
                       enum range_from said_from);
/* The same of the last sound that it heard. */
double tally_range_m(const struct tally *tally, uint32_t stream, uint32_t channel);
/* Counts an impulse in the sums, if it belongs there; whether it does. */
bool tally_sum(struct tally *tally, uint32_t stream, const struct impulse *impulse, double range_m,
               bool quieting_on);
/* Keeps it, so that it can be counted again. */
void tally_keep(struct tally *tally, uint32_t stream, uint32_t run, uint64_t counter,
                const struct impulse *impulse);
void tally_correct(struct tally *tally, const struct correction_outcome *correction, int64_t watch_ns,
                   const struct outcome_sink *sink);
/* False where no distance or no zone is known. */
bool tally_zone_distance(const struct tally *tally, uint32_t i, const struct exposure_outcome *exposure,
                         struct zone_distance *out);
void tally_say_finding(struct tally *tally, uint32_t i, int64_t watch_ns,
                       const struct finding_outcome *finding, struct tally_said *said,
                       const struct outcome_sink *sink);
void tally_take_level(struct tally *tally, uint32_t stream, const struct level *level);
/* A note that another source is on or off; one without effect is said. */
void tally_take_other(struct tally *tally, const struct outcome *outcome, const struct outcome_sink *sink);
void tally_begin_job(struct tally *tally, const char *job, int64_t watch_ns);

/* tally_law.c: after the fit has changed, distances and levels at 750 m go by it from now on. */
void tally_set_laws(struct tally *tally);
/* The law that moves a level: the first that covers the band of most of the energy. Borrowed until the laws
 * are set again. */
const struct source_law *tally_law_of_channel(const struct tally *tally, const struct tally_channel *channel);
const struct source_law *tally_law_of_impulse(const struct tally *tally, const struct impulse *impulse);

#endif
