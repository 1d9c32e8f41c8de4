/* Cells of about 1 ms and their background. */
#include "level/impulse_cells.h"
#include "dsp/lanes.h"
#include <math.h>
#include <string.h>

#define SLOT_RATE_HZ 4000.0
#define SHORT_LOOK 8u
#define LONG_LOOK CELL_LONG_LOOK
#define MEMORY 3000.0   /* cells over which the background is averaged */
#define EVERY_CELL 1000 /* thresholds are renewed with every cell up to here, then with every so many */
#define SOME_CELLS 8
#define LEAST_RATIO 6.3 /* 8 dB: least threshold over the background */
#define LEAST_CLOSE 2.0
#define OPEN_DEVIATIONS 6.0  /* standard normal quantile of 1 - 1e-9 */
#define CLOSE_DEVIATIONS 3.1 /* of 1 - 1e-3 */

static const uint32_t look_cells[CELL_BANDS] = {24, 10, 8};

void cells_create(struct cells *cells, double rate_hz)
{
    cells->slot_frames = (uint32_t)lround(rate_hz / SLOT_RATE_HZ);
    cells->cell_frames = cells->slot_frames * CELL_SLOTS;
    const double slot_hz = rate_hz / cells->slot_frames;
    filter_band_pass(2, 15, 120, slot_hz, &cells->filters[0]);
    filter_band_pass(2, 120, 600, slot_hz, &cells->filters[1]);
    filter_high_pass(2, 600, slot_hz, &cells->filters[2]);
    cells_reset(cells);
}

void cells_reset(struct cells *cells)
{
    for (uint32_t b = 0; b < CELL_BANDS; b++)
        filter_reset(&cells->filters[b]);
    memset(cells->recent, 0, sizeof cells->recent);
    cells->next = 0;
}

const struct cell *cells_get(const struct cells *cells, uint64_t index)
{
    return &cells->ring[index % CELL_RING];
}

/* Sum and sum of squares of one slot, at most 250 samples. */
static void sum_slot(const float *x, uint32_t n, double *sum, double *squares)
{
    lanes sums = {0}, more_sums = {0}, square = {0}, more_square = {0};
    uint32_t i = 0;
    for (; i + 2 * LANES <= n; i += 2 * LANES) {
        lanes v = lanes_load(x + i), w = lanes_load(x + i + LANES);
        sums += v;
        more_sums += w;
        square += v * v;
        more_square += w * w;
    }
    *sum = lanes_sum(sums + more_sums);
    *squares = lanes_sum(square + more_square);
    for (; i < n; i++) {
        *sum += x[i];
        *squares += (double)x[i] * x[i];
    }
}

/* Sum of the last n cells' values; those before the first count as silence. Two sums side by side are faster.
 */
static double sum_last(const double *recent, uint64_t last, uint32_t n)
{
    double even = 0, odd = 0;
    for (uint32_t k = 0; k < n; k += 2) {
        even += recent[(last - k) % LONG_LOOK];
        odd += recent[(last - k - 1) % LONG_LOOK];
    }
    return even + odd;
}

/* The means over the last cells. */
static void look_back(struct cells *cells, struct cell *cell)
{
    const uint64_t last = cells->next + LONG_LOOK; /* so that looking back never passes 0 */
    for (uint32_t b = 0; b < CELL_BANDS; b++) {
        cells->recent[b][last % LONG_LOOK] = cell->band[b];
        cell->look[b] = sum_last(cells->recent[b], last, look_cells[b]) / look_cells[b];
    }
    double *totals = cells->recent[CELL_BANDS];
    totals[last % LONG_LOOK] = cell->total;
    cell->short_level = sum_last(totals, last, SHORT_LOOK) / SHORT_LOOK;
    cell->long_level = sum_last(totals, last, LONG_LOOK) / LONG_LOOK;
}

const struct cell *cells_push(struct cells *cells, const float *samples)
{
    struct cell *cell = &cells->ring[cells->next % CELL_RING];
    memset(cell, 0, sizeof *cell);
    for (uint32_t s = 0; s < CELL_SLOTS; s++) {
        double sum, squares;
        sum_slot(samples + s * cells->slot_frames, cells->slot_frames, &sum, &squares);
        cell->mean += sum / cells->cell_frames;
        cell->square += squares / cells->cell_frames;
        for (uint32_t b = 0; b < CELL_BANDS; b++) {
            double y = filter_step(&cells->filters[b], sum / cells->slot_frames);
            cell->band[b] += y * y / CELL_SLOTS;
        }
    }
    for (uint32_t b = 0; b < CELL_BANDS; b++)
        cell->total += cell->band[b];
    look_back(cells, cell);
    return cell;
}

/* Quantile of a gamma distribution over its mean (Wilson and Hilferty, 1931); relative variance 2 / freedom.
 */
static double gamma_quantile(double mean, double square, double deviations)
{
    double relative_variance = mean > 0 ? square / (mean * mean) - 1 : 1;
    double h = fmin(fmax(relative_variance, 2.0 / 60), 1.0) / 9;
    double root = 1 - h + deviations * sqrt(h);
    return root * root * root;
}

void background_learn(struct cell_background *background, const struct cell *cell)
{
    const double part = 1 / fmin((double)++background->n_cells, MEMORY);
    for (uint32_t b = 0; b < CELL_BANDS; b++) {
        background->look_mean[b] += part * (cell->look[b] - background->look_mean[b]);
        background->look_square[b] += part * (cell->look[b] * cell->look[b] - background->look_square[b]);
    }
    background->total += part * (cell->total - background->total);
    background->mean += part * (cell->mean - background->mean);
    background->square += part * (cell->square - background->square);
    if (background->n_cells > EVERY_CELL && background->n_cells % SOME_CELLS)
        return;
    for (uint32_t b = 0; b < CELL_BANDS; b++) {
        double mean = background->look_mean[b], square = background->look_square[b];
        background->open[b] = mean * fmax(LEAST_RATIO, gamma_quantile(mean, square, OPEN_DEVIATIONS));
        background->close[b] = mean * fmax(LEAST_CLOSE, gamma_quantile(mean, square, CLOSE_DEVIATIONS));
    }
}

bool background_passes(const struct cell *cell, const double threshold[CELL_BANDS])
{
    for (uint32_t b = 0; b < CELL_BANDS; b++)
        if (cell->look[b] > threshold[b])
            return true;
    return false;
}
