/* Energy of a window in decidecades. */
#include "level/impulse_bands.h"
#include "base/units.h"
#include "dsp/spectrum.h"
#include "level/decidecades.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SIZES 3u /* the longest frame, half and a quarter of it */
#define LEARNED 8
#define LEAST_RATIO 2.0 /* 3 dB of window over background */

struct impulse_bands {
    double rate_hz;
    uint32_t n_bands, taper_frames, n_learned;
    uint32_t size[SIZES];
    struct spectrum *spectrum[SIZES];
    float *frame, *power;               /* [size[0]], [size[0] / 2 + 1] */
    float *taper;                       /* [taper_frames], rising */
    double background[LEVEL_MAX_BANDS]; /* mean square in each band */
};

static enum status create_parts(struct impulse_bands *bands)
{
    for (uint32_t s = 0; s < SIZES; s++) {
        enum status status = spectrum_create(bands->size[s], WINDOW_RECTANGLE, &bands->spectrum[s]);
        if (status)
            return status;
    }
    bands->frame = malloc(bands->size[0] * sizeof *bands->frame);
    bands->power = malloc((bands->size[0] / 2 + 1) * sizeof *bands->power);
    bands->taper = malloc(bands->taper_frames * sizeof *bands->taper);
    return bands->frame && bands->power && bands->taper ? STATUS_OK : STATUS_NO_MEMORY;
}

enum status impulse_bands_create(double rate_hz, uint32_t max_frames, struct impulse_bands **out)
{
    if (!(rate_hz >= 8000) || !(rate_hz <= 1000000) || max_frames < 64 || max_frames > 1u << 21)
        return STATUS_BAD_ARGUMENT;
    struct impulse_bands *bands = calloc(1, sizeof *bands);
    if (!bands)
        return STATUS_NO_MEMORY;
    bands->rate_hz = rate_hz;
    bands->n_bands = decidecades_count(rate_hz);
    bands->taper_frames = (uint32_t)(IMPULSE_BANDS_TAPER_S * rate_hz);
    uint32_t size = 64;
    while (size < max_frames)
        size *= 2;
    for (uint32_t s = 0; s < SIZES; s++)
        bands->size[s] = size >> s;
    enum status status = create_parts(bands);
    if (status) {
        impulse_bands_destroy(bands);
        return status;
    }
    for (uint32_t i = 0; i < bands->taper_frames; i++)
        bands->taper[i] = (float)(0.5 - 0.5 * cos(M_PI * (i + 0.5) / bands->taper_frames));
    impulse_bands_reset(bands);
    *out = bands;
    return STATUS_OK;
}

void impulse_bands_destroy(struct impulse_bands *bands)
{
    if (!bands)
        return;
    for (uint32_t s = 0; s < SIZES; s++)
        spectrum_destroy(bands->spectrum[s]);
    free(bands->frame);
    free(bands->power);
    free(bands->taper);
    free(bands);
}

void impulse_bands_reset(struct impulse_bands *bands)
{
    bands->n_learned = 0;
    memset(bands->background, 0, sizeof bands->background);
}

uint32_t impulse_bands_count(const struct impulse_bands *bands)
{
    return bands->n_bands;
}

/* The samples less their mean under the ends' taper, padded; the sum of the taper's squares. */
static double make_frame(struct impulse_bands *bands, uint32_t size, const float *pascals, uint32_t n,
                         double mean_pa)
{
    const uint32_t taper = bands->taper_frames < n / 2 ? bands->taper_frames : n / 2;
    const float mean = (float)mean_pa;
    double weight = n - 2.0 * taper;
    for (uint32_t i = 0; i < n; i++)
        bands->frame[i] = pascals[i] - mean;
    for (uint32_t i = 0; i < taper; i++) {
        const float w = bands->taper[(uint64_t)i * bands->taper_frames / taper];
        bands->frame[i] *= w;
        bands->frame[n - 1 - i] *= w;
        weight += 2.0 * w * w;
    }
    memset(bands->frame + n, 0, (size - n) * sizeof *bands->frame);
    return weight;
}

/* Sum of squares in each band; returns the sum of the taper's squares. */
static double sum_squares(struct impulse_bands *bands, const float *pascals, uint32_t n, double mean_pa,
                          double out[LEVEL_MAX_BANDS])
{
    uint32_t s = 0;
    n = n < bands->size[0] ? n : bands->size[0];
    while (s + 1 < SIZES && bands->size[s + 1] >= n)
        s++;
    const uint32_t size = bands->size[s];
    double weight = make_frame(bands, size, pascals, n, mean_pa);
    spectrum_power(bands->spectrum[s], bands->frame, bands->power);
    const double bin_hz = bands->rate_hz / size;
    for (uint32_t b = 0; b < bands->n_bands; b++) {
        double low = decidecades_low_hz(LEVEL_FIRST_BAND + (int)b) / bin_hz,
               high = decidecades_high_hz(LEVEL_FIRST_BAND + (int)b) / bin_hz, sum = 0;
        uint32_t first = (uint32_t)floor(low + 0.5), last = (uint32_t)floor(high + 0.5);
        last = last <= size / 2 ? last : size / 2;
        for (uint32_t k = first; k <= last; k++)
            sum += bands->power[k] * (fmin(k + 0.5, high) - fmax(k - 0.5, low));
        out[b] = sum * size; /* bins add up to the frame's mean square */
    }
    return weight;
}

void impulse_bands_learn(struct impulse_bands *bands, const float *pascals, uint32_t n, double mean_pa)
{
    double squares[LEVEL_MAX_BANDS], weight = sum_squares(bands, pascals, n, mean_pa, squares);
    bands->n_learned += bands->n_learned < LEARNED;
    for (uint32_t b = 0; b < bands->n_bands; b++)
        bands->background[b] += (squares[b] / weight - bands->background[b]) / bands->n_learned;
}

void impulse_bands_measure(struct impulse_bands *bands, const float *pascals, uint32_t n, double mean_pa,
                           double out_sel_db[LEVEL_MAX_BANDS])
{
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
        out_sel_db[b] = NAN;
    if (bands->n_learned == 0)
        return;
    double squares[LEVEL_MAX_BANDS], weight = sum_squares(bands, pascals, n, mean_pa, squares);
    for (uint32_t b = 0; b < bands->n_bands; b++) {
        double background = bands->background[b] * weight;
        if (squares[b] > LEAST_RATIO * background)
            out_sel_db[b] = units_sel_db((squares[b] - background) / bands->rate_hz);
    }
}
