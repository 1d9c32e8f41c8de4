/* The seconds of one channel as cells of about 1 ms, in one pass over the samples: their sums and extremes,
 * and from the cells time weighting (level/time_weighting.h) and moments (level/moments.h). Cells begin with
 * the second, so nothing depends on how the sound is cut. For lib/level/meter.c. */
#ifndef LEVEL_SECOND_CELLS_H
#define LEVEL_SECOND_CELLS_H

#include "base/status.h"
#include "level/moments.h"
#include <stdint.h>

#define SECOND_CELLS_HELD 4u /* seconds that may be open at once */

struct second_cells;

/* What a second's samples are like before their offset is known. */
struct second_facts {
    uint32_t frames;
    double mean_pa, least_pa, greatest_pa;
};

struct second_measures {
    double mean_square_pa2;            /* about dc_pa, not below 0 */
    double fast_max_pa2, slow_max_pa2; /* greatest weighted mean square in the second, about dc_pa */
    struct moments moments;            /* in pascals */
};

/* unit_pa: what a usual sample is like (1e-6 on a relative channel), so that fourth powers stay in the range
 * of single precision. STATUS_NO_MEMORY; the caller owns *out. */
enum status second_cells_create(uint32_t rate_hz, double unit_pa, struct second_cells **out);
void second_cells_destroy(struct second_cells *cells);
void second_cells_reset(struct second_cells *cells);
/* Adds n samples that begin at frame `from` of the stream and lie in one second. */
void second_cells_push(struct second_cells *cells, uint64_t from, const float *pascals, uint32_t n);
/* A second that is held: all zero where nothing was heard of it. */
struct second_facts second_cells_get(const struct second_cells *cells, uint64_t second);
/* Gives the measures of a second, in order of seconds, and forgets it. */
void second_cells_take(struct second_cells *cells, uint64_t second, double dc_pa,
                       struct second_measures *out);

#endif
