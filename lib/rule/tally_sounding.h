/* When the source sounded, as the crew said. For lib/rule/tally only. */
#ifndef RULE_TALLY_SOUNDING_H
#define RULE_TALLY_SOUNDING_H

#include "rule/note.h"
#include <stdbool.h>
#include <stdint.h>

/* Changes that are kept. Seconds that come in again from a ledger come a minute late, so that more than this
 * many in a minute would be needed to lose one; a second before the first that is kept goes by what that one
 * changed. */
#define TALLY_SOUNDING_KEPT 128

/* Plain data; all 0: nobody has said anything, the source is off. */
struct tally_sounding {
    uint32_t n;                              /* ever; the last TALLY_SOUNDING_KEPT are kept, in a ring */
    int64_t changed_ns[TALLY_SOUNDING_KEPT]; /* when it became known: 1st, 3rd ... on; 2nd, 4th ... off */
};

/* Takes a note of kind NOTE_SOURCE that became known at known_ns; times must not fall. */
void tally_sounding_take(struct tally_sounding *sounding, const struct note *note, int64_t known_ns);
/* Whether it was said to sound at some moment of start_ns <= t < end_ns. */
bool tally_sounding_in(const struct tally_sounding *sounding, int64_t start_ns, int64_t end_ns);

#endif
