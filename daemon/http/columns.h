/* The columns of the strips of sound, kept for the pages: the last half hour of each stream. */
#ifndef HTTP_COLUMNS_H
#define HTTP_COLUMNS_H

#include "base/status.h"
#include "listen/listen.h"
#include <stddef.h>
#include <stdint.h>

#define COLUMNS_KEPT 7200 /* 30 min at 4 a second */

struct columns;

/* Allocates all that will ever be needed: 0.7 MB a stream. STATUS_NO_MEMORY. The caller owns *out. */
enum status columns_create(uint32_t n_streams, struct columns **out);
void columns_destroy(struct columns *columns);

/* Any thread. STATUS_BAD_ARGUMENT: no such stream (from 1) or band, or time runs backwards. */
enum status columns_push(struct columns *columns, uint32_t stream, const struct column *column);

/* Copies the columns that begin after from_ns and not after to_ns, oldest first, at most max of them (the
 * newest where there are more), levels [n * COLUMN_ROWS] column by column, and the band's edges. Any thread.
 * Returns n. */
size_t columns_read(struct columns *columns, uint32_t stream, uint32_t band, int64_t from_ns, int64_t to_ns,
                    size_t max, int64_t *out_times_ns, uint8_t *out_levels, double *out_low_hz,
                    double *out_high_hz);

uint32_t columns_streams(const struct columns *columns);

#endif
