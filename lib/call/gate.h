/* The own source's gate of one channel: when, and in which bands, a blow or shot of the own source covers
 * what animals could be heard, as briefly as the sound allows.
 *
 * The gate keeps the power of a few wide bands in steps of 5 ms, for as long as an impulse may take to become
 * known. Told of an impulse it looks from shortly before the onset for the time until the band has fallen to
 * 3 dB above its background and stays there for 20 ms; a band in which the impulse does not stand out is not
 * masked at all. A later burst of the same event (ghost cavitation of airguns at 10 to 20 kHz, 7 to 14 ms
 * after the main peak: Landro et al. 2013) is taken along while it begins within 25 ms. Masked time is at
 * most GATE_LONGEST_S an impulse, and ends where the band stops falling: a tail falls, and what stays up is
 * another sound, which must not be hidden; the background is the median of the steps before, those that are
 * masked left out.
 *
 * Order of use: gate_push with every sample that the detectors get; gate_push_impulse when an impulse of the
 * own source becomes known (at most memory_s after its onset); then gate_hides for calls, and
 * gate_take_masked for what is unheard. */
#ifndef CALL_GATE_H
#define CALL_GATE_H

#include "base/status.h"
#include <stdbool.h>
#include <stdint.h>

#define GATE_BANDS 4
#define GATE_LONGEST_S 5.0

/* A stretch of one band that the own source covers. */
struct gate_masked {
    double start_frame, end_frame;
    double low_hz, high_hz;
};

struct gate_masked_sink {
    void (*take)(void *context, const struct gate_masked *masked);
    void *context;
};

struct gate;

/* For a channel of rate_hz (8 kHz to 1 MHz). memory_s (0.5 to 30): how long after its onset an impulse may
 * become known. Bands: 50 Hz to 1 kHz, to 5 kHz, to 20 kHz and above, as far as the rate carries them.
 * STATUS_BAD_ARGUMENT, STATUS_NO_MEMORY. The caller owns *out. */
enum status gate_create(double rate_hz, double memory_s, struct gate **out);
/* Forgets everything; the next sample pushed is number next_frame. */
void gate_reset(struct gate *gate, uint64_t next_frame);
/* Takes n samples in pascals. Stretches whose end has now been heard go to the sink (may be NULL). */
void gate_push(struct gate *gate, const float *pascals, uint32_t n, const struct gate_masked_sink *sink);
/* An impulse of the own source with its onset (5 % energy point) and T90. What is masked goes to the sink, a
 * band at a time, adjoining stretches joined; a band in which the sound still covers what follows is given
 * once it ends. */
void gate_push_impulse(struct gate *gate, double onset_frame, double t90_s,
                       const struct gate_masked_sink *sink);
/* True when at least half of [start, end] is masked in a band that overlaps [low, high]. Knows the impulses
 * of the last memory_s (at most 64 stretches a band). */
bool gate_hides(const struct gate *gate, double start_frame, double end_frame, double low_hz, double high_hz);
void gate_destroy(struct gate *gate);

#endif
