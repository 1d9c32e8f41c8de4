/* Windowed FFT. The n real samples are transformed as n / 2 complex ones and taken apart afterwards (Cooley,
 * Lewis and Welch, "The fast Fourier transform algorithm", J. Sound Vib. 12, 1970): with FFTW's estimated
 * plans that takes half the time of its transform of real samples.
 *
 * Windows are sampled at half steps, w[i] = f((i + 1/2) / n): the sine window and its copy half
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
    float scale;              /* of the squared magnitude of an inner bin */
    float *window, *frame;    /* [n] */
    float *halves;            /* [n]: transform of the even samples plus i times that of the odd ones */
    float *turn_re, *turn_im; /* [n / 4 + 1]: -i exp(-2 pi i k / n) */
    fftwf_plan plan;
};

static double window_value(enum window_shape shape, double x)
{
    if (shape == WINDOW_RECTANGLE)
        return 1.0;
    double s = sin(M_PI * x);
    return shape == WINDOW_HANN ? s * s : s;
}

static float *aligned_floats(size_t n)
{
    size_t bytes = (n * sizeof(float) + ALIGNMENT - 1) / ALIGNMENT * ALIGNMENT;
    return aligned_alloc(ALIGNMENT, bytes);
}

enum status spectrum_create(uint32_t n, enum window_shape shape, struct spectrum **out)
{
    if (n < 16 || n > 1u << 21 || n % 2 || shape > WINDOW_RECTANGLE)
        return STATUS_BAD_ARGUMENT;
    struct spectrum *spectrum = calloc(1, sizeof *spectrum);
    if (!spectrum)
        return STATUS_NO_MEMORY;
    spectrum->n = n;
    spectrum->window = aligned_floats(n);
    spectrum->frame = aligned_floats(n);
    spectrum->halves = aligned_floats(n);
    spectrum->turn_re = aligned_floats(n / 4 + 1);
    spectrum->turn_im = aligned_floats(n / 4 + 1);
    if (spectrum->window && spectrum->frame && spectrum->halves && spectrum->turn_re && spectrum->turn_im)
        spectrum->plan =
            fftwf_plan_dft_1d((int)n / 2, (fftwf_complex *)spectrum->frame, (fftwf_complex *)spectrum->halves,
                              FFTW_FORWARD, FFTW_ESTIMATE | FFTW_DESTROY_INPUT);
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
    for (uint32_t i = 0; i < n; i++)
        spectrum->halves[i] = 0;
    for (uint32_t k = 0; k <= n / 4; k++) {
        spectrum->turn_re[k] = (float)-sin(2 * M_PI * k / n);
        spectrum->turn_im[k] = (float)-cos(2 * M_PI * k / n);
    }
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
    free(spectrum->halves);
    free(spectrum->turn_re);
    free(spectrum->turn_im);
    free(spectrum);
}

/* Twice bin k, and twice the conjugate of bin n / 2 - k, for 0 < k <= n / 4. */
static void take_apart(const struct spectrum *spectrum, uint32_t k, float low[2], float high[2])
{
    const float *a = spectrum->halves + 2 * k, *b = spectrum->halves + spectrum->n - 2 * k;
    const float even_re = a[0] + b[0], even_im = a[1] - b[1], odd_re = a[0] - b[0], odd_im = a[1] + b[1];
    const float turned_re = spectrum->turn_re[k] * odd_re - spectrum->turn_im[k] * odd_im;
    const float turned_im = spectrum->turn_re[k] * odd_im + spectrum->turn_im[k] * odd_re;
    low[0] = even_re + turned_re;
    low[1] = even_im + turned_im;
    high[0] = even_re - turned_re;
    high[1] = even_im - turned_im;
}

/* Four bins side by side. */
struct four_bins {
    lanes re, im;
};

/* The same of bins k .. k + 3, those of `high` the last first. */
static inline void take_four_apart(const struct spectrum *spectrum, uint32_t k, struct four_bins *low,
                                   struct four_bins *high)
{
    const float *a = spectrum->halves + 2 * k, *b = spectrum->halves + spectrum->n - 2 * (k + 3);
    const lanes a0 = lanes_load(a), a1 = lanes_load(a + LANES), b0 = lanes_load(b),
                b1 = lanes_load(b + LANES);
    const lanes a_re = __builtin_shufflevector(a0, a1, 0, 2, 4, 6);
    const lanes a_im = __builtin_shufflevector(a0, a1, 1, 3, 5, 7);
    const lanes b_re = __builtin_shufflevector(b1, b0, 2, 0, 6, 4);
    const lanes b_im = __builtin_shufflevector(b1, b0, 3, 1, 7, 5);
    const lanes turn_re = lanes_load(spectrum->turn_re + k), turn_im = lanes_load(spectrum->turn_im + k);
    const lanes even_re = a_re + b_re, even_im = a_im - b_im, odd_re = a_re - b_re, odd_im = a_im + b_im;
    const lanes turned_re = turn_re * odd_re - turn_im * odd_im;
    const lanes turned_im = turn_re * odd_im + turn_im * odd_re;
    *low = (struct four_bins){even_re + turned_re, even_im + turned_im};
    *high = (struct four_bins){even_re - turned_re, even_im - turned_im};
}

/* The same for eight bins, squared, as far as there are so many below the middle; gives the first bin left.
 */
LANES_WIDE static uint32_t square_eights(const struct spectrum *spectrum, float *power)
{
    const uint32_t m = spectrum->n / 2;
    const float scale = spectrum->scale / 4;
    uint32_t k = 1;
    for (; 2 * (k + WIDE_LANES - 1) < m; k += WIDE_LANES) {
        const float *a = spectrum->halves + 2 * k, *b = spectrum->halves + 2 * (m - k - WIDE_LANES + 1);
        wide_lanes a0, a1, b0, b1, turn_re, turn_im;
        wide_load(&a0, a);
        wide_load(&a1, a + WIDE_LANES);
        wide_load(&b0, b);
        wide_load(&b1, b + WIDE_LANES);
        wide_load(&turn_re, spectrum->turn_re + k);
        wide_load(&turn_im, spectrum->turn_im + k);
        const wide_lanes a_re = __builtin_shufflevector(a0, a1, 0, 2, 4, 6, 8, 10, 12, 14);
        const wide_lanes a_im = __builtin_shufflevector(a0, a1, 1, 3, 5, 7, 9, 11, 13, 15);
        const wide_lanes b_re = __builtin_shufflevector(b1, b0, 6, 4, 2, 0, 14, 12, 10, 8);
        const wide_lanes b_im = __builtin_shufflevector(b1, b0, 7, 5, 3, 1, 15, 13, 11, 9);
        const wide_lanes even_re = a_re + b_re, even_im = a_im - b_im;
        const wide_lanes odd_re = a_re - b_re, odd_im = a_im + b_im;
        const wide_lanes turned_re = turn_re * odd_re - turn_im * odd_im;
        const wide_lanes turned_im = turn_re * odd_im + turn_im * odd_re;
        const wide_lanes low_re = even_re + turned_re, low_im = even_im + turned_im;
        const wide_lanes high_re = even_re - turned_re, high_im = even_im - turned_im;
        const wide_lanes low = (low_re * low_re + low_im * low_im) * scale;
        wide_lanes high = (high_re * high_re + high_im * high_im) * scale;
        high = __builtin_shufflevector(high, high, 7, 6, 5, 4, 3, 2, 1, 0);
        wide_store(power + k, &low);
        wide_store(power + m - k - WIDE_LANES + 1, &high);
    }
    return k;
}

static void square_bins(const struct spectrum *spectrum, float *power)
{
    const uint32_t m = spectrum->n / 2;
    const float scale = spectrum->scale / 4, *first = spectrum->halves;
    /* DC and Nyquist have no mirror bin to stand for. */
    power[0] = (first[0] + first[1]) * (first[0] + first[1]) * spectrum->scale / 2;
    power[m] = (first[0] - first[1]) * (first[0] - first[1]) * spectrum->scale / 2;
    uint32_t k = square_eights(spectrum, power);
    for (; 2 * (k + 3) < m; k += LANES) {
        struct four_bins low, high;
        take_four_apart(spectrum, k, &low, &high);
        const lanes mirrored = (high.re * high.re + high.im * high.im) * scale;
        lanes_store(power + k, (low.re * low.re + low.im * low.im) * scale);
        lanes_store(power + m - k - 3, __builtin_shufflevector(mirrored, mirrored, 3, 2, 1, 0));
    }
    for (; 2 * k <= m; k++) {
        float low[2], high[2];
        take_apart(spectrum, k, low, high);
        power[k] = (low[0] * low[0] + low[1] * low[1]) * scale;
        power[m - k] = (high[0] * high[0] + high[1] * high[1]) * scale;
    }
}

LANES_WIDE static void apply_window(const float *restrict frame, const float *restrict window, uint32_t n,
                                    float *restrict out)
{
    wide_lanes x, w;
    uint32_t i = 0;
    for (; i + WIDE_LANES <= n; i += WIDE_LANES) {
        wide_load(&x, frame + i);
        wide_load(&w, window + i);
        x *= w;
        wide_store(out + i, &x);
    }
    for (; i < n; i++)
        out[i] = frame[i] * window[i];
}

void spectrum_power(struct spectrum *spectrum, const float *frame, float *out_power)
{
    apply_window(frame, spectrum->window, spectrum->n, spectrum->frame);
    fftwf_execute(spectrum->plan);
    square_bins(spectrum, out_power);
}

const float *spectrum_get_window(const struct spectrum *spectrum)
{
    return spectrum->window;
}

void spectrum_get_low_bins(const struct spectrum *spectrum, uint32_t count, float *out)
{
    uint32_t k = 1;
    for (; k + LANES <= count; k += LANES) {
        struct four_bins low, high;
        take_four_apart(spectrum, k, &low, &high);
        low.re *= 0.5F;
        low.im *= 0.5F;
        lanes_store(out + 2 * k, __builtin_shufflevector(low.re, low.im, 0, 4, 1, 5));
        lanes_store(out + 2 * k + LANES, __builtin_shufflevector(low.re, low.im, 2, 6, 3, 7));
    }
    for (; k < count; k++) {
        float high[2];
        take_apart(spectrum, k, out + 2 * k, high);
        out[2 * k] /= 2;
        out[2 * k + 1] /= 2;
    }
    out[0] = spectrum->halves[0] + spectrum->halves[1];
    out[1] = 0;
}
