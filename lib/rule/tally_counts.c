/* Counts of impulses, by why they are in the sums or not; see tally_counts.h. */
#include "rule/tally_counts.h"

bool tally_counts_take(struct tally_counts *counts, const struct impulse *impulse)
{
    if (impulse->whose != IMPULSE_OURS) {
        counts->n_other += impulse->whose == IMPULSE_OTHERS;
        counts->n_unknown += impulse->whose == IMPULSE_UNKNOWN;
        return false;
    }
    if (impulse->refused || impulse->relative) {
        counts->n_refused += impulse->refused;
        counts->n_relative += !impulse->refused;
        return false;
    }
    counts->n_clipped += impulse->clipped;
    counts->n_overlapped += impulse->overlapped;
    counts->n_weak += impulse->weak;
    return true;
}

void tally_counts_fill(const struct tally_counts *counts, struct source_outcome *out)
{
    out->n_clipped = counts->n_clipped;
    out->n_overlapped = counts->n_overlapped;
    out->n_weak = counts->n_weak;
    out->n_other = counts->n_other;
    out->n_unknown = counts->n_unknown;
    out->n_relative = counts->n_relative;
    out->n_refused = counts->n_refused;
}
