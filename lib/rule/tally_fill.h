/* What is said of one criterion: its words and numbers as an outcome. For lib/rule/tally only. */
#ifndef RULE_TALLY_FILL_H
#define RULE_TALLY_FILL_H

#include "flow.h"
#include "level/criterion.h"
#include "level/exposure.h"
#include <stdint.h>

/* Fills all but stream, channel and job. zone_edge_m may be NAN. STATUS_NOT_FOUND where the criterion (of
 * that index in the exposure) judges other sound or nothing was added to it yet. */
enum status tally_fill_exposure(struct exposure *exposure, const struct criterion *criterion, uint32_t index,
                                double zone_edge_m, int64_t watch_ns, struct exposure_outcome *out);

/* A distance with its 90 % interval in words: "1.2 km (0.9 km to 1.6 km)", "nowhere" (not even at 1 m),
 * "beyond 1000 km", "unknown". */
void tally_distance_text(double distance_m, double low_m, double high_m, char out[NOTE_NAME_SIZE]);

#endif
