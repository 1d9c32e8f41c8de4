/* The tone tracer of one channel: sound in, calls of the catalogue's tone classes out.
 *
 * Classes of equal window_s share one tracer (tones_trace.h: decimated band, transient limiter,
 * half-overlapped spectra, adaptive background, paths by Viterbi's recursion); what the tracers find is
 * judged together (tones_judge.h: shape of each class, steady lines, reverberation tails, harmonics and
 * pieces of one sound), so that one vocalisation is one call of one class. docs/detectors.md says how and
 * gives the figures. */
#ifndef CALL_TONES_H
#define CALL_TONES_H

#include "base/status.h"
#include "call/catalogue.h"
#include "call/found.h"
#include "call/gate.h"
#include "call/lowered.h"
#include <stdbool.h>
#include <stdint.h>

struct tones;

/* A tracer for every window of the tone classes; train classes are skipped, and so are classes of whose band
 * the rate carries (to 0.46 of the rate) less than half. `classes` is borrowed for the life of the object; a
 * found call's class_index points into it. Plans FFTs (not thread-safe: at start only). STATUS_BAD_ARGUMENT
 * for a rate outside 1 kHz to 1 MHz, too many classes, or a class that no tracer can follow (window of less
 * than 16 samples, natural delay shorter than the window); STATUS_NO_MEMORY. The caller owns *out. */
enum status tones_create(const struct call_class *classes, uint32_t n_classes, double rate_hz,
                         struct tones **out);
void tones_destroy(struct tones *tones);

/* Whether calls of this class can be heard at the rate; false for train classes. */
bool tones_can_hear(const struct tones *tones, uint32_t class_index);

/* Frames were lost: the next sample is frame `next_frame`. Open contours end where they are and are judged;
 * what they give is handed out at the next push or finish. The background is kept. */
void tones_reset(struct tones *tones, uint64_t next_frame);

/* Takes n samples in pascals (what is not finite counts as 0, more than 1e6 Pa as 1e6); gives the calls that
 * they make known, in the order of known_frame. How the samples are cut into pieces changes nothing. */
void tones_push(struct tones *tones, const float *pascals, uint32_t n, const struct found_sink *sink);

/* Keeps from now on what the first decimator makes of each push of at most max_frames samples, for others who
 * want the sound at that rate; once, before the first push. STATUS_NO_MEMORY. */
enum status tones_keep_lowered(struct tones *tones, uint32_t max_frames);
/* What was kept of the last push; factor 1 where nothing is kept. */
struct lowered tones_get_lowered(const struct tones *tones);

/* What the own source's tail adds to what is pushed from now on: where it holds 3 dB more than the band
 * does at its quietest, or is masked, the backgrounds know it for the tail. */
void tones_hear_tail(struct tones *tones, const struct gate_tail *tail);
/* Ends the sound: what is still open is judged and given. */
void tones_finish(struct tones *tones, const struct found_sink *sink);

/* How many contours each class rejected, by name; out[class_index][rejection], all n_classes rows written. */
void tones_get_rejections(const struct tones *tones, uint64_t out[][REJECT_COUNT]);

#endif
