/* Band-pass bank and slot powers. */
#include "call/bands.h"
#include "dsp/filter.h"
#include "dsp/lanes.h"
#include <complex.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SECTIONS 3
#define WINDOW_POINTS 96
#define SPARE_BLOCKS                                                                                         \
    16                    /* for which a row has room at least before its history is moved to its front, ... \
                           */
#define SPARE_HISTORIES 1 /* ... and so many times the history */
#define RESPONSE_POINTS 512
#define SKIRT 4               /* times beyond a band is where its filter is looked at */
#define RESPONSE_FRAMES 32768 /* the impulse response is followed for this long at most */

/* Upcrossings of a level by a sliding window in one window's time, over the tail of one window, the level and
 * the freedom (with which they grow, as Rice's formula has it: the square root of the freedom is how fast the
 * window's power wanders, and another that of the level); measured in white noise, the same within 6 % for
 * freedoms of 5 to 10. */
#define UPCROSSINGS 0.102

/* WIDE_LANES bands side by side. */
struct group {
    wide_lanes gain, a1[SECTIONS], a2[SECTIONS];
    wide_lanes y1[SECTIONS], y2[SECTIONS]; /* each section's last two outputs */
};

struct bands {
    double rate_hz;
    uint32_t n, n_groups, slot_frames, block_slots, history_slots;
    bool has_room;                    /* the next block has its place already */
    uint32_t stride, at;              /* of the rows of power, and where in them the last block begins */
    struct filter filters[BANDS_MAX]; /* the same in double precision, for what is computed at start */
    struct band_edges edges[BANDS_MAX];
    double delay[BANDS_MAX];
    float block_sums[BANDS_MAX];
    struct group groups[BANDS_MAX / WIDE_LANES];
    float *power;               /* [n][stride] */
    float *samples;             /* [stride * slot_frames] */
    float (*slots)[WIDE_LANES]; /* [block_slots]: of the group at work */
    float *differences;         /* [block_slots * slot_frames]: of each sample and that two before */
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

/* What the parts make of noise of a slope, at RESPONSE_POINTS frequencies from below the band to above it:
 * amplitudes, each part's phase from its own lateness on, weighted so that each part has as much power as
 * white noise would give it; the sum of all powers is 1. */
struct responses {
    uint32_t n;
    double radians[RESPONSE_POINTS]; /* a frame */
    double complex part[BANDS_MAX_PARTS][RESPONSE_POINTS];
};

static void find_responses(const struct bands *bands, const struct band_parts *parts, double slope_db,
                           struct responses *out)
{
    const struct band_edges *edges = bands->edges;
    double low = edges[parts->bands[0]].low_hz, high = edges[parts->bands[parts->n - 1]].high_hz;
    double from = low / SKIRT, step = (fmin(SKIRT * high, bands->rate_hz / 2) - from) / RESPONSE_POINTS;
    out->n = parts->n;
    for (uint32_t p = 0; p < parts->n; p++) {
        struct band_edges own = edges[parts->bands[p]];
        double late = (double)parts->late_slots[p] * bands->slot_frames, power = 0;
        for (uint32_t i = 0; i < RESPONSE_POINTS; i++) {
            double hz = from + (i + 0.5) * step, amplitude = pow(hz / low, slope_db / 20);
            out->radians[i] = 2 * M_PI * hz / bands->rate_hz;
            double complex h = filter_response(&bands->filters[parts->bands[p]], hz, bands->rate_hz);
            out->part[p][i] = amplitude * h * cexp(-I * out->radians[i] * late);
            power += pow(cabs(out->part[p][i]), 2);
        }
        double share = (own.high_hz - own.low_hz) / (high - low);
        for (uint32_t i = 0; i < RESPONSE_POINTS; i++)
            out->part[p][i] *= sqrt(share / power);
    }
}

/* r[p][q][k]: mean product of part p at one of m points of the window and part q k points later. */
static void fill_correlations(const struct responses *responses, uint32_t frames, uint32_t m, double *r)
{
    memset(r, 0, responses->n * responses->n * m * sizeof *r);
    for (uint32_t p = 0; p < responses->n; p++)
        for (uint32_t q = 0; q < responses->n; q++)
            for (uint32_t i = 0; i < RESPONSE_POINTS; i++) {
                double complex both = conj(responses->part[p][i]) * responses->part[q][i];
                double complex turn = cexp(I * responses->radians[i] * frames / m);
                double real = creal(both), imaginary = cimag(both), c = creal(turn), s = cimag(turn);
                for (uint32_t k = 0; k < m; k++) {
                    r[(p * responses->n + q) * m + k] += real;
                    double next = real * c - imaginary * s;
                    imaginary = real * s + imaginary * c;
                    real = next;
                }
            }
}

/* The correlation matrix R of n parts at m points of the window, [n * m][n * m]. */
static void fill_matrix(const double *r, uint32_t n, uint32_t m, double *out)
{
    for (uint32_t i = 0; i < n * m; i++)
        for (uint32_t j = 0; j < n * m; j++) {
            uint32_t p = i / m, q = j / m, a = i % m, b = j % m;
            out[i * n * m + j] = b >= a ? r[(p * n + q) * m + b - a] : r[(q * n + p) * m + a - b];
        }
}

/* Four sums side by side. */
static double inner_product(const double *a, const double *b, uint32_t n)
{
    double sums[4] = {0, 0, 0, 0};
    uint32_t k = 0;
    for (; k + 4 <= n; k += 4)
        for (uint32_t l = 0; l < 4; l++)
            sums[l] += a[k + l] * b[k + l];
    for (; k < n; k++)
        sums[0] += a[k] * b[k];
    return (sums[0] + sums[1]) + (sums[2] + sums[3]);
}

/* Traces of the first powers of R: m, tr R^2, tr R^3. The sum of squares of Gaussian variables so correlated
 * has the cumulants m, 2 tr R^2, 8 tr R^3. */
enum status bands_get_statistics(const struct bands *bands, const struct band_parts *parts, uint32_t n_slots,
                                 double slope_db, struct window_statistics *out)
{
    uint32_t frames = n_slots * bands->slot_frames, most = WINDOW_POINTS / parts->n;
    uint32_t m = frames < most ? frames : most, n = parts->n * m; /* R is smooth between them */
    struct responses *responses = malloc(sizeof *responses);
    double *r = malloc(parts->n * parts->n * m * sizeof *r), *matrix = malloc((size_t)n * n * sizeof *matrix);
    if (responses && r && matrix) {
        find_responses(bands, parts, slope_db, responses);
        double square = 0, cube = 0;
        fill_correlations(responses, frames, m, r);
        fill_matrix(r, parts->n, m, matrix);
        for (uint32_t i = 0; i < n; i++)
            for (uint32_t j = 0; j <= i; j++) { /* R is symmetric, and so is its square */
                const double ij = matrix[i * n + j] * (j < i ? 2 : 1);
                square += ij * matrix[i * n + j];
                cube += ij * inner_product(matrix + (size_t)j * n, matrix + (size_t)i * n, n);
            }
        out->freedom = (double)m * m / square;
        out->skewness = 8 * cube / pow(2 * square, 1.5);
    }
    enum status status = responses && r && matrix ? STATUS_OK : STATUS_NO_MEMORY;
    free(r);
    free(matrix);
    free(responses);
    return status;
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
    return UPCROSSINGS * statistics->freedom * (1 + snr) * gamma_tail(a, fmax(x, a + 1));
}

double window_quantile(const struct window_statistics *statistics, double normal)
{
    double freedom = 8 / (statistics->skewness * statistics->skewness), part = 2 / (9 * freedom);
    double deviations = freedom * (pow(1 - part + normal * sqrt(part), 3) - 1) / sqrt(2 * freedom);
    return 1 + sqrt(2 / statistics->freedom) * deviations;
}

static void fill_group(struct bands *bands, uint32_t g)
{
    struct group *group = &bands->groups[g];
    for (uint32_t l = 0; l < WIDE_LANES; l++) {
        uint32_t b = g * WIDE_LANES + l;
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
    struct bands *bands = aligned_alloc(32, (sizeof *bands + 31) / 32 * 32);
    if (!bands)
        return STATUS_NO_MEMORY;
    memset(bands, 0, sizeof *bands);
    bands->rate_hz = rate_hz;
    bands->n = n;
    bands->n_groups = (n + WIDE_LANES - 1) / WIDE_LANES;
    bands->slot_frames = slot_frames;
    bands->block_slots = block_slots;
    /* Of the block that is being filled, and two frames before all of it for the filters. */
    bands->history_slots = bands->at = history_slots + block_slots + 2;
    uint32_t spare = SPARE_HISTORIES * history_slots / block_slots + SPARE_BLOCKS;
    bands->stride = bands->history_slots + spare * block_slots;
    bands->power = calloc((size_t)n * bands->stride, sizeof(float));
    bands->samples = calloc((size_t)bands->stride * slot_frames, sizeof(float));
    bands->slots = calloc(block_slots, sizeof *bands->slots);
    bands->differences = calloc((size_t)block_slots * slot_frames, sizeof(float));
    double *response = malloc(RESPONSE_FRAMES * sizeof *response);
    if (!bands->power || !bands->samples || !bands->slots || !bands->differences || !response) {
        free(response);
        bands_destroy(bands);
        return STATUS_NO_MEMORY;
    }
    for (uint32_t b = 0; b < n; b++) {
        filter_band_pass(SECTIONS, edges[b].low_hz, edges[b].high_hz, rate_hz, &bands->filters[b]);
        bands->edges[b] = edges[b];
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
    }
    memset(bands->power, 0, sizeof(float) * bands->n * bands->stride);
    memset(bands->samples, 0, sizeof(float) * bands->stride * bands->slot_frames);
    memset(bands->block_sums, 0, sizeof bands->block_sums);
}

/* Direct form I: `difference` is the section's input less that of two frames before. Its outputs are what the
 * next section needs of its inputs, and the chain from frame to frame is one product and one sum long. */
#define SECTION(difference, s, recent, old) (((difference)-g.a2[s] * (old)[s]) - g.a1[s] * (recent)[s])

/* One frame, x its input less that of two frames before: the new outputs take the place of the oldest, so
 * that nothing is moved when the next frame has the two in turned roles. */
#define FRAME(x, recent, old, sum)                                                                           \
    do {                                                                                                     \
        const wide_lanes first = SECTION(g.gain * (x), 0, recent, old);                                      \
        const wide_lanes second = SECTION(first - (old)[0], 1, recent, old);                                 \
        const wide_lanes third = SECTION(second - (old)[1], 2, recent, old);                                 \
        (old)[0] = first;                                                                                    \
        (old)[1] = second;                                                                                   \
        (old)[2] = third;                                                                                    \
        (sum) += third * third;                                                                              \
    } while (0)

/* A pair of slots has an even number of frames, after which all outputs are in their places again;
 * block_slots odd: the last slot is one by itself. x: differences. */
LANES_WIDE static void filter_group(struct group *group, const float *x, uint32_t n_slots,
                                    uint32_t slot_frames, float out[][WIDE_LANES], float *out_sums)
{
    struct group g = *group;
    const float scale = 1.0F / (float)slot_frames;
    wide_lanes block = {0};
    uint32_t slot = 0;
    for (; slot + 2 <= n_slots; slot += 2) {
        wide_lanes sums[2] = {{0}, {0}};
        for (uint32_t k = 0; k < slot_frames / 2; k++, x += 2) {
            FRAME(x[0], g.y1, g.y2, sums[0]);
            FRAME(x[1], g.y2, g.y1, sums[0]);
        }
        if (slot_frames % 2) {
            FRAME(x[0], g.y1, g.y2, sums[0]);
            FRAME(x[1], g.y2, g.y1, sums[1]);
            x += 2;
        }
        for (uint32_t k = 0; k < slot_frames / 2; k++, x += 2) {
            FRAME(x[0], g.y1, g.y2, sums[1]);
            FRAME(x[1], g.y2, g.y1, sums[1]);
        }
        sums[0] *= scale;
        sums[1] *= scale;
        memcpy(out[slot], &sums[0], sizeof sums[0]);
        memcpy(out[slot + 1], &sums[1], sizeof sums[1]);
        block += sums[0];
        block += sums[1];
    }
    for (; slot < n_slots; slot++) {
        wide_lanes sum = {0};
        for (uint32_t k = 0; k < slot_frames; k++, x++) {
            FRAME(x[0], g.y1, g.y2, sum);
            for (uint32_t s = 0; s < SECTIONS; s++) {
                const wide_lanes newest = g.y2[s];
                g.y2[s] = g.y1[s];
                g.y1[s] = newest;
            }
        }
        sum *= scale;
        memcpy(out[slot], &sum, sizeof sum);
        block += sum;
    }
    memcpy(out_sums, &block, sizeof block);
    *group = g;
}

/* Makes room in the rows for the next block. */
static void next_place(struct bands *bands)
{
    bands->at += bands->block_slots;
    if (bands->at + bands->block_slots <= bands->stride)
        return;
    for (uint32_t b = 0; b < bands->n; b++) {
        float *row = bands->power + (size_t)b * bands->stride;
        memmove(row, row + bands->at - bands->history_slots, bands->history_slots * sizeof *row);
    }
    size_t first = (size_t)(bands->at - bands->history_slots) * bands->slot_frames;
    size_t kept = (size_t)bands->history_slots * bands->slot_frames;
    memmove(bands->samples, bands->samples + first, kept * sizeof *bands->samples);
    bands->at = bands->history_slots;
}

float *bands_get_room(struct bands *bands)
{
    if (!bands->has_room)
        next_place(bands);
    bands->has_room = true;
    return bands->samples + (size_t)bands->at * bands->slot_frames;
}

/* Rows of four lanes become columns of four slots. */
static inline void turn(const float (*slots)[WIDE_LANES], float *out, size_t stride, uint32_t n_lanes)
{
    const lanes a = lanes_load(slots[0]), b = lanes_load(slots[1]), c = lanes_load(slots[2]),
                d = lanes_load(slots[3]);
    const lanes ab = __builtin_shufflevector(a, b, 0, 4, 1, 5),
                cd = __builtin_shufflevector(c, d, 0, 4, 1, 5);
    const lanes ef = __builtin_shufflevector(a, b, 2, 6, 3, 7),
                gh = __builtin_shufflevector(c, d, 2, 6, 3, 7);
    const lanes turned[LANES] = {
        __builtin_shufflevector(ab, cd, 0, 1, 4, 5), __builtin_shufflevector(ab, cd, 2, 3, 6, 7),
        __builtin_shufflevector(ef, gh, 0, 1, 4, 5), __builtin_shufflevector(ef, gh, 2, 3, 6, 7)};
    for (uint32_t l = 0; l < n_lanes; l++)
        lanes_store(out + l * stride, turned[l]);
}

/* The slots of a group to the rows of its bands; gives whether all are finite at the end. */
static bool store_group(struct bands *bands, uint32_t g)
{
    bool finite = true;
    for (uint32_t b = g * WIDE_LANES; b < bands->n && b < (g + 1) * WIDE_LANES; b += LANES) {
        float *block = bands->power + (size_t)b * bands->stride + bands->at;
        const uint32_t n_lanes = bands->n - b < LANES ? bands->n - b : LANES, lane = b % WIDE_LANES;
        uint32_t slot = 0;
        for (; slot + LANES <= bands->block_slots; slot += LANES)
            turn((const float(*)[WIDE_LANES]) & bands->slots[slot][lane], block + slot, bands->stride,
                 n_lanes);
        for (; slot < bands->block_slots; slot++)
            for (uint32_t l = 0; l < n_lanes; l++)
                block[l * bands->stride + slot] = bands->slots[slot][lane + l];
        for (uint32_t l = 0; l < n_lanes; l++)
            finite = finite && isfinite(bands->slots[bands->block_slots - 1][lane + l]);
    }
    return finite;
}

/* Of each sample that two before it. */
LANES_WIDE static void subtract_earlier(const float *samples, uint32_t n, float *restrict out)
{
    wide_lanes x, earlier;
    uint32_t i = 0;
    for (; i + WIDE_LANES <= n; i += WIDE_LANES) {
        wide_load(&x, samples + i);
        wide_load(&earlier, samples + i - 2);
        x -= earlier;
        wide_store(out + i, &x);
    }
    for (; i < n; i++)
        out[i] = samples[i] - (samples + i)[-2];
}

void bands_push_room(struct bands *bands)
{
    const float *samples = bands_get_room(bands);
    bool finite = true;
    bands->has_room = false;
    subtract_earlier(samples, bands->block_slots * bands->slot_frames, bands->differences);
    for (uint32_t g = 0; g < bands->n_groups; g++) {
        filter_group(&bands->groups[g], bands->differences, bands->block_slots, bands->slot_frames,
                     bands->slots, bands->block_sums + (size_t)g * WIDE_LANES);
        finite = store_group(bands, g) && finite;
    }
    if (!finite)
        bands_reset(bands);
}

void bands_push(struct bands *bands, const float *samples)
{
    memcpy(bands_get_room(bands), samples, (size_t)bands->block_slots * bands->slot_frames * sizeof *samples);
    bands_push_room(bands);
}

/* Where in the rows the last block begins. */
static uint32_t last_block(const struct bands *bands)
{
    return bands->has_room ? bands->at - bands->block_slots : bands->at;
}

const float *bands_get_power(const struct bands *bands, uint32_t b)
{
    return bands->power + (size_t)b * bands->stride + last_block(bands);
}

double bands_get_block_sum(const struct bands *bands, uint32_t b)
{
    return bands->block_sums[b];
}

const float *bands_get_samples(const struct bands *bands)
{
    return bands->samples + (size_t)last_block(bands) * bands->slot_frames;
}

double bands_get_delay(const struct bands *bands, uint32_t b)
{
    return bands->delay[b];
}

struct band_edges bands_get_edges(const struct bands *bands, uint32_t b)
{
    return bands->edges[b];
}

double bands_align(const struct bands *bands, struct band_parts *parts)
{
    double latest = 0;
    for (uint32_t p = 0; p < parts->n; p++)
        latest = fmax(latest, bands->delay[parts->bands[p]]);
    for (uint32_t p = 0; p < parts->n; p++)
        parts->late_slots[p] = (uint32_t)round((latest - bands->delay[parts->bands[p]]) / bands->slot_frames);
    return latest;
}

void bands_destroy(struct bands *bands)
{
    if (!bands)
        return;
    free(bands->power);
    free(bands->samples);
    free(bands->slots);
    free(bands->differences);
    free(bands);
}
