/* Exposure: how much sound an animal has received, against each criterion; how far away it would have had to
 * be; and how much more it can take.
 *
 * Cumulative SEL: 10 lg sum(10^(L_n / 10)) over the window, weighted in decidecades (level/weighting.h); N
 * equal strikes add 10 lg N (ISO 18406:2017).
 *
 * Windows. Job: from the last exposure_begin_job. Day: from midnight (day_start_ns). 24 h: the last 24 hours
 * at any moment, in buckets of 60 s (received) and 10 s (at a range): up to one bucket more may count.
 *
 * Effective quiet. Where the criterion has one, a sound whose level at the receiver (with the criterion's
 * weighting; SEL of an impulse, SPL of continuous sound) is below it is not accumulated. Received sums judge
 * each sound, sums at a range the mean of each 10 s.
 *
 * Received is at the hydrophone: all that is known while the range is not. At a range r, L(r) = L(R) - loss
 * from R to r, band by band, R being the range of each sound when it was heard.
 *
 * A receiver that flees starts at r at the first sound of the window and swims away at v: r + v (t -
 * t_first). Its distance to a criterion is the start range from which it just reaches it (common practice of
 * assessments, no source).
 *
 * Intervals hold 90 %: 1.645 standard deviations, the level's spread and the loss's from R to r added in
 * squares. The loss's is the mean over bands, by their energy; for a receiver that flees, at its start.
 *
 * Single-impulse metrics (peak, SEL single, SPL) take the loudest of the job; what share of impulses exceeds
 * a limit is not judged here. A peak is moved like the energy of its impulse. An SPL over 125 ms or 1 s is
 * SEL - 10 lg(that time), or over T90 where that is longer; weighting adds to an SPL what it adds to the SEL.
 * A positive impulse is compared as received and has no distance: it falls otherwise than energy.
 *
 * One object for impulsive sound and one for continuous: they have criteria of their own. Sums are in double
 * precision. Memory does not grow with time (about 10 MiB), and the state is a function of what was pushed:
 * pushing the same sounds again, from the entries, rebuilds it.
 *
 * Call order: create; push, begin_job, set_loss and get as they come; destroy. */
#ifndef LEVEL_EXPOSURE_H
#define LEVEL_EXPOSURE_H

#include "base/status.h"
#include "level/criterion.h"
#include "level/impulse.h"
#include "level/level.h"
#include <stdbool.h>
#include <stdint.h>

#define EXPOSURE_NEAREST_M 1.0
#define EXPOSURE_FARTHEST_M 1e6
#define EXPOSURE_MAX_QUIET 8       /* criteria with an effective quiet */
#define EXPOSURE_MOST_LEFT 100000u /* that many, or more */
#define EXPOSURE_SPREADS 1.6448536 /* standard deviations to the bounds of a 90 % interval */

/* How a level falls between two ranges, dB, and the standard deviation of that, at a frequency. Must grow
 * with to_m; outside the band that it was fitted for it must be another law, not an extension. */
struct exposure_loss {
    void (*between)(void *context, double frequency_hz, double from_m, double to_m, double *out_db,
                    double *out_spread_db); /* NULL: n_db lg(to / from) */
    void *context;                          /* borrowed; when what it says has changed, call set_loss again */
    double n_db, n_spread_db;               /* dB a decade of range */
};

struct exposure_setup {
    uint32_t n_criteria; /* 1 to CRITERIA_MAX; copied */
    const struct criterion *criteria;
    enum criterion_sound sound; /* impulsive or continuous: criteria of the other kind are not judged */
    enum band_weighting how;
    double reference_m;     /* sums are kept at this range, e.g. 750 */
    int64_t day_start_ns;   /* watch time of any midnight where days are counted */
    double level_spread_db; /* standard deviation of a level: calibration, position */
    struct exposure_loss loss;
};

/* One impulse, or up to a minute of continuous sound. Levels in dB re 1 uPa2 s, 1 uPa; NAN: not measured. */
struct exposure_sound {
    int64_t time_ns;
    double seconds; /* of continuous sound: its length; of an impulse: T90, NAN where not measured */
    double range_m; /* from source to hydrophone; NAN or 0: not known, received sums only */
    double sel_db;
    double spl_db; /* over `seconds` */
    double peak_db, peak_to_peak_db;
    double positive_impulse_pa_s;
    uint32_t n_bands; /* decidecades from LEVEL_FIRST_BAND up; 0: none, then no weighted sum grows */
    double band_sel_db[LEVEL_MAX_BANDS];
    bool relative;   /* refused */
    bool clipped;    /* levels are lower bounds */
    bool before_job; /* it sounded before the job began: it counts for the day and 24 h only */
};

/* Against one criterion now. */
struct exposure_state {
    double level_db;        /* received: sum of the window, or the loudest of the job (positive impulse: in
                               Pa s); -INFINITY (0 Pa s): nothing yet */
    double at_reference_db; /* the same at reference_m, of sounds whose range is known; -INFINITY: none yet;
                               NAN: a positive impulse */
    double latest_db;       /* the last sound, received; weighted; NAN where it was not measured */
    bool reached;           /* level_db is at or above the criterion's value */
    uint64_t n;             /* sounds in the window */
    uint64_t n_quiet;       /* of them below effective quiet */
    uint64_t n_unweighted;  /* of them without bands: a weighted sum lacks them */
    uint64_t n_clipped, n_without_range;
    int top_band;      /* highest decidecade (n) with energy in the window; what is above was not measured */
    int64_t first_ns;  /* of the window's sounds; -1: none */
    int64_t resets_ns; /* when time next takes sounds away (midnight; the first of 24 h); -1: never */
};

struct exposure_level {
    double level_db, low_db, high_db;
};

/* 0: not reached at EXPOSURE_NEAREST_M; INFINITY: beyond EXPOSURE_FARTHEST_M. */
struct exposure_distance {
    double distance_m, low_m, high_m;
};

/* Impulses (continuous: seconds) like the last 20 until the criterion is reached; EXPOSURE_MOST_LEFT: that
 * many or more. What leaves a window of 24 h meanwhile is not counted on. */
struct exposure_left {
    uint32_t left, low, high;
};

struct exposure;

/* STATUS_BAD_ARGUMENT for a setup outside what is said above, a criterion that criterion_check refuses or
 * more than EXPOSURE_MAX_QUIET with effective quiet; STATUS_NO_MEMORY. The caller owns *out. */
enum status exposure_create(const struct exposure_setup *setup, struct exposure **out);
void exposure_destroy(struct exposure *exposure);
/* Forgets all sounds. */
void exposure_reset(struct exposure *exposure);
/* Makes `to` what `from` is now. Both are of the same setup. */
void exposure_copy(const struct exposure *from, struct exposure *to);
/* Another law from now on. What was summed stays as it was brought to reference_m: rebuild for another
 * answer. */
enum status exposure_set_loss(struct exposure *exposure, const struct exposure_loss *loss);
/* A new job: its sums and loudest impulses start anew. */
void exposure_begin_job(struct exposure *exposure);

/* STATUS_OUT_OF_RANGE, and nothing is summed: a relative level, a SEL that is not finite, a negative range,
 * n_bands or continuous seconds (0 to 60) out of range. Times may run back by up to 24 h. */
enum status exposure_push(struct exposure *exposure, const struct exposure_sound *sound);

/* Sounds from what entries hold. band_sel_db: SEL of decidecades, NULL for none; impulse->band_sel_db where
 * it has them. A refused impulse has no levels and is then refused by push. */
void exposure_of_impulse(const struct impulse *impulse, uint32_t n_bands, const double *band_sel_db,
                         double range_m, struct exposure_sound *out);
void exposure_of_level(const struct level *level, double range_m, struct exposure_sound *out);

/* Each: STATUS_NOT_FOUND when the criterion judges other sound, or (all but exposure_get) when no sound of
 * the window has a known range, or its metric is the positive impulse; STATUS_BAD_ARGUMENT for a wrong index,
 * range or speed; *out is untouched then. `criterion` counts from 0 in the setup's order. flee_m_s 0: the
 * receiver stays; it counts for cumulative SEL only. now_ns: watch time. */
enum status exposure_get(struct exposure *exposure, uint32_t criterion, int64_t now_ns,
                         struct exposure_state *out);
/* The level of a receiver at, or fleeing from, range_m (EXPOSURE_NEAREST_M to EXPOSURE_FARTHEST_M). */
enum status exposure_get_at(struct exposure *exposure, uint32_t criterion, double range_m, double flee_m_s,
                            int64_t now_ns, struct exposure_level *out);
/* Where that level is the criterion's value: found outwards or inwards from where the sounds were heard. */
enum status exposure_get_distance(struct exposure *exposure, uint32_t criterion, double flee_m_s,
                                  int64_t now_ns, struct exposure_distance *out);
/* At range_m, say a zone's edge. Cumulative SEL only, else STATUS_NOT_FOUND. */
enum status exposure_get_left(struct exposure *exposure, uint32_t criterion, double range_m, double flee_m_s,
                              int64_t now_ns, struct exposure_left *out);

#endif
