/* Which impulses of a job are in the sums, which are not and why. For lib/rule/tally only. */
#ifndef RULE_TALLY_COUNTS_H
#define RULE_TALLY_COUNTS_H

#include "flow.h"
#include <stdbool.h>
#include <stdint.h>

/* Plain data; all zero: none yet. */
struct tally_counts {
    uint32_t n_clipped, n_overlapped, n_weak;           /* in the sums */
    uint32_t n_other, n_unknown, n_relative, n_refused; /* not in them */
};

/* Counts one; whether it belongs into the sums: ours, with levels in dB re 1 uPa. */
bool tally_counts_take(struct tally_counts *counts, const struct impulse *impulse);
void tally_counts_fill(const struct tally_counts *counts, struct source_outcome *out);

#endif
