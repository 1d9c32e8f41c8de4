/* The state of an exposure. For lib/level/exposure*.c only. */
#ifndef LEVEL_EXPOSURE_INNER_H
#define LEVEL_EXPOSURE_INNER_H

#include "level/exposure.h"
#include "level/exposure_buckets.h"

#define DAY_S 86400.0
#define RECEIVED_WIDTH_S 60.0
#define PLACED_WIDTH_S 10.0
#define RECENT 20u
#define BARE_BAND                                                                                            \
    13u /* 200 Hz: how sound without bands is moved; most of the energy of a blow lies there                 \
         */

/* Transmission over lg range, for receivers that flee: energy at the range over that at the reference. */
#define TABLE_A_DECADE 192u
#define TABLE_N (6u * TABLE_A_DECADE + 1u)

/* The loudest sound of the job, of one criterion with a single-impulse metric. */
struct loudest {
    double received_db; /* weighted; or Pa s */
    double placed_db;   /* weighted, at the reference; -INFINITY: none with a range */
    double level_db;    /* received, unweighted, of the one with placed_db */
    double range_m;
    double energy[LEVEL_MAX_BANDS]; /* received, uPa2 s */
};

/* What is worked out once for each criterion. */
struct prepared {
    struct criterion criterion;
    double factor[LEVEL_MAX_BANDS];
    int quiet; /* its place among those with effective quiet; -1: none */
    double latest_db;
    struct loudest loudest;
};

/* A window's sum, kept until a sound comes or time moves on to the next bucket. */
struct window_sum {
    bool valid;
    uint64_t pushes;
    int64_t from, to; /* indices */
    struct bucket sum;
};

struct exposure {
    uint32_t n;
    struct prepared *items; /* [n], owned */
    enum criterion_sound sound;
    double reference_m, level_spread_db;
    int64_t day_start_ns;
    struct exposure_loss loss;
    double centre_hz[LEVEL_MAX_BANDS];
    double *table; /* [TABLE_N * LEVEL_MAX_BANDS], owned; filled for the first receiver that flees */
    bool table_ready;

    struct buckets received_ring, placed_ring; /* placed: at the reference */
    struct buckets placed_job;
    struct bucket received_job;
    int64_t job_first_ns; /* of received_job; -1: none */
    struct window_sum received_sums[ACCUMULATE_COUNT], placed_sums[ACCUMULATE_COUNT];

    struct bucket recent[RECENT]; /* the last sounds with a range, at the reference */
    int64_t recent_ns[RECENT];
    uint32_t n_recent, next_recent;
    int64_t latest_ns;
    uint64_t pushes;
};

/* The buckets of a window and the indices in it, [from, to]. */
struct window_span {
    const struct buckets *buckets;
    int64_t from, to;
};

/* placed: at the reference; else as received, of which the job has no buckets (NULL). */
struct window_span exposure_span(const struct exposure *exposure, enum criterion_window window, bool placed,
                                 int64_t now_ns);
/* Sum of the window; valid until the next call that is not a get. */
const struct bucket *exposure_sum(struct exposure *exposure, enum criterion_window window, bool placed,
                                  int64_t now_ns);

/* Loss from one range to another by the law in force. */
double exposure_between_db(const struct exposure *exposure, uint32_t band, double from_m, double to_m,
                           double *out_spread_db);
/* Energy of a bucket, weighted for a criterion, after each band was multiplied by t; t NULL: as it is. */
double exposure_energy(const struct prepared *item, const struct bucket *bucket, const double *t);
/* A loudest sound's level at a range by the law in force, and the spread of the loss. */
double exposure_loudest_db(const struct exposure *exposure, const struct prepared *item,
                           const struct loudest *loudest, double range_m, double *out_spread_db);

#endif
