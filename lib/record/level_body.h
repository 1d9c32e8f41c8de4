/* The body of a minute's level entry. For lib/record only. */
#ifndef RECORD_LEVEL_BODY_H
#define RECORD_LEVEL_BODY_H

#include "base/status.h"
#include "base/text.h"
#include "flow.h"
#include <stdint.h>

#define LEVEL_HOUR_SECONDS 3600u

/* Levels exceeded 5, 50 and 95 % of the seconds, their energy mean, and the sound behind them. */
struct level_statistics {
    double l05_db, l50_db, l95_db, mean_db, seconds;
};

/* The seconds of one channel within the last hour of watch time. */
struct level_hour {
    uint32_t n, oldest; /* in the rings */
    int64_t start_ns[LEVEL_HOUR_SECONDS];
    double spl_db[LEVEL_HOUR_SECONDS];
    double seconds[LEVEL_HOUR_SECONDS];
    double sorted[LEVEL_HOUR_SECONDS]; /* the SPLs in rising order */
};

/* Takes a second, and lets go of those that began an hour or more before it. An all-zero hour is empty. */
void level_hour_take(struct level_hour *hour, const struct level *level);
/* All NAN and 0 s for an empty one. */
void level_hour_get(const struct level_hour *hour, struct level_statistics *out);

/* The body of n level seconds (1 .. 60) of one channel, oldest first: every measure of a second an array, so
 * that a minute is one entry; then the minute's and the last hour's statistics, and for research the kurtosis
 * of the minute with its window and band. All levels have the channel, the bands and the mark `relative` of
 * the first. hour may be NULL. */
enum status level_body(uint32_t run, uint32_t stream, uint64_t counter, const struct level *levels,
                       uint32_t n, const struct level_statistics *hour, struct text *out);

#endif
