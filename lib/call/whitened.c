/* Band power, weighted by parts. */
#include "call/whitened.h"
#include "call/sliding.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SPARE_BLOCKS                                                                                         \
    16 /* for which the row has room before its history is moved to its front, at least, ... */
#define SPARE_HISTORIES 1 /* ... or so many times the history */

struct part {
    double share; /* of the band's width */
    float weight;
    struct window_median median;
    float settle[WINDOW_MEDIAN_SETTLE];
};

struct whitened {
    struct whitened_setup setup;
    struct part parts[BANDS_MAX_PARTS];
    bool settled;
    uint32_t stride, at; /* of the row, and where in it the last block begins */
    float *row;          /* NULL for a band of one part */
};

static const float *part_power(const struct whitened *whitened, uint32_t p)
{
    const struct whitened_setup *setup = &whitened->setup;
    return bands_get_power(setup->bands, setup->parts.bands[p]) - setup->parts.late_slots[p];
}

enum status whitened_create(const struct whitened_setup *setup, struct whitened **out)
{
    struct whitened *whitened = calloc(1, sizeof *whitened);
    if (!whitened)
        return STATUS_NO_MEMORY;
    double width = 0;
    enum status status = STATUS_OK;
    whitened->setup = *setup;
    for (uint32_t p = 0; p < setup->parts.n && status == STATUS_OK; p++) {
        struct band_edges edges = bands_get_edges(setup->bands, setup->parts.bands[p]);
        struct window_statistics statistics = {.freedom = 1, .skewness = 1};
        struct band_parts alone = {.n = 1, .bands = {setup->parts.bands[p]}};
        status = bands_get_statistics(setup->bands, &alone, setup->window, 0, &statistics);
        whitened->parts[p].share = edges.high_hz - edges.low_hz;
        whitened->parts[p].median = window_median_of(&statistics, setup->step);
        width += whitened->parts[p].share;
    }
    for (uint32_t p = 0; p < setup->parts.n; p++)
        whitened->parts[p].share /= width;
    if (setup->parts.n > 1) {
        whitened->stride = (1 + SPARE_HISTORIES) * setup->history_slots + SPARE_BLOCKS * setup->block_slots;
        whitened->row = calloc(whitened->stride, sizeof *whitened->row);
        status = whitened->row ? status : STATUS_NO_MEMORY;
    }
    if (status != STATUS_OK) {
        whitened_destroy(whitened);
        return status;
    }
    whitened_reset(whitened);
    *out = whitened;
    return STATUS_OK;
}

void whitened_reset(struct whitened *whitened)
{
    for (uint32_t p = 0; p < whitened->setup.parts.n; p++) {
        window_median_reset(&whitened->parts[p].median);
        whitened->parts[p].weight = 1;
    }
    whitened->settled = false;
    whitened->at = whitened->setup.history_slots;
    if (whitened->row)
        memset(whitened->row, 0, whitened->stride * sizeof *whitened->row);
}

static double whole_background(const struct whitened *whitened)
{
    double sum = 0;
    for (uint32_t p = 0; p < whitened->setup.parts.n; p++)
        sum += whitened->parts[p].median.mean_pa2;
    return sum;
}

static void find_weights(struct whitened *whitened)
{
    double sum = whole_background(whitened);
    for (uint32_t p = 0; p < whitened->setup.parts.n; p++)
        whitened->parts[p].weight =
            (float)(whitened->parts[p].share * sum / whitened->parts[p].median.mean_pa2);
}

LANES_WIDE static void add_weighted(const float *restrict power, float weight, uint32_t n,
                                    float *restrict row)
{
    for (uint32_t i = 0; i < n; i++)
        row[i] += weight * power[i];
}

/* Weights n slots from `first` on. */
static void weight_slots(struct whitened *whitened, int64_t first, uint32_t n)
{
    float *row = whitened->row + whitened->at + first;
    memset(row, 0, n * sizeof *row);
    for (uint32_t p = 0; p < whitened->setup.parts.n; p++)
        add_weighted(part_power(whitened, p) + first, whitened->parts[p].weight, n, row);
}

void whitened_push(struct whitened *whitened)
{
    const struct whitened_setup *setup = &whitened->setup;
    if (!whitened->row)
        return;
    whitened->at += setup->block_slots;
    if (whitened->at + setup->block_slots > whitened->stride) {
        memmove(whitened->row, whitened->row + whitened->at - setup->history_slots,
                setup->history_slots * sizeof *whitened->row);
        whitened->at = setup->history_slots;
    }
    if (whitened->settled)
        find_weights(whitened);
    weight_slots(whitened, 0, setup->block_slots);
}

const float *whitened_get_power(const struct whitened *whitened)
{
    return whitened->row ? whitened->row + whitened->at : part_power(whitened, 0);
}

void whitened_settle_on(struct whitened *whitened, int64_t slot, uint32_t number)
{
    for (uint32_t p = 0; p < whitened->setup.parts.n; p++)
        whitened->parts[p].settle[number] =
            (float)window_power(part_power(whitened, p), slot, whitened->setup.window);
}

void whitened_settle(struct whitened *whitened, float *out)
{
    const struct whitened_setup *setup = &whitened->setup;
    float windows[WINDOW_MEDIAN_SETTLE];
    for (uint32_t p = 0; p < setup->parts.n; p++) {
        memcpy(windows, whitened->parts[p].settle, sizeof windows);
        window_median_settle(&whitened->parts[p].median, windows);
    }
    whitened->settled = true;
    if (whitened->row)
        find_weights(whitened);
    memset(out, 0, WINDOW_MEDIAN_SETTLE * sizeof *out);
    for (uint32_t p = 0; p < setup->parts.n; p++)
        for (uint32_t i = 0; i < WINDOW_MEDIAN_SETTLE; i++)
            out[i] += whitened->parts[p].weight * whitened->parts[p].settle[i];
    if (whitened->row) { /* the oldest slots may be too late for a part that is taken late */
        uint32_t late = 0;
        for (uint32_t p = 0; p < setup->parts.n; p++)
            late = setup->parts.late_slots[p] > late ? setup->parts.late_slots[p] : late;
        weight_slots(whitened, (int64_t)late - setup->history_slots,
                     setup->history_slots - late + setup->block_slots);
    }
}

void whitened_follow(struct whitened *whitened, int64_t slot)
{
    if (!whitened->row)
        return;
    for (uint32_t p = 0; p < whitened->setup.parts.n; p++)
        window_median_follow(&whitened->parts[p].median,
                             window_power(part_power(whitened, p), slot, whitened->setup.window));
}

double whitened_get_excess(const struct whitened *whitened, int64_t slot, double background_pa2)
{
    double excess = 0;
    for (uint32_t p = 0; p < whitened->setup.parts.n; p++) {
        double background = whitened->row ? whitened->parts[p].median.mean_pa2 : background_pa2;
        double power = window_power(part_power(whitened, p), slot, whitened->setup.window);
        excess += fmax(0, power - background);
    }
    return excess;
}

double whitened_sum(const struct whitened *whitened, int64_t first, uint32_t n)
{
    double sum = 0;
    for (uint32_t p = 0; p < whitened->setup.parts.n; p++)
        sum += short_sum(part_power(whitened, p) + first, n);
    return sum;
}

double whitened_block_sum(const struct whitened *whitened)
{
    const struct whitened_setup *setup = &whitened->setup;
    double sum = 0;
    for (uint32_t p = 0; p < setup->parts.n; p++) {
        const uint32_t band = setup->parts.bands[p], late = setup->parts.late_slots[p];
        const float *power = bands_get_power(setup->bands, band);
        sum += bands_get_block_sum(setup->bands, band);
        if (late > 0)
            sum += short_sum(power - late, late) - short_sum(power + setup->block_slots - late, late);
    }
    return sum;
}

struct noise_density whitened_get_density(const struct whitened *whitened, double background_pa2)
{
    const struct whitened_setup *setup = &whitened->setup;
    struct noise_density density = {.n = setup->parts.n};
    double sum = whitened->row ? whole_background(whitened) : 1;
    for (uint32_t p = 0; p < density.n; p++) {
        struct band_edges edges = bands_get_edges(setup->bands, setup->parts.bands[p]);
        double share = whitened->row ? whitened->parts[p].median.mean_pa2 / sum : 1;
        density.middle_hz[p] = sqrt(edges.low_hz * edges.high_hz);
        density.pa2_hz[p] = background_pa2 * share / (edges.high_hz - edges.low_hz);
    }
    return density;
}

double noise_density_at(const struct noise_density *density, double hz)
{
    if (density->n < 2)
        return density->pa2_hz[0];
    uint32_t p = 0;
    while (p + 2 < density->n && hz > density->middle_hz[p + 1])
        p++;
    double slope = log(density->pa2_hz[p + 1] / density->pa2_hz[p]) /
                   log(density->middle_hz[p + 1] / density->middle_hz[p]);
    return density->pa2_hz[p] * pow(hz / density->middle_hz[p], slope);
}

double noise_density_slope(const struct noise_density *density)
{
    uint32_t last = density->n - 1;
    if (last == 0)
        return 0;
    return 10 * log10(density->pa2_hz[last] / density->pa2_hz[0]) /
           log10(density->middle_hz[last] / density->middle_hz[0]);
}

void whitened_destroy(struct whitened *whitened)
{
    if (!whitened)
        return;
    free(whitened->row);
    free(whitened);
}
