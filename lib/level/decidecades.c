/* Decidecades from one or two FFT stages and a bank of low band-pass filters. */
#include "level/decidecades.h"
#include "dsp/filter.h"
#include "dsp/lanes.h"
#include "dsp/spectrum.h"
#include <fftw3.h>
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define HELD_SECONDS 4
#define MAX_STAGES 2
#define MIN_BINS 16.0         /* bins a band at least spans */
#define LOWEST_RATE_HZ 1200.0 /* the filters run at this rate or up to twice it */
#define LOWEST_REACH 0.36     /* of their rate, to which the filters are used */
#define FIRST_FRAME 2048u     /* frame length of the first of two stages, and its decimation */
#define FIRST_STEP 8u
#define LAST_FRAME_A_STEP 256u /* the last stage's frame lasts 256 samples of the filters' rate */
#define FILTER_ORDER 4
/* Noise bandwidth of a Butterworth filter over its -3 dB width: (pi / 2n) / sin(pi / 2n), n = 4. */
#define NOISE_BANDWIDTH 1.0261721529770308
#define FILTER_DELAY 0.8535 /* group delay at the centre times the bandwidth: 2.6131 / pi x 1.0262 */

/* Bins of a band: the first and last by the part of them that lies inside. */
struct band_bins {
    uint32_t first, last;
    float first_weight, last_weight;
};

/* One frame length at one rate, and the way to the next lower rate. */
struct stage {
    uint32_t n, hop, scale; /* scale: frames of the stream per sample of the stage */
    uint32_t step, keep;    /* decimation to the next rate, and its frame length n / step */
    uint32_t first_band, end_band;
    struct band_bins bins[LEVEL_MAX_BANDS];
    struct spectrum *spectrum;
    float *frame, *power; /* [n], [n / 2 + 1] */
    uint32_t fill;        /* samples in the second half of frame */
    uint64_t n_frames;    /* since the reset */
    fftwf_plan inverse;
    float *kept, *slice, *window, *tail; /* [keep + 2], [keep], [keep], [keep / 2] */
};

typedef double four_doubles __attribute__((vector_size(32)));

/* Sections of all low bands side by side, of which four are taken at once. */
struct bank {
    uint32_t n_bands, scale;
    double b0[FILTER_ORDER][LEVEL_MAX_BANDS + 1], a1[FILTER_ORDER][LEVEL_MAX_BANDS + 1];
    double a2[FILTER_ORDER][LEVEL_MAX_BANDS + 1];
    double state1[FILTER_ORDER][LEVEL_MAX_BANDS + 1], state2[FILTER_ORDER][LEVEL_MAX_BANDS + 1];
    double settled[LEVEL_MAX_BANDS]; /* samples after a reset until a band counts */
    uint64_t n_samples;              /* since the reset */
};

struct decidecades {
    uint32_t rate_hz, n_bands, n_stages;
    uint64_t start_frame; /* of the last reset */
    struct stage stages[MAX_STAGES];
    struct bank bank;
    struct decidecade_sums seconds[HELD_SECONDS];
};

double decidecades_low_hz(int n)
{
    return 1000.0 * pow(10.0, (n - 0.5) / 10.0);
}

double decidecades_high_hz(int n)
{
    return 1000.0 * pow(10.0, (n + 0.5) / 10.0);
}

uint32_t decidecades_count(double rate_hz)
{
    uint32_t count = 0;
    while (count < LEVEL_MAX_BANDS && decidecades_high_hz(LEVEL_FIRST_BAND + (int)count) < 0.94 * rate_hz / 2)
        count++;
    return count;
}

static float *aligned_floats(size_t n)
{
    size_t bytes = (n * sizeof(float) + 63) / 64 * 64;
    float *floats = aligned_alloc(64, bytes);
    if (floats)
        memset(floats, 0, bytes);
    return floats;
}

static struct band_bins bins_of_band(int n, double bin_hz)
{
    double low = decidecades_low_hz(n) / bin_hz + 0.5, high = decidecades_high_hz(n) / bin_hz + 0.5;
    struct band_bins bins = {.first = (uint32_t)low, .last = (uint32_t)high};
    bins.first_weight = (float)(bins.first + 1 - low);
    bins.last_weight = (float)(high - bins.last);
    return bins;
}

/* Bank's bands first, then the last stage's, then the first stage's: each from the lowest that has enough
 * bins. */
static void share_bands(struct decidecades *d)
{
    const double low_rate_hz = (double)d->rate_hz / d->bank.scale;
    uint32_t band = 0;
    while (band < d->n_bands &&
           decidecades_high_hz(LEVEL_FIRST_BAND + (int)band) <= LOWEST_REACH * low_rate_hz)
        band++;
    d->bank.n_bands = band;
    for (uint32_t s = d->n_stages; s-- > 0;) {
        struct stage *stage = &d->stages[s];
        stage->first_band = band;
        if (s == 0)
            band = d->n_bands;
        else {
            double width_hz = MIN_BINS * d->rate_hz / d->stages[0].n;
            while (band < d->n_bands && decidecades_high_hz(LEVEL_FIRST_BAND + (int)band) -
                                                decidecades_low_hz(LEVEL_FIRST_BAND + (int)band) <
                                            width_hz)
                band++;
        }
        stage->end_band = band;
        double bin_hz = (double)d->rate_hz / stage->scale / stage->n;
        for (uint32_t b = stage->first_band; b < stage->end_band; b++)
            stage->bins[b] = bins_of_band(LEVEL_FIRST_BAND + (int)b, bin_hz);
    }
}

static void set_bank(struct bank *bank, double rate_hz)
{
    for (uint32_t b = 0; b < bank->n_bands; b++) {
        int n = LEVEL_FIRST_BAND + (int)b;
        double low = decidecades_low_hz(n), high = decidecades_high_hz(n),
               width = (high - low) / NOISE_BANDWIDTH;
        double centre2 = low * high; /* keep the geometric centre, narrow the width */
        double narrow_high = width / 2 + sqrt(width * width / 4 + centre2);
        struct filter filter;
        filter_band_pass(FILTER_ORDER, narrow_high - width, narrow_high, rate_hz, &filter);
        for (uint32_t k = 0; k < FILTER_ORDER; k++) {
            bank->b0[k][b] = filter.sections[k].b0; /* b1 = 0, b2 = -b0 in a band-pass section */
            bank->a1[k][b] = filter.sections[k].a1;
            bank->a2[k][b] = filter.sections[k].a2;
        }
        bank->settled[b] = FILTER_DELAY / (high - low) * rate_hz;
    }
}

static bool create_stage(struct stage *stage)
{
    stage->hop = stage->n / 2;
    stage->keep = stage->n / stage->step;
    if (spectrum_create(stage->n, WINDOW_SINE, &stage->spectrum))
        return false;
    stage->frame = aligned_floats(stage->n);
    stage->power = aligned_floats(stage->n / 2 + 1);
    stage->kept = aligned_floats(stage->keep + 2);
    stage->slice = aligned_floats(stage->keep);
    stage->window = aligned_floats(stage->keep);
    stage->tail = aligned_floats(stage->keep / 2);
    if (!stage->frame || !stage->power || !stage->kept || !stage->slice || !stage->window || !stage->tail)
        return false;
    for (uint32_t i = 0; i < stage->keep; i++)
        stage->window[i] = spectrum_get_window(stage->spectrum)[i * stage->step] / (float)stage->n;
    stage->inverse = fftwf_plan_dft_c2r_1d((int)stage->keep, (fftwf_complex *)stage->kept, stage->slice,
                                           FFTW_ESTIMATE | FFTW_DESTROY_INPUT);
    return stage->inverse != NULL;
}

enum status decidecades_create(uint32_t rate_hz, struct decidecades **out)
{
    if (rate_hz < 8000 || rate_hz > 1000000)
        return STATUS_BAD_ARGUMENT;
    struct decidecades *d = calloc(1, sizeof *d);
    if (!d)
        return STATUS_NO_MEMORY;
    uint32_t scale = 1;
    while (rate_hz >= 2 * LOWEST_RATE_HZ * scale)
        scale *= 2;
    d->rate_hz = rate_hz;
    d->n_bands = decidecades_count(rate_hz);
    d->bank.scale = scale;
    if (scale * LAST_FRAME_A_STEP <= FIRST_FRAME) {
        d->n_stages = 1;
        d->stages[0] = (struct stage){.n = LAST_FRAME_A_STEP * scale, .scale = 1, .step = scale};
    } else {
        d->n_stages = 2;
        uint32_t rest = scale / FIRST_STEP;
        d->stages[0] = (struct stage){.n = FIRST_FRAME, .scale = 1, .step = FIRST_STEP};
        d->stages[1] = (struct stage){.n = LAST_FRAME_A_STEP * rest, .scale = FIRST_STEP, .step = rest};
    }
    share_bands(d);
    set_bank(&d->bank, (double)rate_hz / scale);
    for (uint32_t s = 0; s < d->n_stages; s++)
        if (!create_stage(&d->stages[s])) {
            decidecades_destroy(d);
            return STATUS_NO_MEMORY;
        }
    *out = d;
    return STATUS_OK;
}

void decidecades_destroy(struct decidecades *d)
{
    if (!d)
        return;
    for (uint32_t s = 0; s < d->n_stages; s++) {
        struct stage *stage = &d->stages[s];
        spectrum_destroy(stage->spectrum);
        if (stage->inverse)
            fftwf_destroy_plan(stage->inverse);
        free(stage->frame);
        free(stage->power);
        free(stage->kept);
        free(stage->slice);
        free(stage->window);
        free(stage->tail);
    }
    free(d);
}

void decidecades_reset(struct decidecades *d, uint64_t next_frame)
{
    d->start_frame = next_frame;
    for (uint32_t s = 0; s < d->n_stages; s++) {
        struct stage *stage = &d->stages[s];
        memset(stage->frame, 0, stage->n * sizeof *stage->frame);
        memset(stage->tail, 0, stage->keep / 2 * sizeof *stage->tail);
        stage->fill = 0;
        stage->n_frames = 0;
    }
    memset(d->bank.state1, 0, sizeof d->bank.state1);
    memset(d->bank.state2, 0, sizeof d->bank.state2);
    d->bank.n_samples = 0;
    memset(d->seconds, 0, sizeof d->seconds);
}

uint32_t decidecades_get_hop(const struct decidecades *d)
{
    return d->stages[0].hop;
}

/* Sum of a band's bins. */
static double sum_bins(const struct band_bins *bins, const float *power)
{
    if (bins->first == bins->last)
        return power[bins->first] * (bins->first_weight + bins->last_weight - 1);
    lanes inner = {0};
    uint32_t k = bins->first + 1;
    for (; k + LANES <= bins->last; k += LANES)
        inner += lanes_load(power + k);
    double sum = lanes_sum(inner) + (double)power[bins->first] * bins->first_weight +
                 (double)power[bins->last] * bins->last_weight;
    for (; k < bins->last; k++)
        sum += power[k];
    return sum;
}

/* Adds one frame's bands, of `length` frames of the stream from `from`, to a second in the part that it
 * holds. */
static void add_to_second(struct decidecades *d, const struct stage *stage, uint64_t second, double share,
                          double frames)
{
    struct decidecade_sums *sums = &d->seconds[second % HELD_SECONDS];
    const double hop = (double)stage->hop * stage->scale;
    for (uint32_t b = stage->first_band; b < stage->end_band; b++) {
        sums->energy[b] += sum_bins(&stage->bins[b], stage->power) * hop * share;
        sums->frames[b] += frames;
    }
}

/* A frame stands for the hop around its centre. The first one after a reset has only its second half. */
static void count_frame(struct decidecades *d, const struct stage *stage)
{
    const uint64_t hop = (uint64_t)stage->hop * stage->scale;
    uint64_t centre = d->start_frame + stage->n_frames * hop;
    uint64_t from = stage->n_frames ? centre - hop / 2 : centre, to = centre + hop / 2;
    uint64_t second = from / d->rate_hz, border = (second + 1) * d->rate_hz;
    double length = (double)(to - from);
    if (to <= border) {
        add_to_second(d, stage, second, 1, length);
        return;
    }
    double early = (double)(border - from);
    add_to_second(d, stage, second, early / length, early);
    add_to_second(d, stage, second + 1, 1 - early / length, length - early);
}

/* One sample of the lowest rate through every low band; what is beyond n_bands has no gain. */
LANES_WIDE static void filter_bank(struct bank *bank, double sample, double out[LEVEL_MAX_BANDS + 1])
{
    for (uint32_t b = 0; b < bank->n_bands; b += 4) {
        four_doubles x = {sample, sample, sample, sample}, b0, a1, a2, s1, s2;
        for (uint32_t k = 0; k < FILTER_ORDER; k++) {
            memcpy(&b0, &bank->b0[k][b], sizeof b0);
            memcpy(&a1, &bank->a1[k][b], sizeof a1);
            memcpy(&a2, &bank->a2[k][b], sizeof a2);
            memcpy(&s1, &bank->state1[k][b], sizeof s1);
            memcpy(&s2, &bank->state2[k][b], sizeof s2);
            const four_doubles in = b0 * x;
            x = in + s1;
            s1 = s2 - a1 * x;
            s2 = -in - a2 * x;
            memcpy(&bank->state1[k][b], &s1, sizeof s1);
            memcpy(&bank->state2[k][b], &s2, sizeof s2);
        }
        memcpy(&out[b], &x, sizeof x);
    }
}

static void push_bank(struct decidecades *d, float sample)
{
    struct bank *bank = &d->bank;
    const uint32_t n = bank->n_bands;
    double x[LEVEL_MAX_BANDS + 1];
    filter_bank(bank, sample, x);
    const uint64_t frame = d->start_frame + bank->n_samples * bank->scale;
    struct decidecade_sums *sums = &d->seconds[frame / d->rate_hz % HELD_SECONDS];
    const double count = (double)bank->n_samples;
    for (uint32_t b = 0; b < n; b++) {
        double weight = count >= bank->settled[b] ? bank->scale : 0;
        sums->energy[b] += x[b] * x[b] * weight;
        sums->frames[b] += weight;
    }
    bank->n_samples++;
}

/* The frame's lowest bins as samples of the next rate, added to the half that the frame before left. */
static const float *decimate_frame(struct stage *stage)
{
    spectrum_get_low_bins(stage->spectrum, stage->keep / 2, stage->kept);
    stage->kept[stage->keep] = stage->kept[stage->keep + 1] = 0;
    fftwf_execute(stage->inverse);
    const uint32_t half = stage->keep / 2;
    float *restrict slice = stage->slice, *restrict tail = stage->tail;
    const float *restrict window = stage->window;
    for (uint32_t i = 0; i < half; i++)
        slice[i] = slice[i] * window[i] + tail[i];
    for (uint32_t i = 0; i < half; i++)
        tail[i] = slice[half + i] * window[half + i];
    return slice;
}

static void run_stage(struct decidecades *d, uint32_t index);

/* Samples of the next rate, which begin one hop before the frame's centre; those before the reset do not
 * count. */
static void pass_on(struct decidecades *d, uint32_t index)
{
    struct stage *stage = &d->stages[index];
    const float *slice = decimate_frame(stage);
    const uint32_t half = stage->keep / 2;
    if (stage->n_frames == 0)
        return;
    if (index + 1 == d->n_stages) {
        for (uint32_t i = 0; i < half; i++)
            push_bank(d, slice[i]);
        return;
    }
    struct stage *next = &d->stages[index + 1];
    for (uint32_t done = 0; done < half;) {
        uint32_t take = half - done < next->hop - next->fill ? half - done : next->hop - next->fill;
        memcpy(next->frame + next->hop + next->fill, slice + done, take * sizeof *slice);
        next->fill += take;
        done += take;
        if (next->fill == next->hop)
            run_stage(d, index + 1);
    }
}

static void run_stage(struct decidecades *d, uint32_t index)
{
    struct stage *stage = &d->stages[index];
    spectrum_power(stage->spectrum, stage->frame, stage->power);
    count_frame(d, stage);
    pass_on(d, index);
    memcpy(stage->frame, stage->frame + stage->hop, stage->hop * sizeof *stage->frame);
    stage->fill = 0;
    stage->n_frames++;
}

void decidecades_push(struct decidecades *d, const float *pascals)
{
    struct stage *first = &d->stages[0];
    memcpy(first->frame + first->hop, pascals, first->hop * sizeof *pascals);
    run_stage(d, 0);
}

uint64_t decidecades_get_complete(const struct decidecades *d)
{
    uint64_t complete = d->start_frame + d->bank.n_samples * d->bank.scale;
    for (uint32_t s = 0; s < d->n_stages; s++) {
        const struct stage *stage = &d->stages[s];
        uint64_t hop = (uint64_t)stage->hop * stage->scale;
        uint64_t until = d->start_frame + (stage->n_frames ? stage->n_frames * hop - hop / 2 : 0);
        complete = until < complete ? until : complete;
    }
    return complete;
}

void decidecades_take(struct decidecades *d, uint64_t second, struct decidecade_sums *out)
{
    struct decidecade_sums *sums = &d->seconds[second % HELD_SECONDS];
    *out = *sums;
    memset(sums, 0, sizeof *sums);
}
