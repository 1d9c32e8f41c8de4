/* What a quieting measure (a bubble curtain or another) takes off, from impulses with and without it, and a
 * warning when that falls during the job.
 *
 * Insertion loss = mean level without - mean level with the measure, in each decidecade and broadband (ISO
 * 18405:2017; ISO 7447:2024 measures it in place; its text was not open to us), with Welch's 90 % interval
 * (Biometrika 34, 28 (1947)): levels scatter alike in dB, so their mean in dB is taken and one loud impulse
 * does not carry it. Where every impulse that counts was fed with its energy, each level is first lowered by
 * 10 lg(energy / 1 kJ): matched (SEL goes with the energy of a blow: common practice, no source). The
 * interval knows scatter only, not what else changed in between: levels must be of one range, or moved to
 * one.
 *
 * A fall of it: the broadband level with the measure on, matched where fed, against its first 50 impulses, by
 * Page's test (level/page.h) for a rise of 3 dB. Mean, spread and slow changes of those 50 are not known
 * exactly, so k is larger by 2 standard deviations of their mean and levels are scaled by their spread's
 * upper 95 % bound; a mean run of 100,000 impulses without warning would follow if the levels were normal
 * (common practice, no source).
 *
 * Plain data; no allocation. */
#ifndef LEVEL_QUIETING_H
#define LEVEL_QUIETING_H

#include "base/status.h"
#include "level/level.h"
#include "level/page.h"
#include "level/weighting.h"
#include <stdbool.h>
#include <stdint.h>

#define QUIETING_LEAST_IMPULSES 5
#define QUIETING_BASE_IMPULSES 50
#define QUIETING_FALL_DB 3.0
#define QUIETING_RUN_LENGTH 1e5

struct quieting_impulse {
    bool on;                         /* the measure is at work */
    double sel_db;                   /* broadband, dB re 1 uPa2 s */
    double energy_kj;                /* fed; NAN where not */
    uint32_t n_bands;                /* decidecades from LEVEL_FIRST_BAND up, at most LEVEL_MAX_BANDS */
    double band_db[LEVEL_MAX_BANDS]; /* NAN where not measured */
};

/* Running mean and sum of squared deviations (Welford, Technometrics 4, 419 (1962)). */
struct quieting_sum {
    uint64_t n;
    double mean, square;
};

struct quieting {
    struct quieting_sum broadband[2][2];             /* [on][matched] */
    struct quieting_sum band[2][2][LEVEL_MAX_BANDS]; /* the same */
    struct quieting_sum base[2];                     /* [matched]: the first impulses with the measure on */
    struct page page[2];
    bool falling[2];
};

/* One insertion loss, dB; NAN all three where there are too few impulses. */
struct quieting_loss {
    double db, low_db, high_db; /* 90 % interval */
};

struct insertion_loss {
    bool matched; /* for energy */
    uint64_t n_off, n_on;
    struct quieting_loss broadband, band[LEVEL_MAX_BANDS];
    double without_db[LEVEL_MAX_BANDS]; /* mean level without the measure; matched: at 1 kJ; NAN: too few */
    uint32_t n_bands;
};

void quieting_reset(struct quieting *quieting);
/* STATUS_OUT_OF_RANGE, and nothing is taken, for a sel_db that is not finite or too many bands. */
enum status quieting_push(struct quieting *quieting, const struct quieting_impulse *impulse);
/* STATUS_NOT_FOUND before QUIETING_LEAST_IMPULSES with and without the measure; *out is untouched then. */
enum status quieting_get(const struct quieting *quieting, struct insertion_loss *out);
/* Whether it falls now; out_db (may be NULL): by how much, over the impulses since it began; 0 where not. */
bool quieting_falls(const struct quieting *quieting, double *out_db);

/* What an insertion loss takes off the broadband level of n decidecades from LEVEL_FIRST_BAND up, as a
 * hearing group hears it (weighted at the bands' centres; NULL: unweighted). Bands that are NAN in level_db
 * have no energy; NAN in loss_db takes nothing off. NAN for n above LEVEL_MAX_BANDS or where there is no
 * energy. */
double quieting_reduction_db(const double *level_db, const double *loss_db, uint32_t n,
                             const struct weighting *weighting);

#endif
