/* Bursts of tone with a straight contour that come again alike, and chips of tone that hop.
 *
 * In each frame the local maxima of the spectrum are peaks that stand 11 dB above the bin's own background
 * (a median by stochastic approximation, Robbins and Monro 1951) and as much above the bins around them, so
 * that clicks and noise make none. Peaks that follow each other in a straight line are a burst. A machine
 * repeats itself: a burst is recognised once min_repeats bursts of the same frequency, sweep and length were
 * heard within memory_s, and then those before it are told too, so that they can take back what was taken
 * for an animal. Chips of equal length that follow each other without a pause and hop are a block.
 *
 * An animal's tone is seldom straight to a tenth of a percent, and hardly ever twice in the same way. */
#ifndef CALL_BURSTS_H
#define CALL_BURSTS_H

#include "call/others.h"

struct bursts;

/* STATUS_NO_MEMORY. The caller owns *out. */
enum status bursts_create(const struct other_setup *setup, struct bursts **out);
void bursts_reset(struct bursts *bursts);
void bursts_push(struct bursts *bursts, const struct other_frame *frame, const struct found_sink *sink);
void bursts_finish(struct bursts *bursts, uint64_t known_frame, const struct found_sink *sink);
/* See others_hold. */
bool bursts_hold(const struct bursts *bursts, const struct found_call *call);
void bursts_destroy(struct bursts *bursts);

#endif
