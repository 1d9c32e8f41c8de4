/* Beats, humps, snaps; see swells.h. */
#include "call/swells.h"
#include "base/units.h"
#include "dsp/lanes.h"
#include "dsp/spectrum.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define FRAMES 2048 /* 8 to 16 s */
#define SHARP 12.0F /* times the median */
#define MOST_SHARP 0.01
#define MOST_SKEW 1.8   /* how much farther up than down, of logarithms */
#define BESIDE_FAR 16   /* bins of the envelope's spectrum beside a line */
#define BEAT_RATIO 25.0 /* over the mean of the envelope's spectrum: 14 dB; noise reaches it once in 1e8 */
#define STEADY 0.25     /* standard deviation of a hump's power from one eighth to the next */
#define SNAP 45.0F
#define RANDOM_SPREAD 0.5 /* least standard deviation of intervals over their mean */
#define MAX_BANDS 8

/* What is kept of one class. */
struct watched {
    uint32_t class_index, first, end; /* bins */
    uint32_t first_below, end_below;  /* the octave below, of a hump */
    float *power, *power_below;       /* [FRAMES] */
};

struct swells {
    struct other_setup setup;
    struct spectrum *spectrum;
    float *sorted, *lines; /* [FRAMES] */
    uint32_t n_watched;
    struct watched watched[MAX_BANDS];
    uint32_t n; /* frames held */
    uint64_t start_frame;
    uint32_t n_snaps;
    uint32_t snaps[FRAMES]; /* numbers of the frames */
};

static bool has_manner(const struct call_class *class)
{
    enum manner manner = class->sound.manner;
    return manner == MANNER_BEATS || manner == MANNER_HUMP || manner == MANNER_SNAPS;
}

static enum status add(struct swells *swells, uint32_t c)
{
    const struct call_class *class = &swells->setup.classes[c];
    double bin_hz = swells->setup.bin_hz, last = swells->setup.n / 2.0 * 0.94;
    struct watched *watched = &swells->watched[swells->n_watched];
    *watched = (struct watched){.class_index = c,
                                .first = (uint32_t)ceil(class->low_hz / bin_hz),
                                .end = (uint32_t)fmin(last, class->high_hz / bin_hz),
                                .first_below = (uint32_t)ceil(class->low_hz / 2 / bin_hz),
                                .end_below = (uint32_t)(class->low_hz / bin_hz)};
    if (watched->end <= watched->first || watched->end_below <= watched->first_below)
        return STATUS_OK;
    swells->n_watched++;
    watched->power = calloc(FRAMES, sizeof(float));
    watched->power_below = calloc(FRAMES, sizeof(float));
    return watched->power && watched->power_below ? STATUS_OK : STATUS_NO_MEMORY;
}

enum status swells_create(const struct other_setup *setup, struct swells **out)
{
    struct swells *swells = calloc(1, sizeof *swells);
    if (!swells)
        return STATUS_NO_MEMORY;
    swells->setup = *setup;
    enum status status = spectrum_create(FRAMES, WINDOW_HANN, &swells->spectrum);
    swells->sorted = calloc(FRAMES, sizeof(float));
    swells->lines = calloc(FRAMES, sizeof(float));
    if (status == STATUS_OK && (!swells->sorted || !swells->lines))
        status = STATUS_NO_MEMORY;
    for (uint32_t c = 0; c < setup->n_classes && status == STATUS_OK && swells->n_watched < MAX_BANDS; c++)
        if (has_manner(&setup->classes[c]))
            status = add(swells, c);
    if (status != STATUS_OK) {
        swells_destroy(swells);
        return status;
    }
    *out = swells;
    return STATUS_OK;
}

void swells_destroy(struct swells *swells)
{
    if (!swells)
        return;
    for (uint32_t i = 0; i < swells->n_watched; i++) {
        free(swells->watched[i].power);
        free(swells->watched[i].power_below);
    }
    spectrum_destroy(swells->spectrum);
    free(swells->sorted);
    free(swells->lines);
    free(swells);
}

void swells_reset(struct swells *swells)
{
    swells->n = swells->n_snaps = 0;
}

static int compare(const void *a, const void *b)
{
    float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

static double mean_of(const float *values, uint32_t n)
{
    double sum = 0;
    for (uint32_t i = 0; i < n; i++)
        sum += values[i];
    return sum / n;
}

/* The line's place between bins: a parabola through three logarithms. */
static double place_of(const float *power, uint32_t i)
{
    double a = log(fmax(power[i - 1], 1e-30)), b = log(fmax(power[i], 1e-30)),
           c = log(fmax(power[i + 1], 1e-30));
    double bend = a - 2 * b + c;
    return i + (bend < 0 ? fmax(-0.5, fmin(0.5, 0.5 * (a - c) / bend)) : 0);
}

/* Whether the band's power swells at a rate of the class, how far the line stands out, and the interval of
 * the slowest swell that does: that of the shaft, where it is heard. */
static bool is_beating(struct swells *swells, const struct watched *watched, double *out_ratio,
                       double *out_interval_s)
{
    const struct other_shape *sound = &swells->setup.classes[watched->class_index].sound;
    memcpy(swells->sorted, watched->power, FRAMES * sizeof(float));
    qsort(swells->sorted, FRAMES, sizeof(float), compare);
    float median = swells->sorted[FRAMES / 2];
    if (!(median > 0) || swells->sorted[(uint32_t)(FRAMES * (1 - MOST_SHARP))] > SHARP * median)
        return false;
    double up = log(swells->sorted[(uint32_t)(FRAMES * (1 - MOST_SHARP))] / median);
    double down = log(median / fmaxf(swells->sorted[(uint32_t)(FRAMES * MOST_SHARP)], 1e-30F));
    if (up > MOST_SKEW * down) /* pulses or bursts over a steady noise */
        return false;
    for (uint32_t i = 0; i < FRAMES; i++)
        swells->lines[i] = logf(fmaxf(watched->power[i] / median, 1 / SHARP));
    double mean = mean_of(swells->lines, FRAMES);
    for (uint32_t i = 0; i < FRAMES; i++)
        swells->lines[i] -= (float)mean;
    spectrum_power(swells->spectrum, swells->lines, swells->sorted);
    double bin_hz = 1 / (FRAMES * swells->setup.frame_s);
    uint32_t first = (uint32_t)fmax(6, sound->low_rate_hz / bin_hz);
    uint32_t end = (uint32_t)fmin(FRAMES / 2.0 - BESIDE_FAR - 1, sound->high_rate_hz / bin_hz);
    double most = 0;
    uint32_t slowest = 0;
    for (uint32_t i = first; i < end; i++) {
        const float *power = swells->sorted;
        uint32_t low = i > BESIDE_FAR ? i - BESIDE_FAR : 1;
        double beside = (mean_of(power + low, i - 2 - low) + mean_of(power + i + 3, BESIDE_FAR - 2)) / 2;
        double ratio = beside > 0 ? power[i] / beside : 0;
        if (ratio > BEAT_RATIO && most <= BEAT_RATIO)
            slowest = i;
        else if (slowest + 1 == i && power[i] > power[slowest])
            slowest = i;
        most = fmax(most, ratio);
    }
    if (slowest > 0)
        *out_interval_s = 1 / (place_of(swells->sorted, slowest) * bin_hz);
    *out_ratio = most;
    return *out_ratio > BEAT_RATIO;
}

static bool is_hump(const struct swells *swells, const struct watched *watched, double *out_ratio)
{
    const struct call_class *class = &swells->setup.classes[watched->class_index];
    double above = mean_of(watched->power, FRAMES) / (watched->end - watched->first);
    double below = mean_of(watched->power_below, FRAMES) / (watched->end_below - watched->first_below);
    double sum = 0, squares = 0;
    for (uint32_t i = 0; i < 8; i++) {
        double part = mean_of(watched->power + i * FRAMES / 8, FRAMES / 8);
        sum += part;
        squares += part * part;
    }
    double spread = sqrt(fmax(0, squares / 8 - sum * sum / 64)) / (sum / 8);
    *out_ratio = below > 0 ? above / below : 0;
    return sum > 0 && spread<STEADY && * out_ratio> units_power_ratio(class->sound.min_snr_db);
}

static bool is_snapping(const struct swells *swells, const struct watched *watched)
{
    const struct other_shape *sound = &swells->setup.classes[watched->class_index].sound;
    double rate = swells->n_snaps / (FRAMES * swells->setup.frame_s), sum = 0, squares = 0;
    if (swells->n_snaps < 8 || rate < sound->low_rate_hz || rate > sound->high_rate_hz)
        return false;
    for (uint32_t i = 1; i < swells->n_snaps; i++) {
        double interval = swells->snaps[i] - swells->snaps[i - 1];
        sum += interval;
        squares += interval * interval;
    }
    double n = swells->n_snaps - 1, mean = sum / n;
    return sqrt(fmax(0, squares / n - mean * mean)) > RANDOM_SPREAD * mean;
}

static void look(struct swells *swells, uint64_t end_frame, const struct found_sink *sink)
{
    for (uint32_t i = 0; i < swells->n_watched; i++) {
        const struct watched *watched = &swells->watched[i];
        const struct call_class *class = &swells->setup.classes[watched->class_index];
        double ratio = 1, interval_s = 0;
        bool is = class->sound.manner == MANNER_BEATS  ? is_beating(swells, watched, &ratio, &interval_s)
                  : class->sound.manner == MANNER_HUMP ? is_hump(swells, watched, &ratio)
                                                       : is_snapping(swells, watched);
        if (!is)
            continue;
        const struct found_call found = {.class_index = watched->class_index,
                                         .start_frame = (double)swells->start_frame,
                                         .end_frame = (double)end_frame,
                                         .known_frame = end_frame - 1,
                                         .low_hz = class->low_hz,
                                         .high_hz = fmin(class->high_hz, swells->setup.rate_hz / 2),
                                         .n_pulses =
                                             class->sound.manner == MANNER_SNAPS ? swells->n_snaps : 0,
                                         .interval_frames = interval_s * swells->setup.rate_hz,
                                         .snr_db = units_power_db(ratio),
                                         .mean_square_pa2 = mean_of(watched->power, FRAMES)};
        sink->take(sink->context, &found);
    }
}

static float sum_of(const float *power, uint32_t first, uint32_t end)
{
    double sum = 0;
    for (uint32_t i = first; i < end; i++)
        sum += power[i];
    return (float)sum;
}

/* A hump is broad, a line stands in one part of it: the loudest quarter counts at most twice as
 * much as one of the others. */
static float sum_of_hump(const float *power, uint32_t first, uint32_t end)
{
    float all = 0, loudest = 0;
    for (uint32_t k = 0; k < 4; k++) {
        float part = sum_of(power, first + (end - first) * k / 4, first + (end - first) * (k + 1) / 4);
        all += part;
        loudest = part > loudest ? part : loudest;
    }
    float others = all - loudest;
    return others + fminf(loudest, others * (2.0F / 3));
}

static bool is_snap(const struct other_frame *frame)
{
    float most = 0, sum = 0;
    for (uint32_t i = 1; i < frame->n; i++) {
        float step = frame->samples[i] - frame->samples[i - 1];
        step *= step;
        most = step > most ? step : most;
        sum += step;
    }
    return most * (float)(frame->n - 1) > SNAP * sum;
}

void swells_push(struct swells *swells, const struct other_frame *frame, const struct found_sink *sink)
{
    if (swells->n_watched == 0)
        return;
    if (swells->n == 0) {
        swells->start_frame = frame->start_frame;
        swells->n_snaps = 0;
    }
    for (uint32_t i = 0; i < swells->n_watched; i++) {
        struct watched *watched = &swells->watched[i];
        bool hump = swells->setup.classes[watched->class_index].sound.manner == MANNER_HUMP;
        watched->power[swells->n] = hump ? sum_of_hump(frame->power, watched->first, watched->end)
                                         : sum_of(frame->power, watched->first, watched->end);
        watched->power_below[swells->n] = sum_of(frame->power, watched->first_below, watched->end_below);
    }
    if (is_snap(frame))
        swells->snaps[swells->n_snaps++] = swells->n;
    if (++swells->n < FRAMES)
        return;
    look(swells, frame->start_frame + frame->n, sink);
    swells->n = 0;
}
