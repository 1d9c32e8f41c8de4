/* Sums of cells of about 1 ms. */
#include "level/second_cells.h"
#include "dsp/lanes.h"
#include "level/time_weighting.h"
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define CELL_RATE_HZ 1000u
#define RUN 128u /* samples summed in single precision before the double sums take them */

struct cell_sums {
    double sum, squares; /* of y = (x - shift) / unit */
    uint32_t frames;
};

struct second_sums {
    uint32_t frames;
    double cubes, fourths;
    float least, greatest;   /* of x */
    struct cell_sums *cells; /* [n_cells] */
};

struct second_cells {
    uint32_t rate_hz, cell_frames, n_cells;
    float unit, shift; /* in pascals; the shift is what the first samples were about */
    bool know_shift;
    struct time_weighting weighting;
    struct time_weighting_decay decay; /* of a whole cell */
    struct second_sums seconds[SECOND_CELLS_HELD];
    struct cell_sums *sums; /* [SECOND_CELLS_HELD * n_cells] */
};

enum status second_cells_create(uint32_t rate_hz, double unit_pa, struct second_cells **out)
{
    struct second_cells *cells = calloc(1, sizeof *cells);
    if (!cells)
        return STATUS_NO_MEMORY;
    cells->rate_hz = rate_hz;
    cells->unit = (float)unit_pa;
    cells->cell_frames = rate_hz / CELL_RATE_HZ;
    cells->n_cells = (rate_hz + cells->cell_frames - 1) / cells->cell_frames;
    cells->decay = time_weighting_decay((double)cells->cell_frames / rate_hz);
    cells->sums = calloc((size_t)SECOND_CELLS_HELD * cells->n_cells, sizeof *cells->sums);
    if (!cells->sums) {
        second_cells_destroy(cells);
        return STATUS_NO_MEMORY;
    }
    for (uint32_t s = 0; s < SECOND_CELLS_HELD; s++)
        cells->seconds[s].cells = cells->sums + (size_t)s * cells->n_cells;
    *out = cells;
    return STATUS_OK;
}

void second_cells_destroy(struct second_cells *cells)
{
    if (!cells)
        return;
    free(cells->sums);
    free(cells);
}

static void clear_second(struct second_cells *cells, struct second_sums *second)
{
    memset(second->cells, 0, cells->n_cells * sizeof *second->cells);
    second->frames = 0;
    second->cubes = second->fourths = 0;
}

void second_cells_reset(struct second_cells *cells)
{
    for (uint32_t s = 0; s < SECOND_CELLS_HELD; s++)
        clear_second(cells, &cells->seconds[s]);
    cells->weighting = (struct time_weighting){0};
    cells->know_shift = false;
}

/* Halves are added to each other first: the order does not depend on the register's width. */
static double sum_halves(const wide_lanes *x)
{
    lanes halves[2];
    memcpy(halves, x, sizeof halves);
    return lanes_sum(halves[0] + halves[1]);
}

/* Adds whole vectors, at most RUN samples. Sixteen additions in single precision err by 1e-6 at most, 5e-6
 * dB. */
LANES_WIDE static void add_vectors(const struct second_cells *cells, struct second_sums *second,
                                   struct cell_sums *cell, const float *x, uint32_t n)
{
    const float shift = cells->shift, per_unit = 1 / cells->unit;
    wide_lanes sum = {0}, squares = {0}, cubes = {0}, fourths = {0}, here;
    wide_lanes least = WIDE_ALL(second->least), greatest = WIDE_ALL(second->greatest);
    for (uint32_t i = 0; i < n; i += WIDE_LANES) {
        wide_load(&here, x + i);
        const wide_lanes y = (here - shift) * per_unit, square = y * y;
        sum += y;
        squares += square;
        cubes += square * y;
        fourths += square * square;
        least = WIDE_CHOOSE(here < least, here, least);
        greatest = WIDE_CHOOSE(here > greatest, here, greatest);
    }
    cell->sum += sum_halves(&sum);
    cell->squares += sum_halves(&squares);
    second->cubes += sum_halves(&cubes);
    second->fourths += sum_halves(&fourths);
    for (uint32_t lane = 0; lane < WIDE_LANES; lane++) {
        second->least = least[lane] < second->least ? least[lane] : second->least;
        second->greatest = greatest[lane] > second->greatest ? greatest[lane] : second->greatest;
    }
}

/* Adds at most RUN samples of one cell. */
static void add_run(const struct second_cells *cells, struct second_sums *second, struct cell_sums *cell,
                    const float *x, uint32_t n)
{
    const uint32_t in_vectors = n - n % WIDE_LANES;
    if (second->frames == 0)
        second->least = second->greatest = x[0];
    add_vectors(cells, second, cell, x, in_vectors);
    for (uint32_t i = in_vectors; i < n; i++) {
        double y = (x[i] - cells->shift) / cells->unit, square = y * y;
        cell->sum += y;
        cell->squares += square;
        second->cubes += square * y;
        second->fourths += square * square;
        second->least = x[i] < second->least ? x[i] : second->least;
        second->greatest = x[i] > second->greatest ? x[i] : second->greatest;
    }
    cell->frames += n;
    second->frames += n;
}

void second_cells_push(struct second_cells *cells, uint64_t from, const float *pascals, uint32_t n)
{
    struct second_sums *second = &cells->seconds[from / cells->rate_hz % SECOND_CELLS_HELD];
    uint32_t at = (uint32_t)(from % cells->rate_hz);
    if (!cells->know_shift && n > 0) {
        double sum = 0;
        for (uint32_t i = 0; i < n; i++)
            sum += pascals[i];
        cells->shift = (float)(sum / n);
        cells->know_shift = true;
    }
    while (n > 0) {
        uint32_t index = at / cells->cell_frames, room = (index + 1) * cells->cell_frames - at;
        uint32_t take = n < room ? n : room;
        take = take < RUN ? take : RUN;
        add_run(cells, second, &second->cells[index], pascals, take);
        at += take;
        pascals += take;
        n -= take;
    }
}

/* The mean square about dc of a cell whose sums are about the shift. */
static double mean_square_pa2(const struct second_cells *cells, const struct cell_sums *cell, double dc_pa)
{
    double unit = cells->unit, off = (dc_pa - cells->shift) / unit;
    double mean_square = (cell->squares - 2 * off * cell->sum) / cell->frames + off * off;
    return fmax(mean_square, 0) * unit * unit;
}

struct second_facts second_cells_get(const struct second_cells *cells, uint64_t second_number)
{
    const struct second_sums *second = &cells->seconds[second_number % SECOND_CELLS_HELD];
    if (second->frames == 0)
        return (struct second_facts){0};
    double sum = 0;
    for (uint32_t c = 0; c < cells->n_cells; c++)
        sum += second->cells[c].sum;
    return (struct second_facts){.frames = second->frames,
                                 .mean_pa = sum / second->frames * cells->unit + cells->shift,
                                 .least_pa = second->least,
                                 .greatest_pa = second->greatest};
}

void second_cells_take(struct second_cells *cells, uint64_t second_number, double dc_pa,
                       struct second_measures *out)
{
    struct second_sums *second = &cells->seconds[second_number % SECOND_CELLS_HELD];
    struct time_weighting *weighting = &cells->weighting;
    double sums[4] = {0, 0, second->cubes, second->fourths};
    time_weighting_begin(weighting);
    for (uint32_t c = 0; c < cells->n_cells; c++) {
        const struct cell_sums *cell = &second->cells[c];
        if (cell->frames == 0)
            continue;
        sums[0] += cell->sum;
        sums[1] += cell->squares;
        struct time_weighting_decay decay = cell->frames == cells->cell_frames
                                                ? cells->decay
                                                : time_weighting_decay((double)cell->frames / cells->rate_hz);
        time_weighting_push(weighting, mean_square_pa2(cells, cell, dc_pa), decay);
    }
    struct moments moments = moments_of_sums(second->frames, sums, 0);
    const double unit = cells->unit, unit2 = unit * unit;
    const struct cell_sums whole = {sums[0], sums[1], second->frames};
    *out = (struct second_measures){
        .mean_square_pa2 = second->frames ? mean_square_pa2(cells, &whole, dc_pa) : 0,
        .fast_max_pa2 = weighting->fast_max_pa2,
        .slow_max_pa2 = weighting->slow_max_pa2,
        .moments = {moments.n, moments.mean * unit + cells->shift, moments.sum2 * unit2,
                    moments.sum3 * unit2 * unit, moments.sum4 * unit2 * unit2}};
    clear_second(cells, second);
}
