/* Ambient noise; see noise.h. */
#include "scene/noise.h"
#include "base/random.h"
#include "base/units.h"
#include "sea/noise.h"
#include <fftw3.h>
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define HIGH_PASS_HZ 10.0

struct noise {
    uint32_t n_channels, half; /* a segment has 2 half frames */
    uint64_t seed;
    float *sigma;            /* [half + 1]: of a bin's real and imaginary part, Pa */
    float *window;           /* [2 half] */
    fftwf_complex *spectrum; /* [half + 1] */
    float *segment;          /* [2 half] */
    float *tails;            /* [n_channels][half]: second half of segment tail_of[channel] */
    uint64_t *tail_of;       /* [n_channels] */
    bool *has_tail;          /* [n_channels] */
    fftwf_plan plan;
};

double noise_level_db(double frequency_hz, double wind_m_s, double shipping)
{
    double ratio = frequency_hz / HIGH_PASS_HZ, high_pass = ratio * ratio / (1 + ratio * ratio);
    return sea_noise_db(frequency_hz, wind_m_s, shipping) + units_power_db(high_pass);
}

uint32_t noise_tile_frames(double rate_hz)
{
    uint32_t n = 256;
    while (n * 24.0 < rate_hz)
        n *= 2;
    return n;
}

void noise_destroy(struct noise *noise)
{
    if (!noise)
        return;
    if (noise->plan)
        fftwf_destroy_plan(noise->plan);
    fftwf_free(noise->spectrum);
    fftwf_free(noise->segment);
    free(noise->sigma);
    free(noise->window);
    free(noise->tails);
    free(noise->tail_of);
    free(noise->has_tail);
    free(noise);
}

static enum status allocate(struct noise *noise)
{
    size_t half = noise->half, n_channels = noise->n_channels;
    noise->sigma = calloc(half + 1, sizeof *noise->sigma);
    noise->window = calloc(2 * half, sizeof *noise->window);
    noise->tails = calloc(n_channels * half, sizeof *noise->tails);
    noise->tail_of = calloc(n_channels, sizeof *noise->tail_of);
    noise->has_tail = calloc(n_channels, sizeof *noise->has_tail);
    noise->spectrum = fftwf_alloc_complex(half + 1);
    noise->segment = fftwf_alloc_real(2 * half);
    if (!noise->sigma || !noise->window || !noise->tails || !noise->tail_of || !noise->has_tail ||
        !noise->spectrum || !noise->segment)
        return STATUS_NO_MEMORY;
    noise->plan = fftwf_plan_dft_c2r_1d(2 * noise->half <= INT32_MAX ? (int)(2 * noise->half) : 0,
                                        noise->spectrum, noise->segment, FFTW_ESTIMATE);
    return noise->plan ? STATUS_OK : STATUS_NO_MEMORY;
}

enum status noise_create(double rate_hz, uint32_t n_channels, uint64_t seed, double wind_m_s, double shipping,
                         struct noise **out)
{
    struct noise *noise = calloc(1, sizeof *noise);
    if (!noise)
        return STATUS_NO_MEMORY;
    noise->n_channels = n_channels;
    noise->half = noise_tile_frames(rate_hz);
    noise->seed = seed;
    if (allocate(noise) != STATUS_OK) {
        noise_destroy(noise);
        return STATUS_NO_MEMORY;
    }
    uint32_t n = 2 * noise->half;
    double bin_hz = rate_hz / n;
    for (uint32_t i = 0; i < n; i++)
        noise->window[i] = (float)sin(3.141592653589793 * (i + 0.5) / n);
    /* x[i] = 2 Re(sum X_k e^(2 pi i k / n)), so a bin with E|X|2 = 2 sigma2 holds a mean square of 4 sigma2.
     */
    for (uint32_t k = 1; k < noise->half; k++) {
        double density_pa2 = 1e-12 * units_power_ratio(noise_level_db(k * bin_hz, wind_m_s, shipping));
        noise->sigma[k] = (float)(sqrt(density_pa2 * bin_hz) / 2);
    }
    *out = noise;
    return STATUS_OK;
}

/* Fills noise->segment with a segment of a channel, windowed. */
static void make_segment(struct noise *noise, uint64_t number, uint32_t channel)
{
    struct random random;
    random_reset(&random, noise->seed ^ (number * UINT64_C(0x9e3779b97f4a7c15) +
                                         channel * UINT64_C(0xd1b54a32d192ed03)));
    for (uint32_t k = 0; k <= noise->half; k++) {
        float sigma = noise->sigma[k];
        noise->spectrum[k][0] = sigma * (float)random_normal(&random);
        noise->spectrum[k][1] = sigma * (float)random_normal(&random);
    }
    fftwf_execute(noise->plan);
    for (uint32_t i = 0; i < 2 * noise->half; i++)
        noise->segment[i] *= noise->window[i];
}

void noise_add(struct noise *noise, uint64_t tile, uint32_t channel, float *out)
{
    size_t half = noise->half;
    float *tail = noise->tails + channel * half;
    if (!noise->has_tail[channel] || noise->tail_of[channel] != tile) {
        make_segment(noise, tile, channel);
        memcpy(tail, noise->segment + half, half * sizeof *tail);
    }
    make_segment(noise, tile + 1, channel);
    for (size_t i = 0; i < half; i++)
        out[i] += tail[i] + noise->segment[i];
    memcpy(tail, noise->segment + half, half * sizeof *tail);
    noise->tail_of[channel] = tile + 1;
    noise->has_tail[channel] = true;
}
