/* Levels of one channel, one a second. */
#include "level/meter.h"
#include "base/units.h"
#include "dsp/lanes.h"
#include "level/decidecades.h"
#include "level/second_cells.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define DC_SECONDS 8
#define HELD SECOND_CELLS_HELD /* seconds whose bands are not complete yet, at most two in fact */

struct meter {
    uint32_t rate_hz, hop, n_bands;
    uint32_t fill, counted; /* frames in pending, and how many of them are in the sums */
    bool relative;
    uint64_t next_frame;
    uint64_t next_second;       /* the first not given yet */
    uint64_t start_frame[HELD]; /* of each second that is held: the first frame heard in it */
    bool heard[HELD];
    bool know_dc;
    double dc_pa; /* running mean of the samples, which is no sound */
    bool know_offset;
    float offset_pa; /* mean of the first hop, taken off before the decidecades so that they see no step */
    struct decidecades *decidecades;
    struct second_cells *cells;
    float *pending; /* [hop] frames on their way to the decidecades */
};

enum status meter_create(double rate_hz, bool relative, struct meter **out)
{
    if (!(rate_hz >= 8000) || !(rate_hz <= 1000000) || rate_hz != floor(rate_hz))
        return STATUS_BAD_ARGUMENT;
    struct meter *meter = calloc(1, sizeof *meter);
    if (!meter)
        return STATUS_NO_MEMORY;
    meter->rate_hz = (uint32_t)rate_hz;
    meter->relative = relative;
    meter->n_bands = decidecades_count(rate_hz);
    enum status status = decidecades_create(meter->rate_hz, &meter->decidecades);
    if (!status)
        status = second_cells_create(meter->rate_hz, relative ? 1e-6 : 1, &meter->cells);
    if (!status) {
        meter->hop = decidecades_get_hop(meter->decidecades);
        meter->pending = malloc(meter->hop * sizeof *meter->pending);
        status = meter->pending ? STATUS_OK : STATUS_NO_MEMORY;
    }
    if (status) {
        meter_destroy(meter);
        return status;
    }
    meter_reset(meter, 0);
    *out = meter;
    return STATUS_OK;
}

void meter_destroy(struct meter *meter)
{
    if (!meter)
        return;
    decidecades_destroy(meter->decidecades);
    second_cells_destroy(meter->cells);
    free(meter->pending);
    free(meter);
}

void meter_reset(struct meter *meter, uint64_t next_frame)
{
    meter->next_frame = next_frame;
    meter->next_second = next_frame / meter->rate_hz;
    meter->fill = meter->counted = 0;
    meter->know_dc = meter->know_offset = false;
    memset(meter->heard, 0, sizeof meter->heard);
    decidecades_reset(meter->decidecades, next_frame);
    second_cells_reset(meter->cells);
}

static double band_db(const struct decidecade_sums *sums, uint32_t band, double rate_hz)
{
    int n = LEVEL_FIRST_BAND + (int)band;
    double width_hz = decidecades_high_hz(n) - decidecades_low_hz(n);
    if (sums->frames[band] * width_hz < rate_hz)
        return NAN;
    return units_spl_db(sums->energy[band] / sums->frames[band]);
}

/* The first second's mean, then an average over about DC_SECONDS that the second itself is part of. */
static double follow_dc(struct meter *meter, double mean)
{
    meter->dc_pa += meter->know_dc ? (mean - meter->dc_pa) / DC_SECONDS : mean - meter->dc_pa;
    meter->know_dc = true;
    return meter->dc_pa;
}

static void give(struct meter *meter, const struct level_sink *sink)
{
    const uint64_t second = meter->next_second++;
    const struct second_facts facts = second_cells_get(meter->cells, second);
    const bool enough = facts.frames >= METER_SHORTEST_S * meter->rate_hz;
    const double dc = enough ? follow_dc(meter, facts.mean_pa) : meter->dc_pa;
    struct decidecade_sums sums;
    struct second_measures measures;
    decidecades_take(meter->decidecades, second, &sums);
    second_cells_take(meter->cells, second, dc, &measures);
    meter->heard[second % HELD] = false;
    if (!enough)
        return;
    struct found_level level = {.start_frame = meter->start_frame[second % HELD],
                                .known_frame = meter->next_frame - 1,
                                .frames = facts.frames,
                                .spl_db = units_spl_db(measures.mean_square_pa2),
                                .peak_db = units_peak_db(fmax(facts.greatest_pa - dc, dc - facts.least_pa)),
                                .fast_max_db = units_spl_db(measures.fast_max_pa2),
                                .slow_max_db = units_spl_db(measures.slow_max_pa2),
                                .moments = measures.moments,
                                .n_bands = meter->n_bands,
                                .relative = meter->relative};
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
        level.band_db[b] = b < meter->n_bands ? band_db(&sums, b, meter->rate_hz) : NAN;
    sink->take(sink->context, &level);
}

/* Gives a whole hop to the decidecades. */
static void push_hop(struct meter *meter)
{
    float *restrict x = meter->pending;
    if (!meter->know_offset) {
        double sum = 0;
        for (uint32_t i = 0; i < meter->hop; i++)
            sum += x[i];
        meter->offset_pa = (float)(sum / meter->hop);
        meter->know_offset = true;
    }
    const float offset = meter->offset_pa;
    for (uint32_t i = 0; i < meter->hop; i += LANES) /* a hop is a power of two */
        lanes_store(x + i, lanes_load(x + i) - offset);
    decidecades_push(meter->decidecades, x);
    meter->fill = meter->counted = 0;
}

/* Counts what is pending and not counted: it lies in one second. Called where a hop or a second ends, so that
 * the sums are the same for any chunking. */
static void count_pending(struct meter *meter)
{
    uint32_t n = meter->fill - meter->counted;
    if (n == 0)
        return;
    uint64_t from = meter->next_frame - n;
    const uint64_t slot = from / meter->rate_hz % HELD;
    if (!meter->heard[slot])
        meter->start_frame[slot] = from;
    meter->heard[slot] = true;
    second_cells_push(meter->cells, from, meter->pending + meter->counted, n);
    meter->counted = meter->fill;
}

void meter_push(struct meter *meter, const float *pascals, uint32_t n, const struct level_sink *sink)
{
    while (n) {
        uint64_t left = meter->rate_hz - meter->next_frame % meter->rate_hz;
        uint32_t take = n < meter->hop - meter->fill ? n : meter->hop - meter->fill;
        take = take < left ? take : (uint32_t)left;
        memcpy(meter->pending + meter->fill, pascals, take * sizeof *pascals);
        meter->fill += take;
        meter->next_frame += take;
        pascals += take;
        n -= take;
        if (take == left || meter->fill == meter->hop)
            count_pending(meter);
        if (meter->fill < meter->hop)
            continue;
        push_hop(meter);
        while ((meter->next_second + 1) * meter->rate_hz <= decidecades_get_complete(meter->decidecades))
            give(meter, sink);
    }
}

void meter_finish(struct meter *meter, const struct level_sink *sink)
{
    count_pending(meter);
    while (meter->next_second * meter->rate_hz < meter->next_frame)
        give(meter, sink);
    meter_reset(meter, meter->next_frame);
}
