/* Contours; see contour.h. */
#include "scene/contour.h"
#include <math.h>

#define TWO_PI 6.283185307179586476925

void contour_cubic(struct contour *contour, const double coefficients[4], double length_s)
{
    *contour = (struct contour){.n_segments = 1, .length_s = length_s};
    for (int i = 0; i < 4; i++)
        contour->cubic[0][i] = coefficients[i];
}

void contour_through(struct contour *contour, const double *knots_hz, uint32_t n, double length_s)
{
    *contour = (struct contour){.n_segments = n, .length_s = length_s};
    double cycles = 0, h = length_s / n;
    for (uint32_t i = 0; i < n; i++) {
        double a = knots_hz[i], b = knots_hz[i + 1];
        double at_a = i > 0 ? (b - knots_hz[i - 1]) / 2 : b - a;
        double at_b = i + 2 <= n ? (knots_hz[i + 2] - a) / 2 : b - a;
        double *c = contour->cubic[i];
        c[0] = a;
        c[1] = at_a;
        c[2] = 3 * (b - a) - 2 * at_a - at_b;
        c[3] = 2 * (a - b) + at_a + at_b;
        contour->cycles[i] = cycles;
        cycles += h * (c[0] + c[1] / 2 + c[2] / 3 + c[3] / 4);
    }
}

void contour_steps(struct contour *contour, const double *steps_hz, uint32_t n, double length_s)
{
    *contour = (struct contour){.n_segments = n, .length_s = length_s};
    for (uint32_t i = 0; i < n; i++) {
        contour->cubic[i][0] = steps_hz[i];
        if (i > 0)
            contour->cycles[i] = contour->cycles[i - 1] + length_s / n * steps_hz[i - 1];
    }
}

void contour_spiral(struct contour *contour, double from_hz, double to_hz, double length_s, double wobble,
                    double wobble_hz)
{
    *contour = (struct contour){.length_s = length_s,
                                .from_hz = from_hz,
                                .fall_per_s = log(from_hz / to_hz) / length_s,
                                .wobble = wobble,
                                .wobble_hz = wobble_hz};
}

static double spiral_hz(const struct contour *contour, double time_s)
{
    return contour->from_hz * exp(-contour->fall_per_s * time_s) *
           (1 + contour->wobble * sin(TWO_PI * contour->wobble_hz * time_s));
}

/* The integrals of exp(-b t) and exp(-b t) sin(w t). */
static double spiral_cycles(const struct contour *contour, double time_s)
{
    double b = contour->fall_per_s, w = TWO_PI * contour->wobble_hz, fall = exp(-b * time_s);
    double cycles = fabs(b) > 1e-9 ? (1 - fall) / b : time_s;
    if (contour->wobble != 0)
        cycles +=
            contour->wobble * (w - fall * (b * sin(w * time_s) + w * cos(w * time_s))) / (b * b + w * w);
    return contour->from_hz * cycles;
}

static uint32_t segment_at(const struct contour *contour, double time_s, double *x)
{
    double at = time_s / contour->length_s * contour->n_segments;
    uint32_t i = at <= 0 ? 0 : (uint32_t)at;
    if (i >= contour->n_segments)
        i = contour->n_segments - 1;
    *x = at - i;
    return i;
}

double contour_hz(const struct contour *contour, double time_s)
{
    if (contour->n_segments == 0)
        return spiral_hz(contour, time_s);
    double x;
    const double *c = contour->cubic[segment_at(contour, time_s, &x)];
    return c[0] + x * (c[1] + x * (c[2] + x * c[3]));
}

double contour_cycles(const struct contour *contour, double time_s)
{
    if (contour->n_segments == 0)
        return spiral_cycles(contour, time_s);
    double x;
    uint32_t i = segment_at(contour, time_s, &x);
    const double *c = contour->cubic[i];
    double integral = x * (c[0] + x * (c[1] / 2 + x * (c[2] / 3 + x * c[3] / 4)));
    return contour->cycles[i] + contour->length_s / contour->n_segments * integral;
}

void contour_extent(const struct contour *contour, double *low_hz, double *high_hz, double *mean_hz)
{
    *low_hz = *high_hz = contour_hz(contour, 0);
    int n = contour->n_segments == 0 ? 1024 : 64;
    for (int i = 1; i <= n; i++) {
        double hz = contour_hz(contour, contour->length_s * i / n);
        *low_hz = fmin(*low_hz, hz);
        *high_hz = fmax(*high_hz, hz);
    }
    *mean_hz = contour_cycles(contour, contour->length_s) / contour->length_s;
}
