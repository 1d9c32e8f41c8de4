/* Three numbers about a source that are never mixed (terms of ISO 18405:2017): what was received, what that
 * is at 750 m, and the source level worked back from it; each with its 90 % interval, or without a value and
 * with the reason.
 *
 *   received         as measured, at its range
 *   at 750 m         received - loss(range to 750 m): the range at which ISO 18406:2017 and national limits
 *                    speak of piles
 *   back-calculated  received + loss(1 m to range): source level (dB re 1 uPa m) of an SPL, energy
 *                    source level (dB re 1 uPa2 m2 s) of a SEL
 *
 * No back-calculated level of a pile, which is a line source: in its near field no level of a point stands
 * for it. None of an array off its axis, or nearer than its far field (aperture^2 f / c, Fraunhofer's
 * distance). None of a peak, which does not fall as energy does. A loss law holds for the band it was fitted
 * or set for: one of 100 to 500 Hz says nothing about clicks. */
#ifndef LEVEL_SOURCE_H
#define LEVEL_SOURCE_H

#include "base/status.h"
#include "level/criterion.h"
#include "sea/absorption.h"
#include "sea/fit.h"
#include "sea/loss.h"
#include <stdbool.h>
#include <stdint.h>

#define SOURCE_NORMAL_M 750.0
#define SOURCE_NORMAL_TOLERANCE 0.05
/* Standard deviation of N that was set by people and not fitted: 15 lg r might be 10 or 20 (two standard
 * deviations; common practice, no source). */
#define SOURCE_ASSUMED_N_SPREAD_DB 2.5

enum source_form {
    SOURCE_POINT, /* small against its wavelengths: a charge, a beacon, a single gun */
    SOURCE_LINE,  /* a pile */
    SOURCE_ARRAY  /* guns together, with an axis */
};

struct source_shape {
    enum source_form form;
    double aperture_m; /* array: greatest extent */
    double main_hz;    /* array: where most of its energy lies */
    double lobe_deg;   /* array: so far off the axis its level still counts as on it */
};

/* How levels of one metric in one band fall with range. */
struct source_law {
    enum criterion_metric metric;
    double low_hz, high_hz; /* band that it was fitted or set for */
    struct loss loss;       /* after a fit: the power law with the fitted N */
    double n_spread_db;     /* standard deviation of N, dB a decade */
    double scatter_db;      /* of one level about the law; used without a fit */
    bool is_fitted;         /* then the fit moves levels to 750 m */
    struct fitted fitted;
};

struct source_measurement {
    enum criterion_metric metric;
    double level_db;
    double low_hz, high_hz; /* band of the level */
    double spread_db;       /* standard deviation of calibration, 0 or more */
    bool relative;          /* uncalibrated: dB re full scale */
    bool lower_bound;       /* clipped */
    double range_m;         /* slant; 0, negative or NAN: unknown */
    double off_axis_deg;    /* array: angle between its axis and the way to the hydrophone; NAN unknown */
    double sound_speed_m_s; /* array: for the far field */
};

/* One number, or why there is none. */
struct source_number {
    bool known;
    double db, low_db, high_db; /* 90 % interval; NAN where not known */
    const char *reason;         /* in words, "" where known; never NULL */
};

struct source_numbers {
    enum criterion_metric metric;
    double low_hz, high_hz, range_m, off_axis_deg;
    bool relative, lower_bound;
    struct source_number received, at_750_m, back_calculated;
    bool measured_at_750_m;   /* range within 5 % of 750 m: firm, not extrapolated */
    const char *model;        /* loss_law_text, "" without a law */
    double n_db, n_spread_db; /* NAN where the law has no N */
    bool is_fitted;
};

/* The laws of a sea, one a band, and what to think where there is none. */
#define SOURCE_MAX_LAWS 8
struct source_sea {
    uint32_t n_laws;
    struct source_law
        laws[SOURCE_MAX_LAWS]; /* of SPL or single SEL; the first that covers a frequency holds */
    bool has_water;
    struct absorption water; /* taken instead of the laws' own absorption, at each frequency */
    double n_db;             /* where no law covers: this N, with SOURCE_ASSUMED_N_SPREAD_DB */
};

/* What a level falls by from one range to another under a law, dB, and the standard deviation of that. */
void source_law_between(const struct source_law *law, double from_m, double to_m, double *out_db,
                        double *out_spread_db);

/* What a band's level falls by from one range to another, dB, and the standard deviation of that: spread of N
 * times the decades between; of a fitted law SOURCE_ASSUMED_N_SPREAD_DB more, in squares, for the decades
 * that lie outside the ranges of the fit, where the slope is as unknown as one never fitted. Grows with to_m.
 * context: a struct source_sea, borrowed; the shape of exposure_loss.between (level/exposure.h). */
void source_sea_between(void *context, double frequency_hz, double from_m, double to_m, double *out_db,
                        double *out_spread_db);

/* law may be NULL: none is known. STATUS_OUT_OF_RANGE for a level, band or spread that is not finite, or a
 * law that loss_check refuses; *out is untouched then. */
enum status source_numbers_get(const struct source_measurement *measurement, const struct source_shape *shape,
                               const struct source_law *law, struct source_numbers *out);

/* Whether a law of one band may be used for a level of another: the level's band lies inside, give or take a
 * decidecade. */
bool source_law_covers(const struct source_law *law, double low_hz, double high_hz);
/* The law that a fit gave: power law with its N, spread and absorption. */
struct source_law source_law_of_fit(const struct fitted *fitted, enum criterion_metric metric, double low_hz,
                                    double high_hz);
/* Slant range between two places {east_m, north_m, depth_m}; NAN when one is not finite. */
double source_range_m(const double source[3], const double hydrophone[3]);

/* What the back-calculated number of a metric is called: "source level", "energy source level", "" where
 * there is none; never NULL. */
const char *source_level_text(enum criterion_metric metric);

#endif
