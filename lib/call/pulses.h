/* Pulses and trains of one channel: every train class of a catalogue, one front end for those that share a
 * band.
 *
 * Samples go through a bank of band-passes (call/bands), each class's energy detector (call/trigger) and its
 * chains of pulses (call/trains). Classes far below the rate run on a decimated copy (dsp/decimate). What a
 * long train gives, and when, stands in call/trains.h: first as soon as it is certain, then at most every 10
 * s and at its end, each time as a call of its own.
 *
 * found_call.snr_db: the median over the pulses of (mean square over pulse_s at its greatest, less the
 * background) over the background, both in the class's band. found_call.mean_square_pa2: of all that is in
 * the band from the first pulse to the last. */
#ifndef CALL_PULSES_H
#define CALL_PULSES_H

#include "base/status.h"
#include "call/catalogue.h"
#include "call/found.h"
#include "call/lowered.h"
#include <stdbool.h>
#include <stdint.h>

struct pulses;

/* The train classes among classes[n_classes] (1..CATALOGUE_MAX_CLASSES), for one channel of rate_hz (8 kHz to
 * 1 MHz); tone classes are passed over. A class whose band or guard band the rate does not carry is not
 * hearable and gives nothing. The classes are borrowed; the caller owns *out. Allocates all that is ever
 * needed. STATUS_BAD_ARGUMENT, STATUS_NO_MEMORY. */
enum status pulses_create(const struct call_class *classes, uint32_t n_classes, double rate_hz,
                          struct pulses **out);
/* Forgets everything; the next sample pushed is number next_frame. Call pulses_finish first, or what is held
 * is lost. The counters of rejections stay. */
void pulses_reset(struct pulses *pulses, uint64_t next_frame);
/* Takes n samples in pascals. Gives calls whose results do not depend on how the samples are cut into pushes.
 * The calls of one class come in order of known_frame; those of different classes may be out of order by up
 * to the samples of one push. */
void pulses_push(struct pulses *pulses, const float *pascals, uint32_t n, const struct found_sink *sink);
/* The same, with what others have made of the samples already (struct lowered): used where pulses would make
 * the same. With every push since the last reset, or with none. */
void pulses_push_lowered(struct pulses *pulses, const float *pascals, uint32_t n,
                         const struct lowered *lowered, const struct found_sink *sink);
/* Ends all trains. The samples of an unfinished block (at most 64 slots: a few ms) are not searched. */
void pulses_finish(struct pulses *pulses, const struct found_sink *sink);
/* Says that what arrived in [start_frame, end_frame] in that band is the own source's: such pulses count for
 * no train from now on. To be told within a few seconds; what was given stays given. */
void pulses_hide(struct pulses *pulses, double start_frame, double end_frame, double low_hz, double high_hz);
/* False for a tone class and for a class that the rate cannot carry. */
bool pulses_is_hearable(const struct pulses *pulses, uint32_t class_index);
/* Adds up since create, out[class_index][rejection]; rows of other classes are left alone. */
void pulses_get_rejections(const struct pulses *pulses, uint64_t out[][REJECT_COUNT]);
/* While the sink is being given a train: when each of its n_pulses arrived, in frames, for those who hold
 * trains against a known truth; out[n_pulses], at most TRAINS_MAX_MEMBERS. False, and nothing written, at any
 * other time. */
bool pulses_get_arrivals(const struct pulses *pulses, double *out);
void pulses_destroy(struct pulses *pulses);

#endif
