/* What the parts of the tracer share: tones_trace.c (frames), tones_paths.c (recursion), tones_contour.c
 * (tracing back). Nobody else includes it. */
#ifndef CALL_TONES_FIELD_H
#define CALL_TONES_FIELD_H

#include "call/hidden.h"
#include "call/tones_trace.h"
#include "dsp/background.h"
#include "dsp/lanes.h"
#include "dsp/spectrum.h"
#include <string.h>

/* Reverberation: what has fallen this far below a path's recent level is its tail. A tail of shallow water
 * decays by a few dB a second: 7 on a recording of song in a bay. */
#define FLANK_GAIN (-1.5F) /* of a cell that is only the tail of its path, or the flank of a louder one */
#define TAIL_SHARE 0.063F  /* 12 dB */
#define TAIL_FALL_DB_S 6.0
#define SMOOTHING 0.33F /* of power, a frame ... */
#define GROWTH                                                                                               \
    4.0F /* ... of which at most so much more than before counts: a ping that splatters over a call          \
            must not make the rest of it a tail */

#define MAX_PATHS 48
#define NO_PATH (-1)
#define STEP_START INT8_MIN
#define TILE LANES /* cells that are worked on at once */
#define MAX_STEP 8 /* bins that a path may move in a frame */

struct path {
    bool open;
    float best;         /* highest score, no more than the ceiling */
    uint64_t first;     /* frame of its start */
    uint64_t last_rise; /* last frame at which the score reached its highest */
    uint32_t n_unheard; /* frames since then in which the own source covered it */
    uint32_t best_bin;  /* there */
    float tip;          /* highest score in the newest frame, and its bin */
    uint32_t tip_bin;
};

#define NOT_HEARD (-1.0F) /* instead of power over background: the own source covers the cell */

/* Stretches of input frames that the own source covers, in the bins [low, high). */
struct unheard {
    uint32_t low, high;
    bool is_now; /* in the frame at hand */
    struct hidden hidden;
};

/* One frame's cells of the recursion; [stride + 2 * MAX_STEP] with an empty margin of MAX_STEP in
 * front. */
struct cells {
    float *score, *slope;
    float *level, *peak; /* smoothed power of the path's cells over the background, and the highest of it,
                            slowly forgotten */
    int16_t *path;
    uint64_t *first;
};

struct tracer {
    struct tracer_setup setup;
    double frame_rate;  /* frames a second */
    float tail_fall;    /* what a recent level keeps in a frame */
    double bin_hz, hop; /* of the spectrum; hop in input frames */
    uint32_t n, n_bins, first_bin;
    uint32_t stride;        /* n_bins, rounded up to a multiple of TILE */
    uint32_t max_step, gap; /* bins a frame; frames that are bridged ... */
    uint32_t max_unheard;   /* ... besides those that the own source covers, at most so many */
    uint32_t n_history;

    struct spectrum *spectrum;
    struct background *background;
    uint64_t origin;    /* input frame of the first sample since the last gap */
    uint64_t n_shifted; /* samples that have left `held` since then */
    uint32_t n_held;
    float *held, *limited;
    float *power_store,
        *power; /* power[n / 2 + 1] in the middle of a store with margins of TILE and 2 * TILE */
    float *excess_store, *excess; /* [stride], over the background, with margins of TILE */

    uint64_t frame;                           /* that is being worked on, or the next */
    uint64_t newest;                          /* whose power is in the history */
    float *level, *smooth, *occupancy, *gain; /* [stride] */
    float *smooth_snr, *floor; /* [stride], over the background: a shot's frame is its own background */
    float *tail;               /* [stride]: TAIL_SHARE where a path ran in the frame before, else 0 */
    float *best;               /* [stride] of the recursion: the best score that leads to each cell */
    struct cells now, before;
    struct unheard unheard[GATE_BANDS];
    bool is_slow; /* its window outlasts a blow */
    struct path paths[MAX_PATHS];
    uint32_t n_paths; /* all that are open are among the first so many */

    double *centre;       /* [n_history]: input frame of each frame's middle */
    int8_t *history_step; /* [n_history][stride]: how far the best comes that leads to each, or STEP_START */
    float *history_power, *history_snr;
    uint32_t *trail;  /* [n_history]: bins of the path being traced back, the last first ... */
    double *trail_hz; /* ... and their refined frequencies */
};

static inline uint32_t tracer_row(const struct tracer *tracer, uint64_t frame)
{
    return (uint32_t)(frame % tracer->n_history);
}

/* tones_unheard.c: of the frame that is held. Silences the samples that the own source covers, where the
 * window outlasts it, and returns how many are left. */
uint32_t unheard_silence(struct tracer *tracer);
/* What the power of such a frame lacks, 1 or more; 0 where it is too little to be heard. */
double unheard_make_good(const struct tracer *tracer);
/* Puts in the place of what the own source covers in this frame what the bins held before ... */
void unheard_replace(struct tracer *tracer);
/* ... and takes what these cells say of a tone out of gain and history. */
void unheard_clear(struct tracer *tracer);
/* tones_paths.c: one frame of the recursion over tracer->gain, then paths that begin and end. */
void paths_advance(struct tracer *tracer, const struct trace_sink *sink);
/* Ends all open paths. */
void paths_end(struct tracer *tracer, const struct trace_sink *sink);
/* tones_contour.c: traces an open path back to its start; without `whole` only times, course and level. */
void contour_trace(struct tracer *tracer, const struct path *path, bool whole, struct contour *out);
/* tones_sidebands.c: distance of the lines beside the n cells of the trail that ends at frame `last`, or 0.
 */
double contour_sideband_hz(const struct tracer *tracer, uint64_t last, uint32_t n);

#endif
