/* What one pulse looks like: where its energy lies in frequency and time, how it sweeps, and what follows it;
 * and whether two pulses look as if one animal had made them.
 *
 * The spectrum and the analytic signal (Gabor 1946; negative frequencies and what lies outside the class's
 * band removed) are taken of six pulse lengths around the arrival; the noise that the background explains is
 * taken off. What follows a pulse - the later pulses of a sperm whale's click, a surface echo - is told by
 * the autocorrelation of the band's envelope up to 10 ms (the multipulse structure is stable over an animal's
 * clicks: Gubnitsky and Diamant 2024, arXiv 2401.00900). */
#ifndef CALL_PULSE_SHAPE_H
#define CALL_PULSE_SHAPE_H

#include "base/status.h"
#include "call/catalogue.h"
#include "call/whitened.h"
#include <stdint.h>

#define PULSE_SHAPE_BANDS 8
#define PULSE_SHAPE_LAGS 32
#define PULSE_SHAPE_REACH_S 0.01 /* of the autocorrelation, at most */

struct pulse_shape {
    float peak_hz, centroid_hz;
    float bandwidth_hz; /* root mean square about the centroid */
    float length_s;     /* between the points 10 dB below the envelope's greatest */
    float sweep_hz_s;   /* of the instantaneous frequency where the envelope is within 8 dB of it */
    float bands_db[PULSE_SHAPE_BANDS]; /* share of the energy in each part of the class's band, 10 lg */
    float doubt_db[PULSE_SHAPE_BANDS]; /* what the noise makes of that, one standard deviation */
    float echoes[PULSE_SHAPE_LAGS]; /* autocorrelation of the envelope over its value at 0, less its mean */
    float echoes_doubt;             /* of each, one standard deviation */
    float echoes_energy;            /* sum of their squares */
};

struct pulse_shaper;

/* For pulses of one class in samples of rate_hz, with the band's power known in slots of slot_frames. Plans
 * its FFTs (not thread-safe: at start only). STATUS_NO_MEMORY. The caller owns *out. */
enum status pulse_shaper_create(const struct call_class *call_class, double rate_hz, uint32_t slot_frames,
                                struct pulse_shaper **out);
/* How much of the sound pulse_shaper_get reads where it is there: so many frames before and after the
 * arrival, so many slots before it and twice as many after. */
uint32_t pulse_shaper_frames(const struct pulse_shaper *shaper);
uint32_t pulse_shaper_slots(const struct pulse_shaper *shaper);

/* The sound around a pulse. Pointers are at the arrival; so many lie before it, and so many from it on. */
struct pulse_sound {
    const float *samples; /* pascals, unfiltered; samples[0] is the frame of the arrival */
    int64_t samples_before, samples_after;
    const float *power; /* mean square of each slot of the band, whitened */
    int64_t slots_before, slots_after;
    double background_pa2; /* mean square of the band's noise */
    struct noise_density density;
};
void pulse_shaper_get(struct pulse_shaper *shaper, const struct pulse_sound *sound, struct pulse_shape *out);
void pulse_shaper_destroy(struct pulse_shaper *shaper);

/* Of echoes[], as pulse_shaper_get leaves it: takes off the mean and sums the squares. For those who average
 * shapes. */
void pulse_shape_centre(struct pulse_shape *shape);

/* Logarithm of how much likelier two pulses look so if one animal made both than if two animals, or chance,
 * did: spectra within 3 dB of each other against within 7 dB, envelopes of like autocorrelation against
 * unlike. At most PULSE_SHAPE_MOST; without a lower limit. */
#define PULSE_SHAPE_MOST 8.0
double pulse_shape_likeness(const struct pulse_shape *a, const struct pulse_shape *b);
/* The same of their spectra alone: of what follows a pulse its echoes are part. */
double pulse_shape_alike_spectra(const struct pulse_shape *a, const struct pulse_shape *b);

#endif
