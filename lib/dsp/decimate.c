/* A chain of FIR stages; see decimate.h. */
#include "dsp/decimate.h"
#include "dsp/lanes.h"
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define MAX_STAGES 32
#define LARGEST_PRIME 13
#define TILE WIDE_LANES   /* partial sums of a dot product, made side by side */
#define PIECE 2048        /* input samples a stage takes at once */
#define ATTENUATION_DB 90 /* of each stage: leaves 10 dB for the sum of a chain's stages */
#define PASS_BAND_END 0.4 /* of the output rate */
static const double pi = 3.14159265358979323846;

struct stage {
    uint32_t factor;
    uint32_t n_taps; /* a multiple of TILE: the filter has zeros in front. Half-band: of one side, folded */
    uint32_t delay;  /* in samples of its input */
    uint32_t phase;  /* input samples until the next output */
    uint32_t n_held; /* in buffer */
    uint32_t n_odd;  /* in odd */
    float *taps;     /* [n_taps] */
    float *buffer;   /* the last samples, then the new ones. Half-band: those with an even number */
    float *odd;      /* half-band only: those with an odd number */
    float *out;      /* [PIECE + 1] */
};

struct decimator {
    uint32_t factor, n_stages;
    double delay;
    struct stage stages[MAX_STAGES];
};

/* Modified Bessel function of the first kind, order 0, by its power series. */
static double bessel_i0(double x)
{
    double sum = 1, term = 1;
    for (int k = 1; k < 60; k++) {
        term *= x / (2 * k) * (x / (2 * k));
        sum += term;
    }
    return sum;
}

/* Tap at x samples from the middle of a low-pass of the Kaiser window method; cut in cycles per sample. */
static double kaiser_tap(double x, double half, double cut)
{
    double beta = 0.1102 * (ATTENUATION_DB - 8.7), r = x / (half + 1);
    double sinc = x == 0 ? 2 * cut : sin(2 * pi * cut * x) / (pi * x);
    return sinc * bessel_i0(beta * sqrt(1 - r * r)) / bessel_i0(beta);
}

/* Taps on each side of the middle for edges in cycles per sample. */
static uint32_t half_length(double pass, double stop)
{
    return (uint32_t)ceil((ATTENUATION_DB - 8) / (2.285 * 2 * pi * (stop - pass)) / 2);
}

static bool make_buffers(struct stage *stage, size_t n_buffer, size_t n_odd)
{
    stage->taps = calloc(stage->n_taps, sizeof *stage->taps);
    stage->buffer = calloc(n_buffer, sizeof *stage->buffer);
    stage->odd = calloc(n_odd, sizeof *stage->odd);
    stage->out = calloc(PIECE + 1, sizeof *stage->out);
    return stage->taps && stage->buffer && stage->odd && stage->out;
}

/* The number of taps is odd, so that the delay is whole. */
static bool design_stage(struct stage *stage, double pass, double stop)
{
    uint32_t half = half_length(pass, stop), n = 2 * half + 1;
    stage->n_taps = (n + TILE - 1) / TILE * TILE;
    stage->delay = half;
    if (!make_buffers(stage, stage->n_taps + PIECE, 1))
        return false;
    double sum = 0;
    for (uint32_t i = 0; i < n; i++)
        sum += kaiser_tap((double)i - half, half, (pass + stop) / 2);
    for (uint32_t i = 0; i < n; i++)
        stage->taps[stage->n_taps - n + i] =
            (float)(kaiser_tap((double)i - half, half, (pass + stop) / 2) / sum);
    return true;
}

/* A factor of 2 has its edges even about a quarter of the input rate: but for the middle tap, which is 1/2,
 * every other tap is 0, and the rest are even about the middle. */
static bool design_half_band(struct stage *stage, double pass)
{
    stage->n_taps = half_length(pass, 0.5 - pass) / 2 + 1;
    uint32_t half = 2 * stage->n_taps - 1;
    stage->delay = half;
    if (!make_buffers(stage, 2 * stage->n_taps + PIECE, 2 * stage->n_taps + PIECE))
        return false;
    double sum = 0;
    for (uint32_t k = 0; k < stage->n_taps; k++)
        sum += 2 * kaiser_tap(2 * k + 1, half, 0.25);
    for (uint32_t k = 0; k < stage->n_taps; k++)
        stage->taps[k] = (float)(0.5 * kaiser_tap(2 * k + 1, half, 0.25) / sum);
    return true;
}

/* Prime factors, the largest first: 2s are the cheapest where the filter is long.
 * Returns 0 where a prime is too large. */
static uint32_t split_factor(uint32_t factor, uint32_t out[MAX_STAGES])
{
    static const uint32_t sizes[] = {13, 11, 7, 5, 3, 2};
    uint32_t n = 0;
    for (unsigned i = 0; i < sizeof sizes / sizeof sizes[0]; i++)
        while (factor % sizes[i] == 0) {
            factor /= sizes[i];
            out[n++] = sizes[i];
        }
    return factor == 1 ? n : 0;
}

static void reset_stage(struct stage *stage)
{
    stage->phase = 0;
    stage->n_held = stage->factor == 2 ? 2 * stage->n_taps - 1 : stage->n_taps - 1;
    stage->n_odd = stage->factor == 2 ? stage->n_taps : 0;
    memset(stage->buffer, 0, stage->n_held * sizeof *stage->buffer);
    memset(stage->odd, 0, stage->n_odd * sizeof *stage->odd);
}

enum status decimator_create(uint32_t factor, struct decimator **out)
{
    uint32_t factors[MAX_STAGES];
    uint32_t n_stages = factor == 0 ? 0 : split_factor(factor, factors);
    if (factor == 0 || (factor > 1 && n_stages == 0))
        return STATUS_BAD_ARGUMENT;
    struct decimator *decimator = calloc(1, sizeof *decimator);
    if (!decimator)
        return STATUS_NO_MEMORY;
    decimator->factor = factor;
    decimator->n_stages = n_stages;
    double in_rate = factor, step = 1; /* the output rate is 1 */
    for (uint32_t i = 0; i < n_stages; i++) {
        struct stage *stage = &decimator->stages[i];
        stage->factor = factors[i];
        double out_rate = in_rate / factors[i];
        bool good = factors[i] == 2
                        ? design_half_band(stage, PASS_BAND_END / in_rate)
                        : design_stage(stage, PASS_BAND_END / in_rate, (out_rate - PASS_BAND_END) / in_rate);
        if (!good) {
            decimator_destroy(decimator);
            return STATUS_NO_MEMORY;
        }
        reset_stage(stage);
        decimator->delay += step * stage->delay;
        step *= factors[i];
        in_rate = out_rate;
    }
    *out = decimator;
    return STATUS_OK;
}

void decimator_reset(struct decimator *decimator)
{
    for (uint32_t i = 0; i < decimator->n_stages; i++)
        reset_stage(&decimator->stages[i]);
}

LANES_WIDE static uint32_t run_stage(const struct stage *stage, uint32_t n, float *out)
{
    uint32_t n_out = 0;
    for (uint32_t at = stage->phase; at < n; at += stage->factor) {
        wide_lanes sums = {0}, x, tap;
        for (uint32_t i = 0; i < stage->n_taps; i += WIDE_LANES) {
            wide_load(&x, stage->buffer + at + i);
            wide_load(&tap, stage->taps + i);
            sums += x * tap;
        }
        const float even = (sums[0] + sums[4]) + (sums[2] + sums[6]);
        out[n_out++] = even + ((sums[1] + sums[5]) + (sums[3] + sums[7]));
    }
    return n_out;
}

#define ROW (2 * WIDE_LANES) /* outputs of a half-band stage that share the loading of each tap */

/* Output i of a half-band stage: even and odd point to the oldest samples that output 0 needs. The order of
 * the sum is the same for every output, alone or in a row. */
LANES_WIDE static void run_half_band(const float *taps, uint32_t n_taps, const float *even, const float *odd,
                                     uint32_t n, float *out)
{
    uint32_t i = 0;
    for (; i + ROW <= n; i += ROW) {
        const float *before = even + i + n_taps - 1, *after = even + i + n_taps;
        wide_lanes first, second, early, late;
        wide_load(&first, odd + i);
        wide_load(&second, odd + i + WIDE_LANES);
        first *= 0.5F;
        second *= 0.5F;
        for (uint32_t k = 0; k < n_taps; k++, before--, after++) {
            wide_load(&early, before);
            wide_load(&late, after);
            first += taps[k] * (early + late);
            wide_load(&early, before + WIDE_LANES);
            wide_load(&late, after + WIDE_LANES);
            second += taps[k] * (early + late);
        }
        wide_store(out + i, &first);
        wide_store(out + i + WIDE_LANES, &second);
    }
    for (; i < n; i++) {
        float sum = 0.5F * odd[i];
        for (uint32_t k = 0; k < n_taps; k++)
            sum += taps[k] * (even[i + n_taps - 1 - k] + even[i + n_taps + k]);
        out[i] = sum;
    }
}

/* Every other of the n samples to a, the rest to b, beginning with a. */
LANES_WIDE static void deal(const float *samples, uint32_t n, float *a, float *b)
{
    uint32_t i = 0;
    for (; 2 * (i + WIDE_LANES) <= n; i += WIDE_LANES) {
        wide_lanes x, y;
        wide_load(&x, samples + 2 * i);
        wide_load(&y, samples + 2 * i + WIDE_LANES);
        const wide_lanes even = __builtin_shufflevector(x, y, 0, 2, 4, 6, 8, 10, 12, 14);
        const wide_lanes odd = __builtin_shufflevector(x, y, 1, 3, 5, 7, 9, 11, 13, 15);
        wide_store(a + i, &even);
        wide_store(b + i, &odd);
    }
    for (; 2 * i + 1 < n; i++) {
        a[i] = samples[2 * i];
        b[i] = samples[2 * i + 1];
    }
    if (2 * i < n)
        a[i] = samples[2 * i];
}

static uint32_t push_half_band(struct stage *stage, const float *samples, uint32_t n, float *out)
{
    const uint32_t n_even = (n + 1 - stage->phase) / 2, n_odd = n - n_even;
    float *even = stage->buffer + stage->n_held, *odd = stage->odd + stage->n_odd;
    if (stage->phase == 0)
        deal(samples, n, even, odd);
    else
        deal(samples, n, odd, even);
    run_half_band(stage->taps, stage->n_taps, stage->buffer, stage->odd, n_even, out);
    stage->n_odd += n_odd - n_even;
    memmove(stage->buffer, stage->buffer + n_even, stage->n_held * sizeof *stage->buffer);
    memmove(stage->odd, stage->odd + n_even, stage->n_odd * sizeof *stage->odd);
    stage->phase = (stage->phase + n) % 2;
    return n_even;
}

/* At most PIECE samples; returns how many went to out. */
static uint32_t push_stage(struct stage *stage, const float *samples, uint32_t n, float *out)
{
    memcpy(stage->buffer + stage->n_held, samples, n * sizeof *samples);
    const uint32_t n_out = run_stage(stage, n, out);
    stage->phase = stage->phase + n_out * stage->factor - n;
    memmove(stage->buffer, stage->buffer + n, stage->n_held * sizeof *stage->buffer);
    return n_out;
}

size_t decimator_push(struct decimator *decimator, const float *samples, size_t n, float *out)
{
    if (decimator->n_stages == 0) {
        memcpy(out, samples, n * sizeof *out);
        return n;
    }
    size_t n_out = 0;
    while (n > 0) {
        uint32_t count = n < PIECE ? (uint32_t)n : PIECE;
        const float *from = samples;
        samples += count;
        n -= count;
        for (uint32_t i = 0; i < decimator->n_stages; i++) {
            struct stage *stage = &decimator->stages[i];
            count = stage->factor == 2 ? push_half_band(stage, from, count, stage->out)
                                       : push_stage(stage, from, count, stage->out);
            from = stage->out;
        }
        memcpy(out + n_out, from, count * sizeof *out);
        n_out += count;
    }
    return n_out;
}

double decimator_get_delay(const struct decimator *decimator)
{
    return decimator->delay;
}

void decimator_destroy(struct decimator *decimator)
{
    if (!decimator)
        return;
    for (uint32_t i = 0; i < decimator->n_stages; i++) {
        free(decimator->stages[i].taps);
        free(decimator->stages[i].buffer);
        free(decimator->stages[i].odd);
        free(decimator->stages[i].out);
    }
    free(decimator);
}
