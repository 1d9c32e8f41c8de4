/* Calls at a stated signal-to-noise ratio; see voices.h. */
#include "bench/calls/voices.h"
#include "base/units.h"
#include "dsp/filter.h"
#include "scene/recipe.h"
#include "support/contours.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define MAX_SPECTRA 300
#define OVERSAMPLING 8
#define LEVEL_SPREAD_DB 1.5 /* of a train's pulses: all are heard about as well */

static int compare(const void *a, const void *b)
{
    float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

float *stretch_medians(const struct stretch *stretch, uint32_t n_fft)
{
    uint32_t n_bins = n_fft / 2 + 1, n = (uint32_t)fmin(MAX_SPECTRA, stretch->n / n_fft);
    struct spectrum *spectrum = NULL;
    float *out = calloc(n_bins, sizeof *out), *power = calloc(n_bins, sizeof *power);
    float *all = calloc((size_t)n_bins * n, sizeof *all);
    if (out && power && all && spectrum_create(n_fft, WINDOW_HANN, &spectrum) == STATUS_OK) {
        for (uint32_t i = 0; i < n; i++) {
            spectrum_power(spectrum, stretch->samples + (size_t)i * ((stretch->n - n_fft) / n), power);
            for (uint32_t k = 0; k < n_bins; k++)
                all[(size_t)k * n + i] = power[k];
        }
        for (uint32_t k = 0; k < n_bins; k++) {
            qsort(all + (size_t)k * n, n, sizeof *all, compare);
            out[k] = all[(size_t)k * n + n / 2];
        }
    }
    spectrum_destroy(spectrum);
    free(power);
    free(all);
    return out;
}

double stretch_deviation(const struct stretch *stretch, double low_hz, double high_hz)
{
    enum { PIECES = 16 };
    uint32_t piece =
        (uint32_t)fmin(stretch->n / PIECES, 0.25 * stretch->rate_hz + 20 * stretch->rate_hz / low_hz);
    uint32_t n = 0, skip = piece / 4; /* while the filter settles */
    float *power = calloc((size_t)PIECES * piece, sizeof *power);
    struct filter filter;
    double deviation = NAN;
    if (power && filter_band_pass(3, low_hz, high_hz, stretch->rate_hz, &filter) == STATUS_OK) {
        for (uint32_t p = 0; p < PIECES; p++) {
            const float *from = stretch->samples + (size_t)p * (stretch->n / PIECES);
            filter_reset(&filter);
            for (uint32_t i = 0; i < piece; i++) {
                double y = filter_step(&filter, from[i]);
                if (i >= skip)
                    power[n++] = (float)(y * y);
            }
        }
        qsort(power, n, sizeof *power, compare);
        deviation = sqrt(power[n / 2] / 0.45494); /* median of chi-square with one degree of freedom */
    }
    free(power);
    return deviation;
}

/* A song of single calls, as many as the voice says, at the intervals of their kind: a train. */
static void make_series(const struct voice *voice, const struct kind_order *order, struct random *random,
                        struct emission *out)
{
    if (out->n_pulses > 0 || voice->pulses == 0)
        return;
    const struct scene_kind *kind = scene_kind_find(voice->kind);
    out->n_pulses = voice->pulses;
    out->pulse_s[0] = 0;
    for (uint32_t i = 1; i < out->n_pulses; i++)
        out->pulse_s[i] = out->pulse_s[i - 1] + kind->spacing_s(order, out->sound.length_s, random);
}

void voice_draw(const struct voice *voice, double rate_hz, struct random *random, struct emission *out)
{
    struct scene_emitter animal = scene_emitter_of(voice->kind);
    animal.pulses = voice->pulses;
    struct kind_order order = {.emitter = &animal,
                               .rate_hz = rate_hz,
                               .repertoire = 1 + random_bits(random) % 5,
                               .number = 1 + random_bits(random) % 1000,
                               .unit = (uint32_t)(random_bits(random) % 8)};
    memset(out, 0, sizeof *out);
    kind_make(&order, random, out);
    make_series(voice, &order, random, out);
    for (uint32_t i = 0; i < out->n_pulses; i++)
        out->pulse_gain[i] = (float)units_amplitude_ratio(LEVEL_SPREAD_DB * random_normal(random));
}

static uint32_t strongest_part(const struct sound *sound)
{
    uint32_t best = 0;
    for (uint32_t k = 1; k < sound->n_parts; k++)
        if (fabs(sound->parts[k].amplitude) > fabs(sound->parts[best].amplitude))
            best = k;
    return best;
}

static void add_sound(const struct sound *sound, double scale, double at_s, double rate_hz, float *out,
                      uint32_t n)
{
    static const double ones[SOUND_MAX_PARTS] = {1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1, 1};
    double first = fmax(0, ceil(at_s * rate_hz));
    double last = fmin(n, floor((at_s + sound->length_s) * rate_hz) + 1);
    if (last > first)
        sound_add(sound, 0, ones, scale, scale, first / rate_hz - at_s, 1 / rate_hz, (uint32_t)(last - first),
                  out + (size_t)first);
}

/* Mean over the contour of cell power over the median, for amplitude 1. */
static double tone_ratio(const struct sound *sound, double window_s, double rate_hz, const float *medians)
{
    struct contour_signal signal;
    struct contour_cells cells = {0};
    uint32_t part = strongest_part(sound);
    double sum = 0;
    bool good = contour_signal_create(&signal, rate_hz, sound->length_s);
    good = contour_cells_create(&cells, window_s, rate_hz) && good;
    if (good) {
        signal.n = (uint32_t)(sound->length_s * rate_hz);
        add_sound(sound, 1, 0, rate_hz, signal.samples, signal.n);
        for (uint32_t i = 0; i < signal.n; i++)
            signal.hz[i] = (part + 1) * contour_hz(&sound->contour, i / rate_hz);
        contour_cells_find(&cells, &signal);
        for (uint32_t i = 0; i < cells.n_frames; i++) {
            spectrum_power(cells.spectrum, signal.samples + i * (cells.n / 2), cells.power);
            sum += cells.power[cells.bin[i]] / medians[cells.bin[i]] / (float)cells.n_frames;
        }
    }
    contour_signal_destroy(&signal);
    contour_cells_destroy(&cells);
    return sum;
}

/* The envelope's peak in the band, for amplitude 1, finely sampled. */
static double pulse_peak(const struct sound *sound, double low_hz, double high_hz, double rate_hz)
{
    double fine_hz = OVERSAMPLING * rate_hz, peak = 0;
    uint32_t n = (uint32_t)((sound->length_s + 4 / (high_hz - low_hz)) * fine_hz) + 1;
    float *fine = calloc(n, sizeof *fine);
    struct filter filter;
    if (fine && filter_band_pass(3, low_hz, high_hz, fine_hz, &filter) == STATUS_OK) {
        add_sound(sound, 1, 0, fine_hz, fine, n);
        for (uint32_t i = 0; i < n; i++)
            peak = fmax(peak, fabs(filter_step(&filter, fine[i])));
    }
    free(fine);
    return peak;
}

double voice_gain(const struct voice *voice, const struct emission *emission, const struct stretch *stretch,
                  const float *medians, double deviation)
{
    const struct sound *sound = &emission->sound;
    double now = emission->n_pulses > 0
                     ? pow(pulse_peak(sound, voice->low_hz, voice->high_hz, stretch->rate_hz) / deviation, 2)
                     : tone_ratio(sound, voice->window_s, stretch->rate_hz, medians);
    return now > 0 ? sqrt(units_power_ratio(voice->snr_db) / now) : 0;
}

void voice_add(const struct emission *emission, double gain, double at_s, struct stretch *stretch,
               struct truth_call *out)
{
    const struct sound *sound = &emission->sound;
    out->start_s = stretch->start_s + at_s;
    out->end_s = out->start_s + emission_length_s(emission);
    out->n_pulses = emission->n_pulses;
    out->pulse_length_s = sound->length_s;
    for (uint32_t i = 0; i < emission->n_pulses; i++) {
        out->pulse_s[i] = out->start_s + emission->pulse_s[i];
        add_sound(sound, gain * (double)emission->pulse_gain[i], at_s + emission->pulse_s[i],
                  stretch->rate_hz, stretch->samples, stretch->n);
    }
    if (emission->n_pulses == 0)
        add_sound(sound, gain, at_s, stretch->rate_hz, stretch->samples, stretch->n);
}
