/* Band-pass bank and slot powers. */
#include "call/bands.h"
#include "dsp/filter.h"
#include "dsp/lanes.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SECTIONS 3
#define WINDOW_POINTS 96
#define SPARE_BLOCKS                                                                                         \
    16                    /* for which a row has room at least before its history is moved to its front, ... \
                           */
#define SPARE_HISTORIES 3 /* ... and so many times the history */
#define RESPONSE_FRAMES 32768 /* the impulse response is followed for this long at most */

/* Upcrossings of a level by a sliding window in one window's time, over the tail of one window and over the
 * level (with which they grow, as Rice's formula has it); measured in white noise. */
#define UPCROSSINGS 0.65

struct group {
    lanes gain, a1[SECTIONS], a2[SECTIONS];
    lanes y1[SECTIONS], y2[SECTIONS]; /* each section's last two outputs */
    float x1, x2;                     /* the last two samples */
};

struct bands {
    uint32_t n, n_groups, slot_frames, block_slots, history_slots;
    uint32_t stride, at;              /* of the rows of power, and where in them the last block begins */
    struct filter filters[BANDS_MAX]; /* the same in double precision, for what is computed at start */
    double delay[BANDS_MAX];
    struct group groups[BANDS_MAX / LANES];
    float *power;   /* [n_groups * LANES][stride] */
    float *samples; /* [stride * slot_frames] */
};

bool bands_rate_carries(double rate_hz, struct band_edges edges)
{
    return edges.low_hz > 0 && edges.high_hz > edges.low_hz && edges.high_hz <= BANDS_HIGHEST * rate_hz;
}

/* The filter's answer to one sample, until it has died away; gives its length, at most RESPONSE_FRAMES. */
static uint32_t find_response(struct filter filter, double *out)
{
    double recent = 0, greatest = 0;
    uint32_t n = 0;
    while (n < RESPONSE_FRAMES) {
        out[n] = filter_step(&filter, n == 0);
        recent = fmax(recent * 0.998, fabs(out[n]));
        greatest = fmax(greatest, recent);
        n++;
        if (recent < 1e-4 * greatest)
            break;
    }
    return n;
}

/* Centre of the response's energy, in frames. */
static double energy_centre(const double *response, uint32_t n)
{
    double energy = 0, moment = 0;
    for (uint32_t k = 0; k < n; k++) {
        energy += response[k] * response[k];
        moment += k * response[k] * response[k];
    }
    return moment / energy;
}

/* Autocorrelation of filtered white noise: the response against itself, lag frames later. */
static double autocorrelation(const double *response, uint32_t n, uint32_t lag)
{
    double sum = 0;
    for (uint32_t k = lag; k < n; k++)
        sum += response[k] * response[k - lag];
    return sum;
}

/* Traces of the second and third power of the matrix of correlations r[|i - j|] of m points. */
static void find_traces(const double *r, uint32_t m, double *matrix, double *out_square, double *out_cube)
{
    for (uint32_t i = 0; i < m; i++)
        for (uint32_t j = 0; j < m; j++)
            matrix[i * m + j] = r[i > j ? i - j : j - i];
    double square = 0, cube = 0;
    for (uint32_t i = 0; i < m; i++)
        for (uint32_t j = i; j < m; j++) {
            double ij = matrix[i * m + j], product = 0;
            for (uint32_t k = 0; k < m; k++)
                product += matrix[i * m + k] * matrix[j * m + k];
            square += (i == j ? 1 : 2) * ij * ij;
            cube += (i == j ? 1 : 2) * ij * product;
        }
    *out_square = square;
    *out_cube = cube;
}

/* The sum of squares of m Gaussian variables so correlated has the cumulants m, 2 tr R^2, 8 tr R^3. */
enum status bands_get_statistics(const struct bands *bands, uint32_t b, uint32_t n_slots,
                                 struct window_statistics *out)
{
    uint32_t n = n_slots * bands->slot_frames;
    uint32_t m = n < WINDOW_POINTS ? n : WINDOW_POINTS; /* the correlation is smooth between them */
    double *r = malloc((m + (size_t)m * m + RESPONSE_FRAMES) * sizeof *r), square, cube;
    if (!r)
        return STATUS_NO_MEMORY;
    double *matrix = r + m, *response = matrix + (size_t)m * m;
    uint32_t length = find_response(bands->filters[b], response);
    for (uint32_t k = 0; k < m; k++)
        r[k] = autocorrelation(response, length, (uint32_t)((uint64_t)k * n / m)) /
               autocorrelation(response, length, 0);
    find_traces(r, m, matrix, &square, &cube);
    free(r);
    out->freedom = (double)m * m / square;
    out->skewness = 8 * cube / pow(2 * square, 1.5);
    return STATUS_OK;
}

/* Upper tail of the gamma distribution of shape a at x > a + 1: continued fraction of the incomplete gamma
 * function (Abramowitz and Stegun 6.5.31), evaluated backwards. */
static double gamma_tail(double a, double x)
{
    double fraction = 0;
    for (int k = 200; k >= 1; k--)
        fraction = k * (k - a) / (x + 2 * k + 1 - a - fraction);
    return exp(-x + a * log(x) - lgamma(a)) / (x + 1 - a - fraction);
}

double window_upcrossings(const struct window_statistics *statistics, double snr)
{
    double freedom = 8 / (statistics->skewness * statistics->skewness), a = freedom / 2;
    double deviations = snr / sqrt(2 / statistics->freedom);
    double x = (freedom + deviations * sqrt(2 * freedom)) / 2;
    return UPCROSSINGS * (1 + snr) * gamma_tail(a, fmax(x, a + 1));
}

static void fill_group(struct bands *bands, uint32_t g)
{
    struct group *group = &bands->groups[g];
    for (uint32_t l = 0; l < LANES; l++) {
        uint32_t b = g * LANES + l;
        const struct filter *filter = &bands->filters[b < bands->n ? b : bands->n - 1];
        double gain = 1; /* the zeros, three at 0 Hz and three at half the rate, are split evenly */
        for (int s = 0; s < SECTIONS; s++) {
            gain *= filter->sections[s].b0;
            group->a1[s][l] = (float)filter->sections[s].a1;
            group->a2[s][l] = (float)filter->sections[s].a2;
        }
        group->gain[l] = (float)gain;
    }
}

enum status bands_create(double rate_hz, const struct band_edges *edges, uint32_t n, uint32_t slot_frames,
                         uint32_t block_slots, uint32_t history_slots, struct bands **out)
{
    if (!edges || !out || n < 1 || n > BANDS_MAX || slot_frames < 1 || block_slots < 1)
        return STATUS_BAD_ARGUMENT;
    for (uint32_t b = 0; b < n; b++)
        if (!bands_rate_carries(rate_hz, edges[b]))
            return STATUS_BAD_ARGUMENT;
    struct bands *bands = aligned_alloc(16, (sizeof *bands + 15) / 16 * 16);
    if (!bands)
        return STATUS_NO_MEMORY;
    memset(bands, 0, sizeof *bands);
    bands->n = n;
    bands->n_groups = (n + LANES - 1) / LANES;
    bands->slot_frames = slot_frames;
    bands->block_slots = block_slots;
    bands->history_slots = bands->at = history_slots;
    uint32_t spare = SPARE_HISTORIES * history_slots / block_slots + SPARE_BLOCKS;
    bands->stride = history_slots + spare * block_slots;
    bands->power = calloc((size_t)bands->n_groups * LANES * bands->stride, sizeof(float));
    bands->samples = calloc((size_t)bands->stride * slot_frames, sizeof(float));
    double *response = malloc(RESPONSE_FRAMES * sizeof *response);
    if (!bands->power || !bands->samples || !response) {
        free(response);
        bands_destroy(bands);
        return STATUS_NO_MEMORY;
    }
    for (uint32_t b = 0; b < n; b++) {
        filter_band_pass(SECTIONS, edges[b].low_hz, edges[b].high_hz, rate_hz, &bands->filters[b]);
        bands->delay[b] = energy_centre(response, find_response(bands->filters[b], response));
    }
    free(response);
    for (uint32_t g = 0; g < bands->n_groups; g++)
        fill_group(bands, g);
    *out = bands;
    return STATUS_OK;
}

void bands_reset(struct bands *bands)
{
    for (uint32_t g = 0; g < bands->n_groups; g++) {
        struct group *group = &bands->groups[g];
        memset(group->y1, 0, sizeof group->y1);
        memset(group->y2, 0, sizeof group->y2);
        group->x1 = group->x2 = 0;
    }
    memset(bands->power, 0, sizeof(float) * bands->n_groups * LANES * bands->stride);
    memset(bands->samples, 0, sizeof(float) * bands->stride * bands->slot_frames);
}

/* Direct form I: `difference` is the section's input less that of two frames before. Its outputs are what the
 * next section needs of its inputs, and the chain from frame to frame is one product and one sum long. */
static inline lanes section(lanes difference, lanes a1, lanes a2, lanes y1, lanes y2)
{
    return (difference - a2 * y2) - a1 * y1;
}

static void filter_group(struct bands *bands, struct group *group, const float *x, float *out)
{
    struct group g = *group;
    const size_t stride = bands->stride;
    const float scale = 1.0F / (float)bands->slot_frames;
    for (uint32_t slot = 0; slot < bands->block_slots; slot++) {
        lanes sum = {0};
        for (uint32_t k = 0; k < bands->slot_frames; k++, x++) {
            const float rise = *x - g.x2;
            const lanes first =
                section(g.gain * (lanes){rise, rise, rise, rise}, g.a1[0], g.a2[0], g.y1[0], g.y2[0]);
            const lanes second = section(first - g.y2[0], g.a1[1], g.a2[1], g.y1[1], g.y2[1]);
            const lanes third = section(second - g.y2[1], g.a1[2], g.a2[2], g.y1[2], g.y2[2]);
            g.x2 = g.x1;
            g.x1 = *x;
            g.y2[0] = g.y1[0];
            g.y1[0] = first;
            g.y2[1] = g.y1[1];
            g.y1[1] = second;
            g.y2[2] = g.y1[2];
            g.y1[2] = third;
            sum += third * third;
        }
        for (uint32_t l = 0; l < LANES; l++)
            out[l * stride + slot] = sum[l] * scale;
    }
    *group = g;
}

/* Makes room in the rows for the next block. */
static void next_place(struct bands *bands)
{
    bands->at += bands->block_slots;
    if (bands->at + bands->block_slots <= bands->stride)
        return;
    for (uint32_t b = 0; b < bands->n_groups * LANES; b++) {
        float *row = bands->power + (size_t)b * bands->stride;
        memmove(row, row + bands->at - bands->history_slots, bands->history_slots * sizeof *row);
    }
    size_t first = (size_t)(bands->at - bands->history_slots) * bands->slot_frames;
    size_t kept = (size_t)bands->history_slots * bands->slot_frames;
    memmove(bands->samples, bands->samples + first, kept * sizeof *bands->samples);
    bands->at = bands->history_slots;
}

void bands_push(struct bands *bands, const float *samples)
{
    bool finite = true;
    next_place(bands);
    memcpy(bands->samples + (size_t)bands->at * bands->slot_frames, samples,
           (size_t)bands->block_slots * bands->slot_frames * sizeof *samples);
    for (uint32_t g = 0; g < bands->n_groups; g++) {
        float *block = bands->power + (size_t)g * LANES * bands->stride + bands->at;
        filter_group(bands, &bands->groups[g], samples, block);
        for (uint32_t l = 0; l < LANES; l++)
            finite = finite && isfinite(block[l * bands->stride + bands->block_slots - 1]);
    }
    if (!finite)
        bands_reset(bands);
}

const float *bands_get_power(const struct bands *bands, uint32_t b)
{
    return bands->power + (size_t)b * bands->stride + bands->at;
}

const float *bands_get_samples(const struct bands *bands)
{
    return bands->samples + (size_t)bands->at * bands->slot_frames;
}

double bands_get_delay(const struct bands *bands, uint32_t b)
{
    return bands->delay[b];
}

void bands_destroy(struct bands *bands)
{
    if (!bands)
        return;
    free(bands->power);
    free(bands->samples);
    free(bands);
}
