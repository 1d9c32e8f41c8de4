/* The own source's gate of one channel: when, and in which bands, a blow or shot of the own source covers
 * what animals could be heard, as briefly as the sound allows, and what its tail adds to the noise after
 * that.
 *
 * The gate keeps the power of a few wide bands in steps of 5 ms, for as long as an impulse may take to become
 * known. Impulses that come in a rhythm (gate_rhythm.h) are expected: where the band that they fill most
 * rises to within 10 dB of its usual peak at the expected time, the gate opens at once, band by band as each
 * stands out, and what becomes known of the impulse later only adds. An animal's pulse beside the beat, in
 * another band or much weaker opens nothing. Told of an impulse it looks from shortly before the onset for
 * the time until the band has fallen to 3 dB above its background and stays there for 20 ms; a band in which
 * the impulse does not stand out is not masked at all. A later burst of the same event (ghost cavitation of
 * airguns at 10 to 20 kHz, 7 to 14 ms after the main peak: Landro et al. 2013) is taken along while it begins
 * within 25 ms. Masked time is at most GATE_LONGEST_S an impulse, and ends where the band stops falling: a
 * tail falls, and what stays up is another sound, which must not be hidden; the background is the median of
 * the steps before, those that are masked left out.
 *
 * Floors: each band's power is kept per time since the impulse (gate_floor.h), so that detectors can be told
 * what is tail. Bands: 10 to 50 Hz (gate_low.h; 125 ms late at the end of a mask), then those below.
 *
 * Order of use: gate_push with every sample that the detectors get; gate_push_impulse when an impulse of the
 * own source becomes known (at most memory_s after its onset); then gate_hides for calls, and
 * gate_take_masked for what is unheard. */
#ifndef CALL_GATE_H
#define CALL_GATE_H

#include "base/status.h"
#include <stdbool.h>
#include <stdint.h>

#define GATE_BANDS 5
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

/* What the tail of the last impulse adds now. */
struct gate_tail_band {
    double low_hz, high_hz;
    float ratio; /* what impulses before left at this time, over the band's quietest time; 1: nothing */
    bool masked; /* the impulse itself covers the band */
    double masked_from, masked_to; /* frames: the newest stretch that it covers, as far as it is known; equal
                                      where there is none */
};

struct gate_tail {
    uint32_t n;
    struct gate_tail_band bands[GATE_BANDS];
};

struct gate;

/* For a channel of rate_hz (8 kHz to 1 MHz). memory_s (0.5 to 30): how long after its onset an impulse may
 * become known. Bands: 10 to 50 Hz, to 1 kHz, to 5 kHz, to 20 kHz and above, as far as the rate carries them.
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
/* What the own source's tail adds at the last step that was pushed. */
void gate_get_tail(const struct gate *gate, struct gate_tail *out);
void gate_destroy(struct gate *gate);

#endif
