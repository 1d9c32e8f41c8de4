/* What the quieting measure takes off one stream's impulses, as the source's outcome says it. For
 * lib/rule/tally only. */
#ifndef RULE_TALLY_QUIETING_H
#define RULE_TALLY_QUIETING_H

#include "flow.h"
#include "level/criterion.h"
#include "level/quieting.h"

#define TALLY_QUIETING_FALLS "quieting falls"

/* Insertion loss, by decidecade and as each weighting among the criteria hears it; NAN and counts of 0 where
 * it is not known. Bands that the measure takes below the background take nothing off the weighted sums. */
void tally_fill_quieting(const struct quieting *quieting, const struct criteria *criteria,
                         struct source_outcome *out);
/* A measure that takes off less than it did: true, and the finding is filled but for its causes. */
bool tally_quieting_finding(const struct quieting *quieting, const char *job, struct finding_outcome *out);

#endif
