/* Watch time, sample numbers and UTC: the one file that maps between them.
 *
 * Watch time is int64 nanoseconds since the ledger's first run began. It is the only time that rules see.
 * Everything that reaches an entry is rounded to whole microseconds first, so that an entry read back gives
 * the same watch time. */
#ifndef BASE_TIME_H
#define BASE_TIME_H

#include "base/status.h"
#include <stdbool.h>
#include <stdint.h>

#define TIME_NS_PER_S INT64_C(1000000000)
#define TIME_NS_PER_US INT64_C(1000)
#define TIME_UTC_SIZE 28 /* "2026-03-01T12:00:00.000000Z" and its terminator */

/* From sample number to watch time: frame `anchor_frame` of the stream is at `anchor_ns`. */
struct time_map {
    uint64_t anchor_frame;
    int64_t anchor_ns;
    double rate_hz; /* frames a second of watch time; the nominal rate until a drift is measured */
};

/* Watch time of a frame, rounded to a whole microsecond. */
int64_t time_of_frame(const struct time_map *map, uint64_t frame);

/* Seconds from nanoseconds and back; time_from_s rounds to a whole microsecond. */
double time_to_s(int64_t ns);
int64_t time_from_s(double seconds);
/* The same of minutes; a million of them and more, and INFINITY, are so long that sums with them stay below
 * INT64_MAX. */
int64_t time_from_minutes(double minutes);

/* The nearest whole microsecond, in nanoseconds. */
int64_t time_round_us(int64_t ns);

/* ISO 8601 with Z and microseconds, from nanoseconds since 1970-01-01T00:00:00Z (proleptic Gregorian, no leap
 * seconds: POSIX.1-2017 section 4.16). Any int64 is a time between the years 1677 and 2262. */
void time_format_utc(int64_t unix_ns, char out[TIME_UTC_SIZE]);

/* Reads "YYYY-MM-DDThh:mm:ss[.ffffff]Z"; anything else is STATUS_BAD_FORMAT, an impossible date or hour
 * STATUS_OUT_OF_RANGE. */
enum status time_parse_utc(const char *text, int64_t *out_unix_ns);

#endif
