/* What a channel's impulses come to at one range, and why that is not known. For lib/rule/tally only. */
#ifndef RULE_TALLY_PLACE_H
#define RULE_TALLY_PLACE_H

#include "flow.h"
#include "level/source.h"
#include "rule/tally_channel.h"
#include <stdint.h>

/* Median level of the job's impulses as received; NAN without any. */
double tally_median_db(const struct tally_channel *channel);
/* Sets *out to the median range of those whose range is known, and to their median level there, each moved to
 * it from its own range by the law. How many they are; 0 sets the range to NAN and leaves the level. */
uint32_t tally_placed_median(const struct tally_channel *channel, const struct loss *loss,
                             struct source_measurement *out);
/* Adds to the reason why the last range is unknown, and of how many impulses it is when not of all. */
void tally_say_range(const struct tally_channel *channel, uint32_t n_placed, char reason[FLOW_TEXT_SIZE]);

#endif
