/* The tracer of one spectrum window: sound in, contours out. Used by tones.c only.
 *
 * Each frame's cells (power over background) give log-likelihood ratios of a fading tone against Gaussian
 * noise; a path through the cells adds them up, less the log-probability of each step from the slope that the
 * path has so far (Viterbi's recursion, as Suzuki and Buck 2000 for whistles), and starts anew wherever the
 * sum falls below 0 (the test of Page 1954). So the score of a path is a likelihood ratio, and by Ville's
 * inequality noise makes it exceed h from a given start with a probability of at most exp(-h): the threshold
 * follows from the number of cells an hour and the false calls an hour that a class allows. A path that stops
 * rising ends after the bridged gap and is traced back. */
#ifndef CALL_TONES_TRACE_H
#define CALL_TONES_TRACE_H

#include "base/status.h"
#include "call/gate.h"
#include <stdbool.h>
#include <stdint.h>

#define TRACE_POINTS 192

struct contour {
    double start_frame, end_frame; /* input frames */
    float hz[TRACE_POINTS];        /* along it, evenly from start to end */
    double low_hz, high_hz, sweep_hz;
    double snr;         /* mean of cell power over background */
    double contrast;    /* mean of cell power over that of the cells beside it: 1 is as broad as the band */
    double occupancy;   /* share of the last half minute in which its cells were full */
    double fall_db_s;   /* how fast its level falls */
    double remains;     /* power where it ended, from then until it was given up, over that along it */
    double sideband_hz; /* distance of the nearest lines that run beside it, above and below; 0: none */
    double mean_square; /* Pa2, of the cells along it */
    double score;
    double bin_hz;
    double bend_hz; /* rms departure from a straight line: little for what sweeps at a constant rate */
    double jump_hz; /* mean size of the second difference from frame to frame: much for what hops */
    double seconds;
    uint32_t n_cells; /* frames it was traced over */
    uint32_t tracer;  /* filled by the owner */
};

enum trace_end { TRACE_CONTOUR, TRACE_STEADY_LINE, TRACE_TOO_MANY };

struct trace_sink {
    void (*take)(void *context, enum trace_end end, const struct contour *contour);
    void *context;
};

struct tracer_setup {
    double rate_hz;       /* of the input, in whose frames times are */
    uint32_t factor;      /* the tracer's samples are decimated by this ... */
    double late_frames;   /* ... which delays them by so many input frames */
    double window_s;      /* of the spectrum */
    double low_hz;        /* band that is traced */
    double high_hz;       /* at most half of the decimated rate */
    double max_rate_hz_s; /* steepest change that is followed */
    double max_s;         /* longest contour; a longer one is a steady line, or ends as a piece */
    double delay_s;       /* from the end of a contour to the input frame at which it must be known */
    double threshold;     /* score from which a path is a contour */
    double ceiling;       /* that a score does not exceed */
    bool tells_sidebands; /* a class of it asks for them: else sideband_hz is 0 */
};

/* Whether a contour (traced whole) stays where it is, but for single cells: a machine's line drifts by less
 * than 1 % in 10 s, a short one cannot be told so finely. */
bool contour_is_flat(const struct contour *contour);
/* Whether its second half does so: a line that rose out of noise, or was first traced beside another one. */
bool contour_settles(const struct contour *contour);

struct tracer;

/* STATUS_BAD_ARGUMENT when the window holds less than 16 samples or the delay is shorter than the window. */
enum status tracer_create(const struct tracer_setup *setup, struct tracer **out);
void tracer_destroy(struct tracer *tracer);
/* Takes n decimated samples and gives the contours that end with them. A TRACE_TOO_MANY has no contour
 * (NULL). */
void tracer_push(struct tracer *tracer, const float *samples, uint32_t n, const struct trace_sink *sink);
/* Ends the open contours; the next sample is input frame `next_frame`. The background is kept. */
void tracer_end(struct tracer *tracer, uint64_t next_frame, const struct trace_sink *sink);
/* From the next samples on the own source's tail is heard in [low_hz, high_hz) (`true`), or no more. */
void tracer_set_tail(struct tracer *tracer, double low_hz, double high_hz, bool is_heard);
/* What the own source's last impulse covers of the gate's band number b (below GATE_BANDS), as far as it is
 * known: cells of those frames say nothing (tones_unheard.c). */
void tracer_set_masked(struct tracer *tracer, uint32_t b, const struct gate_tail_band *band);
/* Contours that are open now: their times, hz, low_hz, high_hz, bin_hz and mean_square
 * only. Returns how many were written. */
uint32_t tracer_get_open(struct tracer *tracer, struct contour *out, uint32_t max_count);
/* Cells a second of the band: from each of them noise could begin a path. */
double tracer_cells_per_s(const struct tracer_setup *setup);

#endif
