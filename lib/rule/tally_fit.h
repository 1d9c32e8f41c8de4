/* The loss law that a job's own blows show: pairs the same blow over channels and streams, and fits N to the
 * pairs (sea/fit.h). For lib/rule/tally only.
 *
 * Pairing: impulses that were struck within BLOW_SAME_NS of each other (rule/blows.h), one of each channel.
 * Only ours, from calibrated channels of known range, that are neither clipped, overlapped, refused nor weak.
 * A blow is complete when sound has had time to reach the farthest channel, and 2 s more.
 *
 * The law is one of SEL, in the decidecades that hold 5 to 95 % of the energy of the paired blows: it was
 * fitted on nothing else, and serves nothing else (source_law_covers). Absorption is that of these blows,
 * their energy's mean, and is no part of N. A function of what was pushed. */
#ifndef RULE_TALLY_FIT_H
#define RULE_TALLY_FIT_H

#include "base/status.h"
#include "level/impulse.h"
#include "level/source.h"
#include "sea/absorption.h"
#include <stdbool.h>
#include <stdint.h>

#define TALLY_FIT_POINTS 2048

struct tally_fit;

/* About 350 KiB. sound_speed_m_s: m/s; NAN or 0: what arrives together is one blow. The caller owns *out.
 * STATUS_NO_MEMORY. */
enum status tally_fit_create(const struct absorption *water, double sound_speed_m_s, struct tally_fit **out);
void tally_fit_destroy(struct tally_fit *fit);
/* A new job, perhaps at another place: its law is not known yet. */
void tally_fit_begin_job(struct tally_fit *fit);
/* Takes an impulse that the channel heard at range_m; leaves out what does not serve. */
void tally_fit_push(struct tally_fit *fit, uint32_t stream, double range_m, const struct impulse *impulse);
/* Fits what is complete; about 4 ms for 2,048 levels. True when there is a new law. */
bool tally_fit_update(struct tally_fit *fit);
/* NULL while there is none. Borrowed until the next update or job. */
const struct source_law *tally_fit_get(const struct tally_fit *fit);

/* The decidecades, n from LEVEL_FIRST_BAND, that hold the energy between two shares of the whole (0.05 and
 * 0.95): their outer edges in Hz. False where there is none. */
bool tally_fit_band(const double energy[LEVEL_MAX_BANDS], double from, double to, double *out_low_hz,
                    double *out_high_hz);

#endif
