/* Finds the pulses of one class in one channel, from the slot powers of its band: an energy detector over the
 * class's pulse_s (Urkowitz, "Energy detection of unknown deterministic signals", Proc. IEEE 55, 1967) with a
 * constant-false-alarm threshold over the running median of its own windows, in which the parts of a wide
 * band weigh by how quiet they are (call/whitened.h). The median is stepped up or down
 * by a small ratio with each window that lies above or below it, so that neither a call nor a heavy tail
 * (snapping shrimp) lifts it much; it stands still while a pulse is open.
 *
 * The arrival time is the centroid of the pulse's energy over its window, finer than a slot. Whatever follows
 * a pulse within the echo time belongs to it (surface and bottom echoes, the pulses inside a sperm whale's
 * click): of these the strongest is kept. So no class ever gives more than 1 / echo time pulses a second. */
#ifndef CALL_TRIGGER_H
#define CALL_TRIGGER_H

#include "base/status.h"
#include "call/bands.h"
#include "call/catalogue.h"
#include "call/found.h"
#include "call/pulse_shape.h"
#include <stdint.h>

struct pulse {
    double frame;  /* arrival, in frames of the input, counted from the last reset */
    double snr;    /* ratio: mean square over pulse_s where it is greatest, less the background, over the
                      background's mean square, in the band as its noise is whitened (call/whitened.h) */
    double energy; /* the band's energy up to the arrival since the last reset, Pa2 times input frames */
    struct pulse_shape shape;
};

struct pulse_sink {
    void (*take)(void *context, const struct pulse *pulse);
    void *context;
};

#define TRIGGER_GUARDS 2

struct trigger_setup {
    const struct call_class *call_class;      /* borrowed */
    const struct bands *bands;                /* borrowed */
    struct band_parts band;                   /* of the bank, its lateness left open */
    struct band_parts guards[TRIGGER_GUARDS]; /* guard and upper band; likewise; n = 0 where none */
    double rate_hz;                           /* of the bank */
    uint32_t slot_frames, block_slots;        /* of the bank; block_slots a multiple of 8, at most 64 */
    uint32_t history_slots;                   /* of the bank: trigger_get_history or more */
    double frames_per_frame;                  /* input frames per frame of the bank (its decimation) */
    double delay_frames;                      /* input frames by which the bank's input is late */
};

struct trigger;

/* Slots of history that the class needs of a bank with such slots. */
uint32_t trigger_get_history(const struct call_class *call_class, double rate_hz, uint32_t slot_frames);
/* Echo time of a class, s: a quarter of the shortest interval, at most 30 ms. */
double trigger_get_echo(const struct call_class *call_class);
/* STATUS_NO_MEMORY; the caller owns *out. */
enum status trigger_create(const struct trigger_setup *setup, struct trigger **out);
void trigger_reset(struct trigger *trigger);
/* Looks at the block that the bank has just taken. Adds to rejections[REJECT_COUNT]. Pulses come in order of
 * arrival, at most an echo time and a pulse's length late. */
void trigger_push(struct trigger *trigger, const struct pulse_sink *sink, uint64_t *rejections);
/* Gives the pulse that still waits for its echoes. */
void trigger_finish(struct trigger *trigger, const struct pulse_sink *sink);
/* Input frame, counted from the last reset, before which no pulse will come any more. */
double trigger_get_known(const struct trigger *trigger);
/* Mean square of the band's background, Pa2. */
double trigger_get_background(const struct trigger *trigger);
/* Pulses a second that Gaussian noise such as there is gives at this snr (ratio) or more (noise_rate.h). */
double trigger_get_noise_rate(const struct trigger *trigger, double snr);
void trigger_destroy(struct trigger *trigger);

#endif
