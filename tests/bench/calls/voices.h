/* Calls that are added to a rendered sea at a stated signal-to-noise ratio, so that the truth is known: each
 * is made by lib/scene's recipe and scaled by what the sea around it holds. */
#ifndef BENCH_CALLS_VOICES_H
#define BENCH_CALLS_VOICES_H

#include "base/random.h"
#include "bench/calls/calls.h"
#include "scene/emission.h"
#include "scene/kind.h"

/* How one kind of call is heard in a sea. */
struct voice {
    const char *kind;  /* of lib/scene */
    double snr_db;     /* tone: mean cell power over the median of the noise in the same bin; pulse: 20
                          lg(envelope's peak / standard deviation of the noise in the band) */
    double mean_gap_s; /* exponential, from one call's end to the next's start */
    double least_gap_s;
    uint32_t pulses;        /* of a train, or of a song of single calls */
    double window_s;        /* tone: of the spectrum in which the SNR is meant */
    double low_hz, high_hz; /* pulse: the band in which it is meant */
};

/* One call that was added. */
struct truth_call {
    uint32_t voice; /* index into the sea's voices */
    enum group group;
    enum call_form form;
    double start_s, end_s; /* since the sea's first frame */
    uint32_t n_pulses;
    double pulse_s[SCENE_MAX_PULSES];
    double pulse_length_s;
    bool is_given[SCENE_MAX_PULSES];
    uint32_t n_given; /* of its pulses */
    bool found;
};

/* A stretch of rendered sea, before calls are added to it. */
struct stretch {
    double rate_hz, start_s; /* of its first frame */
    uint32_t n;
    float *samples;
};

/* Median power of each bin of the stretch's spectra; [n_fft / 2 + 1], NULL without memory. */
float *stretch_medians(const struct stretch *stretch, uint32_t n_fft);
/* Standard deviation in a band, from the median of the power, which snaps and blows leave alone. */
double stretch_deviation(const struct stretch *stretch, double low_hz, double high_hz);

/* Draws the voice's next call at most max_s long. */
void voice_draw(const struct voice *voice, double rate_hz, struct random *random, struct emission *out);
/* The factor that brings the emission to the voice's SNR in this stretch; medians as of the voice's window.
 * 0 where it cannot be. */
double voice_gain(const struct voice *voice, const struct emission *emission, const struct stretch *stretch,
                  const float *medians, double deviation);
/* Adds it, beginning at_s after the stretch's first frame, and writes the truth. */
void voice_add(const struct emission *emission, double gain, double at_s, struct stretch *stretch,
               struct truth_call *out);

#endif
