/* A chain of FIR stages; see decimate.h. */
#include "dsp/decimate.h"
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define MAX_STAGES 32
#define LARGEST_PRIME 13
#define LANES 8           /* partial sums of a dot product: a fixed order that the compiler can vectorise */
#define PIECE 512         /* input samples a stage takes at once */
#define ATTENUATION_DB 90 /* of each stage: leaves 10 dB for the sum of a chain's stages */
#define PASS_BAND_END 0.4 /* of the output rate */
static const double pi = 3.14159265358979323846;

struct stage {
    uint32_t factor;
    uint32_t n_taps; /* a multiple of LANES: the filter has zeros in front */
    uint32_t delay;  /* in samples of its input */
    uint32_t phase;  /* input samples until the next output */
    uint32_t n_held; /* in buffer */
    float *taps;     /* [n_taps] */
    float *buffer;   /* [n_taps + PIECE]: the last n_taps - 1 samples, then the new ones */
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

/* Low-pass of the Kaiser window method: edges in cycles per sample. The number of taps is odd, so that the
 * delay is whole. */
static bool design_stage(struct stage *stage, double pass, double stop)
{
    double beta = 0.1102 * (ATTENUATION_DB - 8.7);
    double width = 2 * pi * (stop - pass);
    uint32_t half = (uint32_t)ceil((ATTENUATION_DB - 8) / (2.285 * width) / 2);
    uint32_t n = 2 * half + 1;
    stage->n_taps = (n + LANES - 1) / LANES * LANES;
    stage->delay = half;
    stage->taps = calloc(stage->n_taps, sizeof *stage->taps);
    stage->buffer = calloc(stage->n_taps + PIECE, sizeof *stage->buffer);
    stage->out = calloc(PIECE + 1, sizeof *stage->out);
    if (!stage->taps || !stage->buffer || !stage->out)
        return false;
    double cut = (pass + stop) / 2, sum = 0;
    for (int turn = 0; turn < 2; turn++) /* first the sum, for a gain of 1 at 0 Hz */
        for (uint32_t i = 0; i < n; i++) {
            double x = (double)i - half, r = x / half;
            double sinc = x == 0 ? 2 * cut : sin(2 * pi * cut * x) / (pi * x);
            double tap = sinc * bessel_i0(beta * sqrt(fmax(0, 1 - r * r))) / bessel_i0(beta);
            if (turn == 0)
                sum += tap;
            else
                stage->taps[stage->n_taps - n + i] = (float)(tap / sum);
        }
    return true;
}

/* Prime factors, the largest first; two 2s become a 4 unless they are the last (fewer, shorter filters).
 * Returns 0 where a prime is too large. */
static uint32_t split_factor(uint32_t factor, uint32_t out[MAX_STAGES])
{
    static const uint32_t sizes[] = {13, 11, 7, 5, 3, 4, 2};
    uint32_t n = 0;
    for (unsigned i = 0; i < sizeof sizes / sizeof sizes[0]; i++)
        while (factor % sizes[i] == 0 && !(sizes[i] == 4 && factor == 4)) {
            factor /= sizes[i];
            out[n++] = sizes[i];
        }
    return factor == 1 ? n : 0;
}

static void reset_stage(struct stage *stage)
{
    memset(stage->buffer, 0, (stage->n_taps + PIECE) * sizeof *stage->buffer);
    stage->n_held = stage->n_taps - 1;
    stage->phase = 0;
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
        if (!design_stage(stage, PASS_BAND_END / in_rate, (out_rate - PASS_BAND_END) / in_rate)) {
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

static float dot(const float *a, const float *b, uint32_t n)
{
    float lanes[LANES] = {0};
    for (uint32_t i = 0; i < n; i += LANES)
        for (uint32_t j = 0; j < LANES; j++)
            lanes[j] += a[i + j] * b[i + j];
    return ((lanes[0] + lanes[4]) + (lanes[1] + lanes[5])) + ((lanes[2] + lanes[6]) + (lanes[3] + lanes[7]));
}

/* At most PIECE samples; returns how many went to out. */
static uint32_t push_stage(struct stage *stage, const float *samples, uint32_t n, float *out)
{
    memcpy(stage->buffer + stage->n_held, samples, n * sizeof *samples);
    uint32_t n_out = 0, i = stage->phase;
    for (; i < n; i += stage->factor)
        out[n_out++] = dot(stage->buffer + i, stage->taps, stage->n_taps);
    stage->phase = i - n;
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
            count = push_stage(stage, from, count, stage->out);
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
        free(decimator->stages[i].out);
    }
    free(decimator);
}
