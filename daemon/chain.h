/* The whole chain, put together once for the daemon and for the scan: ledger, inputs, streams, merge, watch,
 * recorder, outbox and, where somebody looks, board and pages. Starts in order, stops in reverse. */
#ifndef CHAIN_H
#define CHAIN_H

#include "base/status.h"
#include "settings/notes.h"
#include "settings/reader.h"
#include "settings/site.h"
#include "stream.h"
#include "watcher.h"
#include <stdbool.h>
#include <stdint.h>

struct chain;

struct chain_setup {
    const char *settings_path;
    struct site *site; /* loaded; borrowed */
    bool scan;         /* a new ledger, no pages, the input's own start, an end when the inputs end */
    bool has_start;    /* scan: start_unix_ns was given */
    int64_t start_unix_ns;
    const struct timed_note *notes; /* of a notes file, at_s since the first frame; borrowed */
    unsigned n_notes;
};

/* Loads permit and catalogue, opens inputs and ledger, rebuilds the watch from it. Adds to problems what is
 * wrong with settings or files. STATUS_BAD_FORMAT, STATUS_OUT_OF_RANGE, STATUS_NOT_FOUND, STATUS_EXISTS,
 * STATUS_BUSY: the user's to mend; anything else: the system's. */
enum status chain_create(const struct chain_setup *setup, struct problems *problems, struct chain **out);
enum status chain_start(struct chain *chain, struct problems *problems);
/* True when all inputs have ended and everything is recorded; false after wait_s. */
bool chain_wait(struct chain *chain, double wait_s);
/* Ends everything within a second; how many entries could not be written goes to *out_lost. */
enum status chain_stop(struct chain *chain, uint64_t *out_lost);
void chain_destroy(struct chain *chain);

/* For progress and the watchdog. */
void chain_get_watcher(struct chain *chain, struct watcher_state *out);
/* What people must know of the permit before they rely on it, one line each (rules.h). */
void chain_warn(const struct chain *chain, struct text *out);
uint32_t chain_get_port(const struct chain *chain); /* 0 without pages */
uint32_t chain_count_streams(const struct chain *chain);
struct stream *chain_get_stream(struct chain *chain, uint32_t number); /* from 1; borrowed */

/* Looks at what the settings name, without starting anything: permit, call catalogue, recordings and scenes
 * (a device or a pipe is not touched). Adds to problems; adds to remarks what people must know of the permit.
 */
void chain_check(struct site *site, struct problems *problems, struct text *remarks);

#endif
