/* What one channel heard of a job's own impulses or seconds of continuous sound, and the three numbers of the
 * source that follow from it (level/source.h). For lib/rule/tally only. */
#ifndef RULE_TALLY_CHANNEL_H
#define RULE_TALLY_CHANNEL_H

#include "flow.h"
#include "level/impulse.h"
#include "level/source.h"
#include "rule/tally_counts.h"
#include <stdbool.h>
#include <stdint.h>

#define TALLY_KEPT_IMPULSES 4096 /* of the job, for the median: more than an hour of blows */

/* Plain data; all 0 is a channel that heard nothing. */
struct tally_channel {
    uint32_t n_impulses;                /* or seconds, where the sound is continuous */
    float sel_db[TALLY_KEPT_IMPULSES];  /* a ring; SPL of seconds */
    float range_m[TALLY_KEPT_IMPULSES]; /* of each of them; NAN where unknown */
    double last_range_m;                /* of the last sound */
    enum range_from last_from;
    double peak_db;                 /* the highest */
    double energy[LEVEL_MAX_BANDS]; /* uPa2 s, of all; of seconds uPa2 */
    struct tally_counts counts;
    bool changed; /* since it was last said */
};

void tally_channel_begin_job(struct tally_channel *channel);
/* Whether an impulse belongs into the sums; counts those that do not. Of ours that is said, too. */
bool tally_channel_counts(struct tally_channel *channel, const struct impulse *impulse);
/* Takes one that does, heard at a range (NAN: unknown). */
void tally_channel_push(struct tally_channel *channel, const struct impulse *impulse, double range_m);
/* Takes a second of continuous sound: SPL where an impulse has SEL. Uncalibrated ones are only counted. */
void tally_channel_push_level(struct tally_channel *channel, const struct level *level, double range_m);
/* Whether there is anything to say of it. */
bool tally_channel_heard(const struct tally_channel *channel);
/* Adds an impulse's decidecades, uPa2 s. */
void tally_channel_add_energy(const struct impulse *impulse, double energy[LEVEL_MAX_BANDS]);
/* The band that holds most of the energy, a tenth of it below and a tenth above; false where no impulse had
 * decidecades. */
bool tally_channel_band(const struct tally_channel *channel, double *out_low_hz, double *out_high_hz);
/* The members of *out from n_impulses to range_high_m. The law must cover the channel's band; `measured`
 * holds what is known beside the levels and ranges: spread, band. */
void tally_channel_fill(const struct tally_channel *channel, const struct source_measurement *measured,
                        const struct source_shape *shape, const struct source_law *law,
                        struct source_outcome *out);

#endif
