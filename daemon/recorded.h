/* What a recorded run judged by, from the ledger's `run` and `permit` entries alone: no settings file, no
 * permit file, no criteria file is read. */
#ifndef RECORDED_H
#define RECORDED_H

#include "base/status.h"
#include "rules.h"
#include "settings/site.h"
#include <stdint.h>

#define RECORDED_PROBLEM_SIZE 512

struct recorded {
    struct rules *rules; /* without the call catalogue, which no rule reads */
    struct site *site;
    struct text settings; /* as the `run` entry has them */
    uint32_t n_streams;
    uint32_t n_channels[SITE_MAX_STREAMS];
    bool other_defaults; /* this program would add other values than the run did */
};

/* instead: a permit to put in the place of the recorded one; NULL for none. permit_body may be NULL then.
 * STATUS_NOT_FOUND: an older version's run, which does not hold all of it; STATUS_BAD_FORMAT: what it holds
 * cannot be read; both with a sentence in problem. STATUS_NO_MEMORY. The caller owns *out. */
enum status recorded_load(const char *run_body, const char *permit_body, const struct permit *instead,
                          struct recorded **out, char problem[RECORDED_PROBLEM_SIZE]);
void recorded_destroy(struct recorded *recorded);

#endif
