/* Energy by time, in buckets of equal width: what windows are summed from. For lib/level/exposure*.c only. */
#ifndef LEVEL_EXPOSURE_BUCKETS_H
#define LEVEL_EXPOSURE_BUCKETS_H

#include "base/status.h"
#include "level/level.h"
#include <stdbool.h>
#include <stdint.h>

#define BUCKET_QUIET 8 /* EXPOSURE_MAX_QUIET */

/* Energies in uPa2 s. */
struct bucket {
    double energy; /* broadband */
    double band[LEVEL_MAX_BANDS];
    double quiet[BUCKET_QUIET]; /* weighted, of sounds above the effective quiet of the k-th criterion that
                                   has one */
    double amount;              /* impulses, or seconds of continuous sound */
    double moment_s;            /* energy times seconds after the buckets' origin */
    double lg_range;            /* energy times lg(range in m) */
    double first_s;             /* time of its first sound after the origin; of an empty bucket not read */
    uint32_t n, n_unweighted, n_clipped, n_without_range;
    uint32_t n_quiet[BUCKET_QUIET];
    int32_t top_band;
};

/* A ring that moves on with time, or a row that begins with the first sound and whose last bucket takes all
 * that comes later. */
struct buckets {
    struct bucket *items; /* owned */
    uint32_t n;
    double width_s;
    bool ring;
    int64_t origin_ns; /* start of bucket 0: ring: given; row: the first sound's time */
    int64_t newest;    /* index of the latest bucket with a sound; not read while empty */
    bool empty;
};

/* STATUS_NO_MEMORY. */
enum status buckets_create(struct buckets *buckets, uint32_t n, double width_s, bool ring, int64_t origin_ns);
void buckets_destroy(struct buckets *buckets);
void buckets_reset(struct buckets *buckets);
/* The bucket for a sound at that time, cleared if it is new; NULL for one too old for the ring. */
struct bucket *buckets_open(struct buckets *buckets, int64_t time_ns);
/* The bucket with that index; NULL when it has no sound or is not held. */
const struct bucket *buckets_find(const struct buckets *buckets, int64_t index);
/* Index of the bucket that a time falls in. */
int64_t buckets_index(const struct buckets *buckets, int64_t time_ns);
/* Oldest index that can be held. */
int64_t buckets_oldest(const struct buckets *buckets);
/* Seconds after the origin. */
double buckets_seconds(const struct buckets *buckets, int64_t time_ns);

/* Adds b to a. */
void bucket_add(struct bucket *a, const struct bucket *b);

#endif
