/* Lines that last, pick-up, flow; see lines.h. */
#include "call/lines.h"
#include "base/units.h"
#include "call/lines_family.h"
#include "dsp/decimate.h"
#include "dsp/spectrum.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define STAND_OUT 4.0 /* 6 dB */
#define NEAR 3        /* bins beside a line that it must stand above: from here ... */
#define FAR 10        /* ... to here */
#define MOST_TOLD 16  /* lines of one period */
#define SLOW_N 4096
#define SLOW_BINS (SLOW_N / 4 + 1) /* of which the phase is known */
#define SAME LINES_SAME
#define TELL_S 10.0
#define FLOW_COHERENCE 0.2
#define FLOW_POWER 2.2 /* of frequency, from 20 to 100 Hz */

/* Mean spectra of one resolution. */
struct means {
    uint32_t n_bins, n;    /* spectra summed */
    double bin_hz, frames; /* period, in frames of the stream */
    uint64_t start_frame;
    float *sum;   /* [n_bins] */
    uint8_t *age; /* [n_bins]: periods in a row with a line here */
};

struct lines {
    struct other_setup setup;
    struct means fast, slow;
    uint32_t factor, sums, filled, newest; /* sums: 4 where samples are summed first, else 1 */
    float carried[2];
    float *summed; /* [n / 4] */
    double slow_rate_hz;
    struct decimator *decimators[2];
    struct spectrum *spectrum;
    float *held[2];                     /* [SLOW_N] */
    float *power;                       /* [SLOW_N / 2 + 1] */
    float *bins[2];                     /* [2 * SLOW_BINS] */
    float *scratch;                     /* decimated samples of a frame */
    float *cross;                       /* [4 * SLOW_BINS]: sums of re, im of the product, and both powers */
    float *unlike;                      /* [SLOW_BINS]: sum of the power of the difference */
    double told[CATALOGUE_MAX_CLASSES]; /* frame of the last word */
    uint32_t flow_periods;
};

static enum status create_means(struct means *means, uint32_t n_bins, double bin_hz)
{
    means->n_bins = n_bins;
    means->bin_hz = bin_hz;
    means->sum = calloc(n_bins, sizeof *means->sum);
    means->age = calloc(n_bins, sizeof *means->age);
    return means->sum && means->age ? STATUS_OK : STATUS_NO_MEMORY;
}

static enum status fill(struct lines *lines)
{
    const struct other_setup *setup = &lines->setup;
    enum status status = create_means(&lines->fast, setup->n / 2 + 1, setup->bin_hz);
    if (status == STATUS_OK)
        status = create_means(&lines->slow, SLOW_N / 2 + 1, lines->slow_rate_hz / SLOW_N);
    for (uint32_t i = 0; i < (setup->pair ? 2 : 1) && status == STATUS_OK; i++) {
        status = decimator_create(lines->factor / lines->sums, &lines->decimators[i]);
        lines->held[i] = calloc(SLOW_N, sizeof(float));
        lines->bins[i] = calloc(2 * SLOW_BINS, sizeof(float));
        if (status == STATUS_OK && (!lines->held[i] || !lines->bins[i]))
            status = STATUS_NO_MEMORY;
    }
    if (status == STATUS_OK)
        status = spectrum_create(SLOW_N, WINDOW_HANN, &lines->spectrum);
    lines->power = calloc(SLOW_N / 2 + 1, sizeof(float));
    lines->cross = calloc(4 * SLOW_BINS, sizeof(float));
    lines->unlike = calloc(SLOW_BINS, sizeof(float));
    lines->scratch = calloc(setup->n / lines->factor + 2, sizeof(float));
    lines->summed = calloc(setup->n / 4, sizeof(float));
    if (status == STATUS_OK &&
        (!lines->summed || !lines->power || !lines->cross || !lines->unlike || !lines->scratch))
        status = STATUS_NO_MEMORY;
    return status;
}

enum status lines_create(const struct other_setup *setup, struct lines **out)
{
    struct lines *lines = calloc(1, sizeof *lines);
    if (!lines)
        return STATUS_NO_MEMORY;
    lines->setup = *setup;
    lines->factor = 1;
    while (setup->rate_hz / (2.0 * lines->factor) >= 4000)
        lines->factor *= 2;
    lines->sums = lines->factor >= 8 ? 4 : 1;
    lines->slow_rate_hz = setup->rate_hz / lines->factor;
    enum status status = fill(lines);
    if (status != STATUS_OK) {
        lines_destroy(lines);
        return status;
    }
    lines_reset(lines, 0);
    *out = lines;
    return STATUS_OK;
}

void lines_destroy(struct lines *lines)
{
    if (!lines)
        return;
    for (int i = 0; i < 2; i++) {
        decimator_destroy(lines->decimators[i]);
        free(lines->held[i]);
        free(lines->bins[i]);
    }
    struct means *means[] = {&lines->fast, &lines->slow};
    for (int i = 0; i < 2; i++) {
        free(means[i]->sum);
        free(means[i]->age);
    }
    spectrum_destroy(lines->spectrum);
    free(lines->power);
    free(lines->cross);
    free(lines->unlike);
    free(lines->scratch);
    free(lines->summed);
    free(lines);
}

static void clear(struct lines *lines, struct means *means, uint64_t frame)
{
    memset(means->sum, 0, means->n_bins * sizeof *means->sum);
    means->n = 0;
    means->start_frame = frame;
    if (means == &lines->slow) {
        memset(lines->cross, 0, 4 * SLOW_BINS * sizeof *lines->cross);
        memset(lines->unlike, 0, SLOW_BINS * sizeof *lines->unlike);
    }
}

void lines_reset(struct lines *lines, uint64_t next_frame)
{
    struct means *means[] = {&lines->fast, &lines->slow};
    for (int i = 0; i < 2; i++) {
        clear(lines, means[i], next_frame);
        memset(means[i]->age, 0, means[i]->n_bins);
    }
    for (int i = 0; i < (lines->setup.pair ? 2 : 1); i++)
        decimator_reset(lines->decimators[i]);
    for (uint32_t c = 0; c < lines->setup.n_classes; c++)
        lines->told[c] = -INFINITY;
    lines->filled = lines->newest = 0;
    lines->carried[0] = lines->carried[1] = 0;
    lines->flow_periods = 0;
}

/* ---- telling */

static double beside(const float *sum, uint32_t bin)
{
    double low = 0, high = 0;
    for (uint32_t k = NEAR; k <= FAR; k++) {
        low += sum[bin - k];
        high += sum[bin + k];
    }
    return fmax(low, high) / (FAR - NEAR + 1); /* the louder side: an edge is no line */
}

/* Lines of the period, in rising frequency; ages each. */
static uint32_t find_lines(struct means *means, double low_hz, double high_hz, struct line out[LINES_MOST])
{
    uint32_t n = 0;
    uint32_t first = (uint32_t)fmax(FAR + 1, ceil(low_hz / means->bin_hz));
    uint32_t end = (uint32_t)fmin(means->n_bins - FAR - 1.0, high_hz / means->bin_hz);
    uint8_t before = 0; /* age of the bin below, before this period */
    for (uint32_t i = first; i < end; i++) {
        const float *sum = means->sum;
        uint8_t was = means->age[i], here = was > before ? was : before;
        here = means->age[i + 1] > here ? means->age[i + 1] : here;
        before = was;
        double rest = beside(sum, i);
        means->age[i] = 0;
        if (sum[i] < sum[i - 1] || sum[i] <= sum[i + 1] || !(sum[i] > STAND_OUT * rest) || !(rest > 0))
            continue;
        means->age[i] = here < UINT8_MAX ? here + 1 : UINT8_MAX;
        double a = log(fmaxf(sum[i - 1], 1e-30F)), b = log(sum[i]), c = log(fmaxf(sum[i + 1], 1e-30F));
        double bend = a - 2 * b + c;
        if (n < LINES_MOST)
            out[n++] = (struct line){.hz = (i + (bend < 0 ? 0.5 * (a - c) / bend : 0)) * means->bin_hz,
                                     .bin = i,
                                     .age = means->age[i],
                                     .ratio = sum[i] / rest,
                                     .power = (double)(sum[i - 1] + sum[i] + sum[i + 1]) / means->n};
    }
    return n;
}

static void tell(uint32_t c, const struct found_call *found, const struct found_sink *sink)
{
    struct found_call whole = *found;
    whole.class_index = c;
    sink->take(sink->context, &whole);
}

/* Each class is told each 10 s, a line at a time: the newest 10 s of it, and at first all of it. */
static void tell_lines(struct lines *lines, const struct means *means, const struct line *all, uint32_t n,
                       double end_frame, uint64_t known, const struct found_sink *sink)
{
    bool due[CATALOGUE_MAX_CLASSES], used[CATALOGUE_MAX_CLASSES] = {false};
    double period = LINES_PERIOD_S * lines->setup.rate_hz;
    for (uint32_t c = 0; c < lines->setup.n_classes; c++)
        due[c] = end_frame - lines->told[c] >= TELL_S * lines->setup.rate_hz - period / 2;
    for (uint32_t i = 0, n_told = 0; i < n && n_told < MOST_TOLD; i++) {
        uint32_t c = family_class(&lines->setup, all, n, &all[i], means->bin_hz);
        if (c == lines->setup.n_classes || !due[c])
            continue;
        n_told++;
        double start = fmax(end_frame - all[i].age * period, lines->told[c]);
        used[c] = true;
        const struct found_call found = {.start_frame = fmax(0, start),
                                         .end_frame = end_frame,
                                         .known_frame = known,
                                         .low_hz = all[i].hz - means->bin_hz,
                                         .high_hz = all[i].hz + means->bin_hz,
                                         .snr_db = units_power_db(all[i].ratio),
                                         .mean_square_pa2 = all[i].power};
        tell(c, &found, sink);
    }
    for (uint32_t c = 0; c < lines->setup.n_classes; c++)
        if (used[c])
            lines->told[c] = end_frame;
}

/* ---- fast frames */

static void push_fast(struct lines *lines, const struct other_frame *frame, const float *second,
                      const struct found_sink *sink)
{
    struct means *means = &lines->fast;
    for (uint32_t i = 0; i < means->n_bins; i++)
        means->sum[i] += frame->power[i];
    means->n++;
    if (means->n * lines->setup.frame_s < LINES_PERIOD_S)
        return;
    struct line found[LINES_MOST];
    uint32_t n = find_lines(means, 0.4 * lines->slow_rate_hz, lines->setup.rate_hz / 2, found);
    for (uint32_t i = 0; i < n && second; i++)
        found[i].same = lines_same_on_both(frame, second, found[i].hz, lines->setup.rate_hz);
    if (second)
        family_agree(found, n, means->bin_hz);
    uint64_t end = frame->start_frame + frame->n;
    tell_lines(lines, means, found, n, (double)end, end - 1, sink);
    clear(lines, means, end);
}

/* ---- the decimated copy */

static double density(const struct means *means, double low_hz, double high_hz)
{
    uint32_t first = (uint32_t)(low_hz / means->bin_hz), end = (uint32_t)(high_hz / means->bin_hz) + 1;
    double least = INFINITY; /* lines must not count: the quietest third of the band */
    uint32_t step = (end - first) / 3 > 0 ? (end - first) / 3 : 1;
    for (uint32_t i = first; i + step <= end; i += step) {
        double sum = 0;
        for (uint32_t k = i; k < i + step; k++)
            sum += means->sum[k];
        least = fmin(least, sum / step);
    }
    return least;
}

static double coherence(const struct lines *lines, double low_hz, double high_hz)
{
    double sum = 0;
    uint32_t n = 0;
    for (uint32_t i = (uint32_t)(low_hz / lines->slow.bin_hz); i * lines->slow.bin_hz <= high_hz; i++, n++) {
        const float *c = lines->cross + 4 * i;
        double both = (double)c[2] * c[3];
        sum += both > 0 ? ((double)c[0] * c[0] + (double)c[1] * c[1]) / both : 0;
    }
    return n ? sum / n : 1;
}

static void look_for_flow(struct lines *lines, double end_frame, uint64_t known,
                          const struct found_sink *sink)
{
    const struct means *means = &lines->slow;
    double low = density(means, 15, 25), high = density(means, 80, 125);
    double bias = 1.0 / means->n; /* of the coherence of independent noise */
    bool flows = lines->setup.pair && high > 0 && log(low / high) > FLOW_POWER * log(100.0 / 20) &&
                 coherence(lines, 15, 60) - bias < FLOW_COHERENCE;
    lines->flow_periods = flows ? lines->flow_periods + 1 : 0;
    for (uint32_t c = 0; c < lines->setup.n_classes; c++) {
        const struct call_class *class = &lines->setup.classes[c];
        if (class->sound.manner != MANNER_FLOW || !flows ||
            lines->flow_periods * LINES_PERIOD_S < class->sound.min_s ||
            end_frame - lines->told[c] < (TELL_S - LINES_PERIOD_S / 2) * lines->setup.rate_hz)
            continue;
        double start =
            fmax(end_frame - lines->flow_periods * LINES_PERIOD_S * lines->setup.rate_hz, lines->told[c]);
        const struct found_call found = {.start_frame = fmax(0, start),
                                         .end_frame = end_frame,
                                         .known_frame = known,
                                         .low_hz = class->low_hz,
                                         .high_hz = class->high_hz,
                                         .snr_db = units_power_db(low / high),
                                         .mean_square_pa2 = low / means->n / means->bin_hz *
                                                            (class->high_hz - class->low_hz)};
        tell(c, &found, sink);
        lines->told[c] = end_frame;
    }
}

static void end_slow(struct lines *lines, uint64_t end, const struct found_sink *sink)
{
    struct means *means = &lines->slow;
    struct line found[LINES_MOST];
    uint32_t n = find_lines(means, 5, 0.4 * lines->slow_rate_hz, found);
    for (uint32_t i = 0; i < n && lines->setup.pair; i++) {
        const float *c = lines->cross + 4 * found[i].bin;
        found[i].same = found[i].bin < SLOW_BINS && lines->unlike[found[i].bin] < SAME * (c[2] + c[3]);
    }
    if (lines->setup.pair)
        family_agree(found, n, means->bin_hz);
    double late = decimator_get_delay(lines->decimators[0]) * lines->sums;
    tell_lines(lines, means, found, n, (double)end - late, end - 1, sink);
    look_for_flow(lines, (double)end - late, end - 1, sink);
    clear(lines, means, end);
}

/* Spectra of the held samples of both channels. */
static void add_slow(struct lines *lines)
{
    uint32_t channels = lines->setup.pair ? 2 : 1;
    for (uint32_t i = channels; i-- > 0;) {
        spectrum_power(lines->spectrum, lines->held[i], lines->power);
        spectrum_get_low_bins(lines->spectrum, SLOW_BINS, lines->bins[i]);
    }
    for (uint32_t i = 0; i < lines->slow.n_bins; i++)
        lines->slow.sum[i] += lines->power[i];
    lines->slow.n++;
    for (uint32_t i = 0; i < SLOW_BINS && channels == 2; i++) {
        const float *a = lines->bins[0] + 2 * i, *b = lines->bins[1] + 2 * i;
        float *c = lines->cross + 4 * i;
        c[0] += a[0] * b[0] + a[1] * b[1];
        c[1] += a[1] * b[0] - a[0] * b[1];
        c[2] += a[0] * a[0] + a[1] * a[1];
        c[3] += b[0] * b[0] + b[1] * b[1];
        lines->unlike[i] += (a[0] - b[0]) * (a[0] - b[0]) + (a[1] - b[1]) * (a[1] - b[1]);
    }
}

/* Four samples become one, weighted as two running sums of four: the nulls lie where it would fold onto 0 Hz,
 * so that what comes down to below 2 kHz is at least 55 dB weaker at 192 kHz and above. */
static void sum_fours(const float *samples, uint32_t n, float *carried, float *out)
{
    float before = *carried;
    for (uint32_t i = 0; i + 4 <= n; i += 4) {
        const float *x = samples + i;
        out[i / 4] = (before + 3 * x[0] + 2 * x[1] + x[2]) * (1.0F / 16);
        before = x[0] + 2 * x[1] + 3 * x[2] + 4 * x[3];
    }
    *carried = before;
}

void lines_push(struct lines *lines, const struct other_frame *frame, const float *second,
                const struct found_sink *sink)
{
    const float *channels[] = {frame->samples, second};
    size_t n = 0;
    push_fast(lines, frame, second, sink);
    uint32_t filled = lines->filled;
    for (uint32_t c = 0; c < (lines->setup.pair ? 2 : 1); c++) {
        const float *samples = channels[c];
        if (lines->sums > 1) {
            sum_fours(samples, frame->n, &lines->carried[c], lines->summed);
            samples = lines->summed;
        }
        n = decimator_push(lines->decimators[c], samples, frame->n / lines->sums, lines->scratch);
        for (size_t i = 0; i < n && filled + i < SLOW_N; i++)
            lines->held[c][filled + i] = lines->scratch[i];
    }
    lines->newest = filled + n > SLOW_N ? SLOW_N - filled : (uint32_t)n;
    lines->filled += (uint32_t)n;
    if (lines->filled < SLOW_N)
        return;
    add_slow(lines);
    for (uint32_t c = 0; c < (lines->setup.pair ? 2 : 1); c++)
        memmove(lines->held[c], lines->held[c] + SLOW_N / 2, SLOW_N / 2 * sizeof(float));
    lines->filled = SLOW_N / 2; /* what the last frame had beyond is lost: a few samples of a background */
    uint64_t end = frame->start_frame + frame->n;
    if ((double)(end - lines->slow.start_frame) >= LINES_PERIOD_S * lines->setup.rate_hz)
        end_slow(lines, end, sink);
}

void lines_describe_slow(const struct lines *lines, double *rate_hz, double *late_frames)
{
    *rate_hz = lines->slow_rate_hz;
    *late_frames = decimator_get_delay(lines->decimators[0]) * lines->sums;
}

uint32_t lines_get_slow(const struct lines *lines, const float **out)
{
    *out = lines->held[0] + lines->filled - lines->newest;
    return lines->newest;
}
