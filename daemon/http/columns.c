/* Columns of the strips of sound: one ring a band, under one short lock. */
#include "http/columns.h"
#include <pthread.h>
#include <stdlib.h>
#include <string.h>

struct strip {
    double low_hz, high_hz;
    uint64_t n_pushed;
    int64_t times_ns[COLUMNS_KEPT];
    uint8_t levels[COLUMNS_KEPT][COLUMN_ROWS];
};

struct columns {
    pthread_mutex_t lock;
    uint32_t n_streams;
    struct strip (*strips)[COLUMN_BANDS];
};

enum status columns_create(uint32_t n_streams, struct columns **out)
{
    struct columns *columns = calloc(1, sizeof *columns);
    if (!columns)
        return STATUS_NO_MEMORY;
    columns->strips = calloc(n_streams ? n_streams : 1, sizeof *columns->strips);
    if (!columns->strips) {
        free(columns);
        return STATUS_NO_MEMORY;
    }
    columns->n_streams = n_streams;
    pthread_mutex_init(&columns->lock, NULL);
    *out = columns;
    return STATUS_OK;
}

void columns_destroy(struct columns *columns)
{
    if (!columns)
        return;
    pthread_mutex_destroy(&columns->lock);
    free(columns->strips);
    free(columns);
}

static struct strip *find_strip(struct columns *columns, uint32_t stream, uint32_t band)
{
    if (stream < 1 || stream > columns->n_streams || band >= COLUMN_BANDS)
        return NULL;
    return &columns->strips[stream - 1][band];
}

enum status columns_push(struct columns *columns, uint32_t stream, const struct column *column)
{
    struct strip *strip = find_strip(columns, stream, column->band);
    if (!strip)
        return STATUS_BAD_ARGUMENT;
    enum status status = STATUS_OK;
    pthread_mutex_lock(&columns->lock);
    size_t at = strip->n_pushed % COLUMNS_KEPT;
    if (strip->n_pushed > 0 && strip->times_ns[(strip->n_pushed - 1) % COLUMNS_KEPT] >= column->start_ns)
        status = STATUS_BAD_ARGUMENT;
    else {
        strip->times_ns[at] = column->start_ns;
        memcpy(strip->levels[at], column->levels, COLUMN_ROWS);
        strip->low_hz = column->low_hz;
        strip->high_hz = column->high_hz;
        strip->n_pushed++;
    }
    pthread_mutex_unlock(&columns->lock);
    return status;
}

/* The number of the first kept column that is later than `ns`; columns are in order of time. */
static uint64_t first_after(const struct strip *strip, int64_t ns)
{
    uint64_t low = strip->n_pushed > COLUMNS_KEPT ? strip->n_pushed - COLUMNS_KEPT : 0;
    uint64_t high = strip->n_pushed;
    while (low < high) {
        uint64_t middle = low + (high - low) / 2;
        if (strip->times_ns[middle % COLUMNS_KEPT] > ns)
            high = middle;
        else
            low = middle + 1;
    }
    return low;
}

size_t columns_read(struct columns *columns, uint32_t stream, uint32_t band, int64_t from_ns, int64_t to_ns,
                    size_t max, int64_t *out_times_ns, uint8_t *out_levels, double *out_low_hz,
                    double *out_high_hz)
{
    struct strip *strip = find_strip(columns, stream, band);
    if (!strip || to_ns <= from_ns)
        return 0;
    pthread_mutex_lock(&columns->lock);
    uint64_t first = first_after(strip, from_ns), end = first_after(strip, to_ns);
    if (end - first > max)
        first = end - max;
    for (uint64_t i = first; i < end; i++) {
        size_t at = i % COLUMNS_KEPT;
        out_times_ns[i - first] = strip->times_ns[at];
        memcpy(out_levels + (i - first) * COLUMN_ROWS, strip->levels[at], COLUMN_ROWS);
    }
    *out_low_hz = strip->low_hz;
    *out_high_hz = strip->high_hz;
    pthread_mutex_unlock(&columns->lock);
    return (size_t)(end - first);
}

uint32_t columns_streams(const struct columns *columns)
{
    return columns->n_streams;
}
