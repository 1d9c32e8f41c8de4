/* Lines that last, on one hydrophone or on both, and low noise that each hydrophone has for itself.
 *
 * Mean spectra over 2 s: of the frames (bins of some 190 Hz), and of a decimated copy of both channels (bins
 * of 1 to 2 Hz) below 0.4 of its rate. A bin that stands 6 dB above those beside it in each of them for min_s
 * is a line. Lines at whole multiples of another are its family. A line that both channels have in the same
 * phase and equally loud (what differs is 17 dB below) came by the cable: no sound arrives everywhere at
 * once. Hydrophones so close that this cannot tell, or a source abeam, deceive it.
 *
 * Flow: density falling by more than 15 dB from 20 to 100 Hz (the quietest thirds of 15 to 25 and 80 to 125
 * Hz), magnitude-squared coherence of the two channels below 0.2 (turbulence is local: no two hydrophones
 * hear the same). */
#ifndef CALL_LINES_H
#define CALL_LINES_H

#include "call/others.h"

struct lines;

/* STATUS_NO_MEMORY, STATUS_BAD_ARGUMENT. The caller owns *out. */
enum status lines_create(const struct other_setup *setup, struct lines **out);
void lines_reset(struct lines *lines, uint64_t next_frame);
/* A frame of the first channel; `second`: the same samples of the second, or NULL. */
void lines_push(struct lines *lines, const struct other_frame *frame, const float *second,
                const struct found_sink *sink);
void lines_destroy(struct lines *lines);
/* The decimated copy of the first channel: its rate, and how late it is in frames of the stream; the samples
 * that the newest frame gave, borrowed until the next. */
void lines_describe_slow(const struct lines *lines, double *rate_hz, double *late_frames);
uint32_t lines_get_slow(const struct lines *lines, const float **out);

/* ---- for its own files only */

#define LINES_SAME 0.02 /* power of the difference of two channels that are the same, over that of both */
bool lines_same_on_both(const struct other_frame *frame, const float *second, double hz, double rate_hz);

#endif
