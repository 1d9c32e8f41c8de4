/* Noise by its swelling, by its spectrum and by its sharp peaks.
 *
 * Beats: the power of the class's band, frame by frame over 2048 frames, the logarithm of each; its spectrum
 * has a line at the rate of a ship's shaft or blades (detection of envelope modulation on noise; Ross 1976,
 * "Mechanics of underwater noise", for what swells). Where more than a hundredth of the frames is twelve
 * times the median, pulses make it, and nothing is said. Hump: mean density in the class's band, its loudest
 * quarter at most twice as loud as the others, over that of the octave below it, steady within a quarter
 * over the same time: at sea it falls by 5 dB an octave (Wenz 1962), in rain it rises from 6 to 15 kHz
 * (Nystuen 1986). Snaps: frames in which the greatest squared difference of neighbouring samples is 45 times
 * their mean; in Gaussian noise of 1024 samples it is about 14. Their intervals must vary as random ones do.
 */
#ifndef CALL_SWELLS_H
#define CALL_SWELLS_H

#include "call/others.h"

struct swells;

/* STATUS_NO_MEMORY, STATUS_BAD_ARGUMENT. The caller owns *out. */
enum status swells_create(const struct other_setup *setup, struct swells **out);
void swells_reset(struct swells *swells);
void swells_push(struct swells *swells, const struct other_frame *frame, const struct found_sink *sink);
void swells_destroy(struct swells *swells);

#endif
