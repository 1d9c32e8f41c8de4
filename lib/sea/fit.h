/* Fits N of N lg r to levels heard at ranges in a ratio of 4 or more, and moves levels along the fit.
 *
 * Model, with x = lg(r / 750 m), a the absorption and s the known change of the source's level:
 *   L - s + a r = A(source) - N x + C x^2 + error
 * A is free for each source level that points share: a soft start heard on several channels at once needs no
 * knowledge of how it grows. C is for levels only (N is reported of the straight law): the true sea is no
 * power law; how much it bends is learned where the data tell (six places or more), held near 0 by a prior of
 * 5 dB a decade squared, and what stays unknown of it goes into the interval. Without enough range the fit is
 * refused: N and A cannot be told apart.
 *
 * Method: least absolute deviations, then Tukey's bisquare (k = 4.685), both by reweighted least squares, the
 * scatter being 1.4826 times the median absolute residual (Beaton and Tukey, Technometrics 16, 147 (1974);
 * Holland and Welsch, Commun. Stat. A 6, 813 (1977)), so that a fifth of wrong points (an echo, another's
 * blow) do little. Intervals: points within a twentieth of a decade of range count as one place, whose errors
 * go together (interference, a bottom echo, calibration); the covariance is the jackknife over places (Tukey
 * 1958; CR3 of Cameron and Miller, J. Hum. Resour. 50, 317 (2015)) with Student's t. With two or three places
 * there is nothing to learn from, and a place is taken to differ by 1 dB (common practice, no source).
 *
 * Call order: create; push; get at any time; reset for a new source or sea; destroy. */
#ifndef SEA_FIT_H
#define SEA_FIT_H

#include "base/status.h"
#include <stdbool.h>
#include <stdint.h>

#define FIT_LEAST_RATIO 4.0
/* Hydrophones at 750 and 3,000 m, some way down, stand at slant ranges in a ratio a little below 4. */
#define FIT_RATIO_TOLERANCE 0.002
#define FIT_LEAST_POINTS 10
#define FIT_REFERENCE_M 750.0

struct fit_point {
    uint64_t source;  /* points with the same number, pushed one after the other, share one source level: an
                         impulse heard on several channels; or the same for all, of a source that is steady or
                         whose change is in source_db */
    double source_db; /* known change of the source's level, e.g. 10 lg of the energy fed / full energy */
    double range_m;
    double level_db;
};

/* Straight law and bend, with all that is needed to move a level. Plain data. */
struct fitted {
    double n_db, n_low_db, n_high_db;   /* N and its 90 % interval, dB a decade */
    double level_db;                    /* at 750 m where source_db is 0; the mean over source levels */
    double level_low_db, level_high_db; /* holds 90 % of single impulses there, not only their mean */
    double scatter_db;                  /* robust standard deviation of one point about the law */
    double range_ratio; /* highest to lowest, within the source level that the median point belongs to */
    double nearest_m, farthest_m; /* of the points that count */
    uint32_t n_points, n_places;
    double absorption_db_m;
    double slope_db, bend_db; /* of the law that moves levels: slope_db x + bend_db x^2 */
    double variance[3][3];    /* of its level, slope and bend */
    double quantile;          /* Student's t of 95 % */
};

struct fit;

/* Holds the last `capacity` points (10 to 100,000). absorption_db_m, 0 or more, is not fitted. The caller
 * owns *out. STATUS_BAD_ARGUMENT, STATUS_NO_MEMORY. */
enum status fit_create(uint32_t capacity, double absorption_db_m, struct fit **out);
void fit_destroy(struct fit *fit);
void fit_reset(struct fit *fit);
/* For the points that are held and those to come. STATUS_BAD_ARGUMENT. */
enum status fit_set_absorption(struct fit *fit, double absorption_db_m);
/* STATUS_OUT_OF_RANGE, and the point is left out, for a range not above 0 or numbers that are not finite. */
enum status fit_push(struct fit *fit, const struct fit_point *point);
/* Fits; some milliseconds for 4,000 points. STATUS_NOT_FOUND: fewer than FIT_LEAST_POINTS points that share a
 * source level with another. STATUS_OUT_OF_RANGE: the ranges are in a ratio below FIT_LEAST_RATIO (by more
 * than FIT_RATIO_TOLERANCE of it) for more than half of the points; a place with fewer than three points in
 * and next to it does not count. *out is untouched then. */
enum status fit_get(struct fit *fit, struct fitted *out);

/* What a level falls by from one range to another, dB, and the standard deviation of that. */
void fitted_between(const struct fitted *fitted, double from_m, double to_m, double *out_db,
                    double *out_spread_db);
/* The level at to_m of a sound heard with level_db at range_m, and its 90 % interval, which holds the scatter
 * of the one point. */
void fitted_move(const struct fitted *fitted, double range_m, double level_db, double to_m, double *out_db,
                 double *out_low_db, double *out_high_db);

#endif
