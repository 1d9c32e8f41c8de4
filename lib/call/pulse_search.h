/* Finds what may be pulses in one band of one channel, for all classes that look for the same in it: an
 * energy detector over pulse_s (Urkowitz, "Energy detection of unknown deterministic signals", Proc. IEEE 55,
 * 1967) with a constant-false-alarm threshold over the running median of its own windows, in which the parts
 * of a wide band weigh by how quiet they are (call/whitened.h). The median is stepped up or down by a small
 * ratio with each window that lies above or below it, so that neither a call nor a heavy tail (snapping
 * shrimp) lifts it much; it stands still while a pulse is open.
 *
 * The arrival time is the centroid of the pulse's energy over its window, finer than a slot. What each class
 * then makes of it is call/trigger.h. */
#ifndef CALL_PULSE_SEARCH_H
#define CALL_PULSE_SEARCH_H

#include "base/status.h"
#include "call/bands.h"
#include "call/catalogue.h"
#include "call/whitened.h"
#include <stdint.h>

#define SEARCH_GUARDS 2

struct search_setup {
    const struct call_class *call_class;     /* borrowed; of all that share the search, any one */
    const struct bands *bands;               /* borrowed */
    struct band_parts band;                  /* of the bank, its lateness left open */
    struct band_parts guards[SEARCH_GUARDS]; /* guard and upper band; likewise; n = 0 where none */
    double rate_hz;                          /* of the bank */
    uint32_t slot_frames, block_slots;       /* of the bank; block_slots a multiple of 8, at most 64 */
    uint32_t history_slots;                  /* of the bank: trigger_get_history or more */
    double frames_per_frame;                 /* input frames per frame of the bank (its decimation) */
    double delay_frames;                     /* input frames by which the bank's input is late */
};

/* One that was found, whatever a class makes of it. */
struct search_found {
    double slot;    /* arrival, from the start of the bank's first block */
    double frame;   /* the same in frames of the input, counted from the last reset */
    double snr;     /* as struct pulse has it (call/trigger.h) */
    double energy;  /* likewise */
    bool too_long;  /* lasts longer than max_pulse_s */
    bool broadband; /* a guard band holds too much energy around it, beyond what its noise explains */
};

struct pulse_search;

/* Whether two classes look for the same in the same bands, so that one search serves both. */
bool pulse_search_serves(const struct search_setup *a, const struct search_setup *b);
/* STATUS_NO_MEMORY; the caller owns *out. */
enum status pulse_search_create(const struct search_setup *setup, struct pulse_search **out);
void pulse_search_reset(struct pulse_search *search);
/* Looks at the block that the bank has just taken. */
void pulse_search_push(struct pulse_search *search);
/* What the last block completed, in order of arrival. Valid until the next push. */
const struct search_found *pulse_search_get(const struct pulse_search *search, uint32_t *out_n);
/* Input frame, counted from the last reset, before which nothing more will be found. */
double pulse_search_get_known(const struct pulse_search *search);
/* What it was created with. */
const struct search_setup *pulse_search_get_setup(const struct pulse_search *search);
/* Slots since the last reset, before the block that the bank holds. */
uint64_t pulse_search_get_block_slot(const struct pulse_search *search);
/* Frames of the bank by which its band's power is late. */
double pulse_search_get_delay(const struct pulse_search *search);
/* The band's power, for as long as the bank's (call/whitened.h), and its noise. */
const struct whitened *pulse_search_get_power(const struct pulse_search *search);
/* Mean square of the band's background, Pa2. */
double pulse_search_get_background(const struct pulse_search *search);
/* Pulses a second that Gaussian noise such as there is gives at this snr (ratio) or more (noise_rate.h). */
double pulse_search_get_noise_rate(const struct pulse_search *search, double snr);
void pulse_search_destroy(struct pulse_search *search);

#endif
