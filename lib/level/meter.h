/* Levels of one channel, one a second: SPL and peak from the samples, decidecades (level/decidecades.h).
 *
 * SPL is 10 lg of the mean square, peak 20 lg of the largest magnitude (ISO 18405:2017), both straight from
 * the samples in double precision, about their running mean: that of the first second after a reset, then an
 * average over about 8 s, since a converter's offset is no sound. The peak is that of the samples, not of the
 * wave between them. Seconds are [k rate, (k + 1) rate) in frame numbers.
 *
 * Fast and slow are the greatest levels in the second under the time weightings of IEC 61672-1 (125 ms and 1
 * s, level/time_weighting.h), looked at each millisecond: within 0.04 dB of the continuous maximum. They
 * begin from silence after a reset, so in the first seconds the slow one reads low.
 *
 * Call order: create; reset at the start and after each gap; push; finish before a reset or at the end;
 * destroy. */
#ifndef LEVEL_METER_H
#define LEVEL_METER_H

#include "base/status.h"
#include "level/level.h"
#include "level/moments.h"
#include <stdbool.h>
#include <stdint.h>

#define METER_SHORTEST_S 0.1 /* a second with less sound than this gives no level */

/* The level of one second, in frames of the stream. */
struct found_level {
    uint64_t start_frame; /* of the first frame heard in the second */
    uint64_t known_frame; /* the last frame needed to give it */
    uint32_t frames;      /* heard in the second: the rate, or less beside a gap */
    double spl_db, peak_db;
    double fast_max_db, slow_max_db; /* greatest SPL under fast and slow time weighting, dB re 1 uPa */
    struct moments moments;          /* of the samples, pascals */
    uint32_t n_bands;
    double band_db[LEVEL_MAX_BANDS]; /* NAN where less than 1 / bandwidth of sound was analysed */
    bool relative;
};

struct level_sink {
    void (*take)(void *context, const struct found_level *level);
    void *context;
};

struct meter;

/* rate_hz: a whole number from 8,000 to 1,000,000, else STATUS_BAD_ARGUMENT; STATUS_NO_MEMORY. relative is
 * copied into every level. The caller owns *out. */
enum status meter_create(double rate_hz, bool relative, struct meter **out);
void meter_destroy(struct meter *meter);
/* Forgets the past; next_frame is the number of the next frame pushed. */
void meter_reset(struct meter *meter, uint64_t next_frame);
/* Takes n finite samples in pascals. Levels come at most 0.4 s of sound after their second, in order; they do
 * not depend on how the sound is cut into pushes. */
void meter_push(struct meter *meter, const float *pascals, uint32_t n, const struct level_sink *sink);
/* Gives the seconds still held, the running one too when METER_SHORTEST_S of it was heard. Reset must follow.
 */
void meter_finish(struct meter *meter, const struct level_sink *sink);

#endif
