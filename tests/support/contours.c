/* Test tones of known contour; see contours.h. */
#include "support/contours.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define LONGEST_S 20.0
#define TRACED 1.4

static double tukey(double x, double share)
{
    double edge = fmin(x, 1 - x) / (share / 2);
    return edge >= 1 ? 1 : 0.5 - 0.5 * cos(M_PI * edge);
}

static void fill_samples(struct contour_signal *signal, double share, double phase)
{
    for (uint32_t i = 0; i < signal->n; i++) {
        phase += 2 * M_PI * signal->hz[i] / signal->rate_hz;
        signal->samples[i] = (float)(tukey((i + 0.5) / signal->n, share) * sin(phase));
    }
}

bool contour_signal_create(struct contour_signal *signal, double rate_hz, double seconds)
{
    uint32_t room = (uint32_t)(seconds * rate_hz) + 1;
    *signal = (struct contour_signal){.rate_hz = rate_hz,
                                      .room = room,
                                      .samples = calloc(room, sizeof(float)),
                                      .hz = calloc(room, sizeof(double))};
    return signal->samples && signal->hz;
}

void contour_signal_destroy(struct contour_signal *signal)
{
    free(signal->samples);
    free(signal->hz);
}

static void draw_upcall(struct contour_signal *signal, struct random *random)
{
    signal->n = (uint32_t)(0.9 * signal->rate_hz);
    for (uint32_t i = 0; i < signal->n; i++) {
        double x = (i + 0.5) / signal->n;
        signal->hz[i] = 95 + 25 * x + 75 * x * x * x;
    }
    fill_samples(signal, 0.3, random_between(random, 0, 2 * M_PI));
}

/* Catmull-Rom cubic through the knots; false where it is too steep or leaves the band. */
static bool follow_knots(struct contour_signal *signal, const double *knots, uint32_t n_knots)
{
    bool good = true;
    for (uint32_t i = 0; i < signal->n; i++) {
        double x = (i + 0.5) / signal->n * (n_knots - 1), t;
        uint32_t k = (uint32_t)x;
        t = x - k;
        double b = knots[k], c = knots[k + 1], a = k > 0 ? knots[k - 1] : 2 * b - c;
        double d = k + 2 < n_knots ? knots[k + 2] : 2 * c - b;
        signal->hz[i] = b + 0.5 * t * (c - a + t * (2 * a - 5 * b + 4 * c - d + t * (3 * (b - c) + d - a)));
        good = good && signal->hz[i] > 4000 && signal->hz[i] < 18000 &&
               (i == 0 || fabs(signal->hz[i] - signal->hz[i - 1]) * signal->rate_hz < 20000);
    }
    return good;
}

static void draw_whistle(struct contour_signal *signal, struct random *random)
{
    double knots[8];
    uint32_t n_knots;
    signal->n = (uint32_t)(random_between(random, 0.3, 1.0) * signal->rate_hz);
    do {
        n_knots = 3 + (uint32_t)random_between(random, 0, 4);
        for (uint32_t k = 0; k < n_knots; k++)
            knots[k] = random_between(random, 5000, 17000);
    } while (!follow_knots(signal, knots, n_knots));
    fill_samples(signal, 0.1, random_between(random, 0, 2 * M_PI));
}

/* Shortest and longest that is drawn of a class that has no formula of its own. */
static void lengths(const struct tone_shape *tone, double *out_low_s, double *out_high_s)
{
    *out_low_s = fmin(1.25 * tone->min_s, LONGEST_S);
    *out_high_s = fmax(*out_low_s, fmin(LONGEST_S, fmin(0.8 * tone->max_s, 4 * tone->min_s)));
}

/* A sweep within the class's limits. Of a weak call the faint ends are not traced, and what is measured of
 * the rest is from one end's mean to the other's: about 0.7 of it. So a class that asks for a sweep is drawn
 * with TRACED times the least, or none of its calls could ever pass. */
static double draw_sweep(const struct call_class *call_class, double seconds, struct random *random)
{
    const struct tone_shape *tone = &call_class->tone;
    const double width_hz = call_class->high_hz - call_class->low_hz;
    double most_hz = fmin(0.4 * width_hz, 0.5 * tone->max_rate_hz_s * seconds), sweep_hz;
    double least = fmax(tone->min_sweep_hz, -fmin(most_hz, tone->max_extent_hz));
    double greatest = fmin(tone->max_sweep_hz, fmin(most_hz, tone->max_extent_hz));
    if (tone->min_sweep_hz > 0 || tone->max_sweep_hz < 0) {
        const bool rises = tone->min_sweep_hz > 0;
        const double nearest = rises ? tone->min_sweep_hz : -tone->max_sweep_hz;
        const double furthest = rises ? tone->max_sweep_hz : -tone->min_sweep_hz;
        const double low = TRACED * fmax(nearest, tone->min_extent_hz);
        const double high = fmin(fmin(furthest, 0.9 * width_hz), 0.8 * tone->max_rate_hz_s * seconds);
        sweep_hz = low + fmax(0, fmin(high, tone->max_extent_hz) - low) * random_between(random, 0, 1);
        return rises ? sweep_hz : -sweep_hz;
    }
    do
        sweep_hz = least + (greatest - least) * random_between(random, 0.1, 0.9);
    while (fabs(sweep_hz) < 1.2 * tone->min_extent_hz && greatest - least > 2.4 * tone->min_extent_hz);
    return sweep_hz;
}

static void draw_any(struct contour_signal *signal, const struct call_class *call_class,
                     struct random *random)
{
    const struct tone_shape *tone = &call_class->tone;
    double low_s, high_s, width_hz = call_class->high_hz - call_class->low_hz;
    lengths(tone, &low_s, &high_s);
    double seconds = random_between(random, low_s, high_s);
    double sweep_hz = draw_sweep(call_class, seconds, random), low_hz;
    low_hz = call_class->low_hz + random_between(random, 0.05, 0.95) * (width_hz - fabs(sweep_hz));
    signal->n = (uint32_t)(seconds * signal->rate_hz);
    for (uint32_t i = 0; i < signal->n; i++)
        signal->hz[i] = low_hz + (sweep_hz < 0 ? -sweep_hz : 0) + sweep_hz * (i + 0.5) / signal->n;
    fill_samples(signal, 0.2, random_between(random, 0, 2 * M_PI));
}

void contour_signal_draw(struct contour_signal *signal, const struct call_class *call_class,
                         struct random *random)
{
    if (strcmp(call_class->name, "right whale upcall") == 0)
        draw_upcall(signal, random);
    else if (strcmp(call_class->name, "delphinid whistle") == 0)
        draw_whistle(signal, random);
    else
        draw_any(signal, call_class, random);
}

double contour_signal_longest_s(const struct call_class *call_class)
{
    double low_s, high_s;
    lengths(&call_class->tone, &low_s, &high_s);
    return fmax(1.0, high_s);
}

bool contour_cells_create(struct contour_cells *cells, double window_s, double rate_hz)
{
    cells->n = 2 * (uint32_t)lround(window_s * rate_hz / 2);
    cells->power = calloc(cells->n / 2 + 1, sizeof(float));
    return cells->power && spectrum_create(cells->n, WINDOW_HANN, &cells->spectrum) == STATUS_OK;
}

void contour_cells_destroy(struct contour_cells *cells)
{
    spectrum_destroy(cells->spectrum);
    free(cells->power);
}

void contour_cells_find(struct contour_cells *cells, const struct contour_signal *signal)
{
    cells->n_frames = 0;
    for (uint32_t at = 0; at + cells->n <= signal->n && cells->n_frames < CONTOURS_MAX_FRAMES;
         at += cells->n / 2)
        cells->bin[cells->n_frames++] =
            (uint32_t)lround(signal->hz[at + cells->n / 2] / signal->rate_hz * cells->n);
}

double contour_cells_sum(struct contour_cells *cells, const float *samples)
{
    double sum = 0;
    for (uint32_t i = 0; i < cells->n_frames; i++) {
        spectrum_power(cells->spectrum, samples + i * (cells->n / 2), cells->power);
        sum += cells->power[cells->bin[i]] * (cells->n / 2.0);
    }
    return sum;
}
