/* From outcome to the lines of the ledger: the one way that the daemon, the scan and a rerun take. Levels are
 * gathered by the minute, a `run` outcome gets its facts, everything else is written at once.
 *
 * Call order: create; push every outcome in order; flush at the end; destroy. Memory: see record/minute.h. */
#ifndef RECORD_RECORD_H
#define RECORD_RECORD_H

#include "base/status.h"
#include "base/time.h"
#include "flow.h"
#include "record/marks.h"
#include <stdint.h>

struct record_setup {
    uint32_t run;
    uint32_t max_channels;         /* of all streams together, at least 1 */
    int64_t zero_unix_ns;          /* UTC of watch time zero, in whole microseconds */
    const struct run_facts *facts; /* borrowed for the life of the record; of the `run` entry */
};

/* A line without seq and hash; texts are borrowed for the call. */
struct record_line {
    int64_t watch_ns;
    const char *utc, *kind, *body;
};

struct record_sink {
    void (*take)(void *context, const struct record_line *line);
    void *context;
};

struct record;

/* STATUS_BAD_ARGUMENT; STATUS_NO_MEMORY. The caller owns *out. */
enum status record_create(const struct record_setup *setup, struct record **out);
void record_destroy(struct record *record);

/* STATUS_NO_MEMORY: the line is lost; STATUS_FULL: a level of a channel more than max_channels. */
enum status record_push(struct record *record, const struct outcome *outcome, const struct record_sink *sink);
/* Gives the level seconds that are held. */
enum status record_flush(struct record *record, int64_t watch_ns, const struct record_sink *sink);

/* Another map to UTC from now on; the caller writes the `clock` entry that says so. */
void record_set_zero(struct record *record, int64_t zero_unix_ns);
/* The UTC text of a watch time. */
void record_get_utc(const struct record *record, int64_t watch_ns, char out[TIME_UTC_SIZE]);

#endif
