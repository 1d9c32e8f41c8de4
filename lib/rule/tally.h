/* What the source's sound adds up to: takes the watch's outcomes, keeps the sums of each job against the
 * criteria that the site chose, and says them as outcomes of its own, each minute in which something was
 * added and at the end of a job.
 *
 * The range of each sound is what the watch said of it. Without one only what was received is summed.
 *
 * Of continuous sound the seconds are summed in which the source was said to sound, at some moment of them,
 * by what was known then; of one channel of each stream. Of impulses: only those that the watch called ours
 * are summed, only on calibrated channels, of the reference channel of each stream (rule/blows.h); another
 * project's never are. What channels beside it measure says how sound falls with range: once a fit stands
 * (rule/tally_fit.h), it moves levels to 750 m and to the distances of criteria instead of the N that was
 * set, in the band it was fitted on, until the job ends; what was summed before stays as it was moved then.
 * State is a function of the outcomes taken: taking them again from a ledger rebuilds it. Call order: create;
 * take every outcome of the watch in order; destroy. */
#ifndef RULE_TALLY_H
#define RULE_TALLY_H

#include "base/status.h"
#include "flow.h"
#include "level/calibration.h"
#include "level/criterion.h"
#include "level/exposure.h"
#include "level/source.h"
#include "level/together.h"
#include "sea/absorption.h"
#include <stdint.h>

#define TALLY_MAX_STREAMS 8

struct tally_setup {
    const struct criteria *criteria; /* those to be judged, all of them; borrowed */
    enum criterion_sound sound;      /* what the job makes: set, never guessed */
    uint32_t n_streams;
    double range_m[TALLY_MAX_STREAMS][FLOW_MAX_CHANNELS]; /* slant, from the source; NAN where unknown. For
                                                           * sound of whose range the watch said nothing */
    enum channel_role role[TALLY_MAX_STREAMS][FLOW_MAX_CHANNELS];
    uint32_t reference[TALLY_MAX_STREAMS]; /* whose seconds of continuous sound are summed; 0: the first that
                                              comes */
    struct source_shape shape;
    double loss_n_db, loss_n_spread_db;  /* N lg r; how unsure N is, one standard deviation */
    struct absorption water;             /* of the sea: added to N lg r at each frequency */
    double sound_speed_m_s;              /* for pairing blows (rule/blows.h); 0: unknown */
    double level_spread_db;              /* of calibration and place */
    double scatter_db;                   /* of one impulse about the loss law */
    double zone_edge_m;                  /* of the permit's widest finite zone; NAN where there is none */
    double soft_start_s;                 /* the permit's least; 0: none, then there is no early warning */
    int64_t day_start_ns;                /* watch time of any midnight where days are counted */
    uint32_t n_others;                   /* other sources at work; 0: none */
    const struct together_other *others; /* copied */
    double inner_m;                      /* of together_setup; read where there are others */
};

/* The level seconds of one channel, oldest first; borrowed. */
struct tally_minute {
    int64_t watch_ns;
    uint32_t run, stream, n;
    const struct level *seconds;
};

struct tally;
struct watch;

/* Allocates all of it now: 42 MiB a stream, of which 20 are resident from the start and the rest, the
 * impulses that are kept so that they can be counted again, as a job comes to have them, up to 131,072
 * (continuous sound: 11 MiB; measured in tests/unit/tally.c). STATUS_BAD_ARGUMENT for a setup that
 * exposure_create refuses or without criteria; STATUS_NO_MEMORY. The caller owns *out. */
enum status tally_create(const struct tally_setup *setup, struct tally **out);
void tally_destroy(struct tally *tally);
/* Takes one outcome; what it says goes to the sink, after the outcome itself, at its time. */
enum status tally_take(struct tally *tally, const struct outcome *outcome, const struct outcome_sink *sink);
/* The run has ended: what was added since the last minute is said. */
enum status tally_finish(struct tally *tally, int64_t watch_ns, const struct outcome_sink *sink);

/* Rebuilding from a ledger. While it is silent it sums and says nothing, and what counts as said is what
 * tally_set_said tells: a `finding` of its own that the ledger holds, in its place among what is taken.
 * Continuous sound also needs the seconds of the `level` entries, as events: they may come a minute late,
 * since each belongs to a job by its own time. */
void tally_set_silent(struct tally *tally, bool silent);
void tally_set_said(struct tally *tally, const struct outcome *finding);
bool tally_wants_levels(const struct tally *tally);
/* Of continuous sound takes a minute's entry of levels (record/minute.h) at its time and says what it adds:
 * so the sums are those of the entries before them. Each second takes the range that the watch knows then. */
enum status tally_take_minute(struct tally *tally, const struct watch *watch,
                              const struct tally_minute *minute, const struct outcome_sink *sink);
/* Says now what was added since it was last said: when that was is known from a ledger alone, for what comes
 * first in a minute is often a second of sound, which has no entry of its own. */
void tally_say(struct tally *tally, int64_t watch_ns, const struct outcome_sink *sink);

#endif
