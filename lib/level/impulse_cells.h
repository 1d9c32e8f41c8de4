/* What the impulse finder looks at: one channel as cells of about 1 ms with the level of three bands, and the
 * background that they are compared with. For lib/level/impulses.c only; the method stands in
 * level/impulses.h. */
#ifndef LEVEL_IMPULSE_CELLS_H
#define LEVEL_IMPULSE_CELLS_H

#include "dsp/filter.h"
#include <stdbool.h>
#include <stdint.h>

#define CELL_BANDS 3u
#define CELL_SLOTS 4u /* of about 0.25 ms each */
#define CELL_LONG_LOOK 32u
#define CELL_RING 2048u /* cells remembered: more than the longest window */

/* One cell: mean squares of the bands, of the bands' looks that end with it, and of its own samples. */
struct cell {
    double band[CELL_BANDS], look[CELL_BANDS];
    double total;                   /* sum of the bands */
    double short_level, long_level; /* its mean over 8 and 32 cells */
    double mean, square;            /* of the samples, all frequencies */
};

struct cells {
    uint32_t slot_frames, cell_frames;
    struct filter filters[CELL_BANDS];
    uint64_t next;                                 /* index of the next cell, from 0 at the reset */
    double recent[CELL_BANDS + 1][CELL_LONG_LOOK]; /* of each band and their total, by index */
    struct cell ring[CELL_RING];
};

struct cell_background {
    double look_mean[CELL_BANDS], look_square[CELL_BANDS];
    double open[CELL_BANDS], close[CELL_BANDS]; /* thresholds of the looks */
    double total, mean, square;                 /* as in a cell */
    uint64_t n_cells;                           /* learned from */
};

/* rate_hz 8,000 to 1,000,000. */
void cells_create(struct cells *cells, double rate_hz);
void cells_reset(struct cells *cells);
/* A cell that is still remembered. */
const struct cell *cells_get(const struct cells *cells, uint64_t index);
/* Makes cell cells->next from its cell_frames samples; the caller counts next up when it is done with it. */
const struct cell *cells_push(struct cells *cells, const float *samples);

/* Averages a quiet cell in: all cells alike at first, over the last 3 s later. */
void background_learn(struct cell_background *background, const struct cell *cell);
/* Whether any band's look is above its threshold. */
bool background_passes(const struct cell *cell, const double threshold[CELL_BANDS]);

#endif
