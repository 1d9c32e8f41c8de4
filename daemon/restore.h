/* Rebuilds a watch from its ledger: every recorded input is pushed again, in order, as at sea. */
#ifndef RESTORE_H
#define RESTORE_H

#include "base/status.h"
#include "ledger/ledger.h"
#include "rule/tally.h"
#include "rule/watch.h"
#include <stdint.h>

/* An entry that the watch concludes and the ledger does not hold: it was lost between two commits. */
struct restored_entry {
    char *utc, *kind, *body; /* owned by struct restored */
};

struct restored {
    uint32_t last_run;    /* 0: the ledger is empty */
    int64_t zero_unix_ns; /* UTC of watch time zero: the first run's */
    int64_t last_ns;      /* watch time of the last entry */
    uint64_t n_inputs, n_conclusions;
    size_t n_missing, capacity;
    struct restored_entry *missing; /* in order */
};

/* Pushes the inputs of the ledger into the watch, each run's under its own permit and settings (replay.h),
 * and what the watch says of them into the tally (NULL: none); what the watch and the tally were made with
 * holds from the ledger's end on, for the watch, and for all of it for the tally. For continuous sound the
 * tally is given the seconds of the `level` entries too. Its sums are then those of what the ledger holds:
 * seconds of a minute whose entry was not yet written are in none. Conclusions that the ledger lacks are
 * returned, so that they can be written first. STATUS_BAD_FORMAT with a problem that names the entry. */
enum status restore_watch(struct ledger *ledger, struct watch *watch, struct tally *tally,
                          struct restored *out, char problem[LEDGER_PROBLEM_SIZE]);
void restored_destroy(struct restored *restored);

#endif
