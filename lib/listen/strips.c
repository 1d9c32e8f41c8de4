/* Strips of sound; see strips.h. Low band from a decimated signal, middle and high from the input's rate. */
#include "listen/strips.h"
#include "base/units.h"
#include "dsp/decimate.h"
#include "dsp/spectrum.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define FRAME 2048     /* of the middle and high bands, at the input's rate */
#define LOW_FRAME 1024 /* of the low band, at the decimated rate */
#define LOW_RATE_HZ 5000.0
#define COLUMNS_PER_S 4
#define RELATIVE_OFFSET_DB 150.0

static const double band_edges_hz[COLUMN_BANDS + 1] = {20, 2000, 20000, 200000};

struct strips {
    double rate_hz, low_rate_hz;
    bool relative;
    struct decimator *decimator;
    struct spectrum *spectrum, *low_spectrum;
    uint64_t next_frame, column; /* the column that is being filled */
    bool whole;                  /* it has been filled from its first frame */
    float *samples;              /* [column_frames], at the input's rate */
    float *low;                  /* [column's frames after decimation, and a few] */
    float *decimated;            /* [column_frames] scratch */
    size_t n_samples, n_low, column_frames, low_capacity;
    float power[FRAME / 2 + 1];
    double sum[FRAME / 2 + 1];
};

static uint32_t low_factor(double rate_hz)
{
    for (uint32_t factor = (uint32_t)(rate_hz / LOW_RATE_HZ); factor > 1; factor--) {
        uint32_t rest = factor;
        static const uint32_t primes[] = {2, 3, 5, 7, 11, 13};
        for (size_t i = 0; i < sizeof primes / sizeof primes[0]; i++)
            while (rest % primes[i] == 0)
                rest /= primes[i];
        if (rest == 1)
            return factor;
    }
    return 1;
}

enum status strips_create(double rate_hz, bool relative, struct strips **out)
{
    if (!(rate_hz >= 8000 && rate_hz <= 1e6))
        return STATUS_BAD_ARGUMENT;
    struct strips *strips = calloc(1, sizeof *strips);
    if (!strips)
        return STATUS_NO_MEMORY;
    uint32_t factor = low_factor(rate_hz);
    strips->rate_hz = rate_hz;
    strips->low_rate_hz = rate_hz / factor;
    strips->relative = relative;
    strips->whole = true;
    strips->column_frames = (size_t)(rate_hz / COLUMNS_PER_S) + 1;
    strips->low_capacity = strips->column_frames / factor + 2;
    strips->samples = calloc(strips->column_frames, sizeof(float));
    strips->decimated = calloc(strips->column_frames + 1, sizeof(float));
    strips->low = calloc(strips->low_capacity, sizeof(float));
    bool made = strips->samples && strips->decimated && strips->low;
    enum status status = made ? decimator_create(factor, &strips->decimator) : STATUS_NO_MEMORY;
    if (status == STATUS_OK)
        status = spectrum_create(FRAME, WINDOW_HANN, &strips->spectrum);
    if (status == STATUS_OK)
        status = spectrum_create(LOW_FRAME, WINDOW_HANN, &strips->low_spectrum);
    if (status != STATUS_OK) {
        strips_destroy(strips);
        return status;
    }
    *out = strips;
    return STATUS_OK;
}

void strips_destroy(struct strips *strips)
{
    if (!strips)
        return;
    decimator_destroy(strips->decimator);
    spectrum_destroy(strips->spectrum);
    spectrum_destroy(strips->low_spectrum);
    free(strips->samples);
    free(strips->decimated);
    free(strips->low);
    free(strips);
}

static uint64_t column_start(const struct strips *strips, uint64_t column)
{
    return (uint64_t)((double)column * strips->rate_hz / COLUMNS_PER_S);
}

void strips_reset(struct strips *strips, uint64_t next_frame)
{
    decimator_reset(strips->decimator);
    strips->next_frame = next_frame;
    strips->column = (uint64_t)((double)next_frame * COLUMNS_PER_S / strips->rate_hz);
    while (column_start(strips, strips->column + 1) <= next_frame)
        strips->column++;
    strips->whole = column_start(strips, strips->column) == next_frame;
    strips->n_samples = strips->n_low = 0;
}

/* Mean power of a column's frames, [n / 2 + 1], into strips->sum. */
static void average(struct strips *strips, struct spectrum *spectrum, const float *samples, size_t count,
                    uint32_t n)
{
    memset(strips->sum, 0, sizeof strips->sum);
    uint32_t frames = count < 2 * n ? 1 : 3;
    for (uint32_t i = 0; i < frames; i++) {
        size_t at = frames == 1 ? 0 : (count - n) * i / (frames - 1);
        spectrum_power(spectrum, samples + at, strips->power);
        for (uint32_t k = 0; k <= n / 2; k++)
            strips->sum[k] += (double)strips->power[k] / frames;
    }
}

static uint8_t level_step(const struct strips *strips, double density_pa2_hz)
{
    double db = units_spl_db(density_pa2_hz) + (strips->relative ? RELATIVE_OFFSET_DB : 0);
    double step = (db - COLUMN_FLOOR_DB) / COLUMN_STEP_DB;
    return (uint8_t)(step > 0 ? (step < 255 ? step : 255) : 0);
}

static void fill_rows(const struct strips *strips, double rate_hz, uint32_t n, struct column *column)
{
    double bin_hz = rate_hz / n, ratio = pow(column->high_hz / column->low_hz, 1.0 / COLUMN_ROWS);
    double edge = column->low_hz;
    for (uint32_t row = 0; row < COLUMN_ROWS; row++, edge *= ratio) {
        uint32_t first = (uint32_t)(edge / bin_hz + 0.5), last = (uint32_t)(edge * ratio / bin_hz + 0.5);
        last = last > first ? last - 1 : first;
        double sum = 0;
        for (uint32_t k = first; k <= last && k <= n / 2; k++)
            sum += strips->sum[k];
        column->levels[row] = level_step(strips, sum / (last - first + 1) / bin_hz);
    }
}

static void give_column(struct strips *strips, const struct time_map *map, const struct column_sink *sink)
{
    for (uint32_t band = 0; band < COLUMN_BANDS; band++) {
        double top = band_edges_hz[band + 1] < 0.45 * strips->rate_hz ? band_edges_hz[band + 1]
                                                                      : 0.45 * strips->rate_hz;
        struct column column = {.band = band, .low_hz = band_edges_hz[band], .high_hz = top};
        if (top <= column.low_hz || (band > 0 && strips->n_samples < FRAME))
            break;
        column.start_ns = time_of_frame(map, column_start(strips, strips->column));
        if (band == 0) {
            average(strips, strips->low_spectrum, strips->low, strips->n_low, LOW_FRAME);
            fill_rows(strips, strips->low_rate_hz, LOW_FRAME, &column);
        } else {
            if (band < 2)
                average(strips, strips->spectrum, strips->samples, strips->n_samples, FRAME);
            fill_rows(strips, strips->rate_hz, FRAME, &column);
        }
        sink->take(sink->context, &column);
    }
}

void strips_push(struct strips *strips, const float *pascals, size_t n, const struct time_map *map,
                 const struct column_sink *sink)
{
    while (n > 0) {
        size_t room = (size_t)(column_start(strips, strips->column + 1) - strips->next_frame);
        size_t take = n < room ? n : room;
        memcpy(strips->samples + strips->n_samples, pascals, take * sizeof *pascals);
        size_t low = decimator_push(strips->decimator, pascals, take, strips->decimated);
        for (size_t i = 0; i < low && strips->n_low < strips->low_capacity; i++)
            strips->low[strips->n_low++] = strips->decimated[i];
        strips->n_samples += take;
        strips->next_frame += take;
        pascals += take;
        n -= take;
        if (take < room)
            break;
        if (strips->whole && strips->n_low >= LOW_FRAME)
            give_column(strips, map, sink);
        strips->column++;
        strips->whole = true;
        strips->n_samples = strips->n_low = 0;
    }
}
