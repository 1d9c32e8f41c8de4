/* How far each channel is from the source: from the settings' geometry, or from positions as they come.
 *
 *   nothing moves   place_m from the source's reference point, ahead, to starboard, down: a fixed range
 *   source moves    a stream with a position of its own stays where it is; one without moves with the source
 *   array moves     a stream without a position of its own is carried by the vessel: place_m from its
 * antenna, along its heading; the source stays at the position that the settings or a note give
 *
 * A stream with a position of its own has place_m from there, north, east, down. Depths count from the
 * source's reference point. Horizontal offsets turn with position_ahead_deg; without it a range that needs
 * one is unknown. What moves grows old: a position older than oldest_s gives no range. What stays does not.
 * Positions are taken as they are, and not carried on between two. */
#ifndef PLACE_RANGES_H
#define PLACE_RANGES_H

#include "place/position.h"
#include <stdbool.h>
#include <stdint.h>

#define RANGES_MAX_STREAMS 8
#define RANGES_MAX_CHANNELS 16
#define RANGES_GAP_S 10.0    /* a position is worth an entry when the last one is so old ... */
#define RANGES_CHANGE 0.01   /* ... or when it changes a range by more than this part of it */
#define RANGES_OLDEST_S 60.0 /* default: at 2.5 m/s that is 150 m */

enum ranges_moves { RANGES_NOTHING, RANGES_SOURCE, RANGES_ARRAY };

struct ranges_stream {
    bool has_position; /* of its own: it stays there */
    double latitude_deg, longitude_deg;
    double place_m[RANGES_MAX_CHANNELS][3]; /* NAN: unknown */
};

/* All zeros: no stream, and nothing is said of ranges. */
struct ranges_setup {
    enum ranges_moves moves;
    double oldest_s;
    double source_offset_m[2]; /* where it moves: from the antenna, ahead and to starboard */
    bool has_source;           /* where it stays: the settings' position of it */
    double latitude_deg, longitude_deg;
    uint32_t n_streams; /* of them are there */
    struct ranges_stream streams[RANGES_MAX_STREAMS];
};

/* Plain data. */
struct ranges {
    struct ranges_setup setup;
    bool has_source, has_vessel; /* a position of it has come */
    struct position source, vessel;
};

void ranges_reset(struct ranges *ranges, const struct ranges_setup *setup);

/* Takes a position, whoever gave it; one that position_check refuses or that is older than the one of the
 * same thing is left out. */
void ranges_take(struct ranges *ranges, const struct position *position);
/* A job has ended: where people said its source to be holds no longer. */
void ranges_end_job(struct ranges *ranges);

/* Slant range to a channel (both from 1) at a watch time; NAN where unknown. *out_from (if not NULL) says how
 * it is known, or why not. */
double ranges_get(const struct ranges *ranges, uint32_t stream, uint32_t channel, int64_t now_ns,
                  enum range_from *out_from);

/* Whether a position should be taken and entered, or is too like the one before: see RANGES_GAP_S. */
bool ranges_wants(const struct ranges *ranges, const struct position *position);

#endif
