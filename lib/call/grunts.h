/* Grunts of fish: short rows of pulses that come again and again.
 *
 * Many fish drum with a muscle: 10 to 30 pulses at 60 to 300 a second within 30 to 300 ms, each grunt like
 * the one before it (Terapon theraps: 73 to 260 ms, 11 to 21 pulses at 87 to 121 a second; midshipman: grunts
 * of 30 to 140 ms in trains; abstracts read). Whales' units last longer, or pulse more slowly.
 *
 * The band of the class, on the decimated copy (call/lines.h), is cut into slots of about 1 ms. What stands
 * over the median of its own power for min_s to max_s, and whose envelope's autocorrelation has its first
 * peak at low_rate_hz to high_rate_hz with a trough before it, is a
 * grunt, unless 0.42 of its energy is in its first third (an impulse that rings down); min_repeats of the
 * same rate within memory_s are recognised, and those before then too. */
#ifndef CALL_GRUNTS_H
#define CALL_GRUNTS_H

#include "call/others.h"

struct grunts;

/* For decimated samples at slow_rate_hz, which is the stream's rate / factor, late by late_frames of the
 * stream. STATUS_NO_MEMORY, STATUS_BAD_ARGUMENT. The caller owns *out. */
enum status grunts_create(const struct other_setup *setup, double slow_rate_hz, double late_frames,
                          struct grunts **out);
/* The next decimated sample is that of frame next_frame. */
void grunts_reset(struct grunts *grunts, uint64_t next_frame);
/* n decimated samples, known at known_frame. */
void grunts_push(struct grunts *grunts, const float *samples, uint32_t n, uint64_t known_frame,
                 const struct found_sink *sink);
void grunts_destroy(struct grunts *grunts);

#endif
