/* Windowed FFT. Windows are sampled at half steps, w[i] = f((i + 1/2) / n): the sine window and its copy half
 * a frame later then have squares that sum to exactly 1 (Princen and Bradley, IEEE Trans. ASSP 34, 1986), so
 * that half-overlapped frames weigh every sample alike. */
#include "dsp/spectrum.h"
#include "dsp/lanes.h"
#include <fftw3.h>
#include <math.h>
#include <stdlib.h>

#define ALIGNMENT 64

struct spectrum {
    uint32_t n;
    float scale; /* of the squared magnitude of an inner bin */
    float *window, *frame, *bins;
    fftwf_plan plan;
};

static double window_value(enum window_shape shape, double x)
{
    double s = sin(M_PI * x);
    return shape == WINDOW_HANN ? s * s : shape == WINDOW_SINE ? s : 1.0;
}

static float *aligned_floats(size_t n)
{
    size_t bytes = (n * sizeof(float) + ALIGNMENT - 1) / ALIGNMENT * ALIGNMENT;
    return aligned_alloc(ALIGNMENT, bytes);
}

enum status spectrum_create(uint32_t n, enum window_shape shape, struct spectrum **out)
{
    if (n < 16 || n > 1u << 20 || n % 2 || shape > WINDOW_RECTANGLE)
        return STATUS_BAD_ARGUMENT;
    struct spectrum *spectrum = calloc(1, sizeof *spectrum);
    if (!spectrum)
        return STATUS_NO_MEMORY;
    spectrum->n = n;
    spectrum->window = aligned_floats(n);
    spectrum->frame = aligned_floats(n);
    spectrum->bins = aligned_floats(n + 2);
    if (spectrum->window && spectrum->frame && spectrum->bins)
        spectrum->plan = fftwf_plan_dft_r2c_1d((int)n, spectrum->frame, (fftwf_complex *)spectrum->bins,
                                               FFTW_ESTIMATE | FFTW_DESTROY_INPUT);
    if (!spectrum->plan) {
        spectrum_destroy(spectrum);
        return STATUS_NO_MEMORY;
    }
    double energy = 0;
    for (uint32_t i = 0; i < n; i++) {
        double w = window_value(shape, (i + 0.5) / n);
        spectrum->window[i] = (float)w;
        energy += w * w;
    }
    for (uint32_t i = 0; i < n + 2; i++)
        spectrum->bins[i] = 0;
    spectrum->scale = (float)(2.0 / (n * energy));
    *out = spectrum;
    return STATUS_OK;
}

void spectrum_destroy(struct spectrum *spectrum)
{
    if (!spectrum)
        return;
    if (spectrum->plan)
        fftwf_destroy_plan(spectrum->plan);
    free(spectrum->window);
    free(spectrum->frame);
    free(spectrum->bins);
    free(spectrum);
}

/* Squared magnitudes of complex bins, times scale. */
static void square_bins(const float *bins, uint32_t n_bins, float scale, float *power)
{
    uint32_t k = 0;
    for (; k + LANES <= n_bins; k += LANES) {
        lanes a = lanes_load(bins + 2 * k), b = lanes_load(bins + 2 * k + LANES);
        lanes re = __builtin_shufflevector(a, b, 0, 2, 4, 6), im = __builtin_shufflevector(a, b, 1, 3, 5, 7);
        lanes_store(power + k, (re * re + im * im) * scale);
    }
    for (; k < n_bins; k++)
        power[k] = (bins[2 * k] * bins[2 * k] + bins[2 * k + 1] * bins[2 * k + 1]) * scale;
}

void spectrum_power(struct spectrum *spectrum, const float *frame, float *out_power)
{
    const uint32_t n = spectrum->n;
    const float *restrict window = spectrum->window;
    float *restrict windowed = spectrum->frame;
    for (uint32_t i = 0; i < n; i++)
        windowed[i] = frame[i] * window[i];
    fftwf_execute(spectrum->plan);
    square_bins(spectrum->bins, n / 2 + 1, spectrum->scale, out_power);
    /* DC and Nyquist have no mirror bin to stand for. */
    out_power[0] *= 0.5f;
    out_power[n / 2] *= 0.5f;
}

const float *spectrum_get_window(const struct spectrum *spectrum)
{
    return spectrum->window;
}

const float *spectrum_get_bins(const struct spectrum *spectrum)
{
    return spectrum->bins;
}
