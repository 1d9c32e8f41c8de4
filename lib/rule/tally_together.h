/* How far a criterion reaches with the other sources. For lib/rule/tally only. */
#ifndef RULE_TALLY_TOGETHER_H
#define RULE_TALLY_TOGETHER_H

#include "flow.h"
#include "level/criterion.h"
#include "level/together.h"
#include "level/zone_check.h"
#include "rule/tally.h"
#include <stdbool.h>
#include <stdint.h>

#define TALLY_ZONE_TOO_SMALL_TOGETHER "zone too small with others"

/* The others of a setup; *out stays as it is where there are none. */
enum status tally_together_create(const struct tally_setup *setup, const struct exposure_setup *exposure,
                                  struct together **out);

/* Adds the whole's distances to an outcome that tally_fill_exposure has filled: never less than ours alone;
 * NAN where there are no others (together NULL) or no answer. Returns whether there is one. */
bool tally_fill_together(struct together *together, struct exposure *exposure,
                         const struct criterion *criterion, uint32_t index, int64_t watch_ns,
                         struct exposure_outcome *out, struct together_reach *out_reach);

/* A criterion of injury that is met beyond the zone only with the others: true, and the finding is filled.
 * Always indicative, since their levels are set and not measured, and only where the lower bound of our
 * source's island is beyond it: an island of another's own says nothing of our zone. `said` holds what was
 * said of it in this job. */
bool tally_together_finding(const struct criterion *criterion, const struct together_reach *reach,
                            const struct tally_setup *setup, const char *job, enum zone_grade said,
                            struct finding_outcome *out);
/* Whether a finding is that of this criterion. */
bool tally_is_together_finding(const struct criterion *criterion, const struct finding_outcome *finding);

#endif
