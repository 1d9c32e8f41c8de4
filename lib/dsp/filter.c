/* Butterworth design by the bilinear transform (Oppenheim and Schafer, sections 7.1 and B.1). */
#include "dsp/filter.h"
#include <complex.h>
#include <math.h>
#include <stdbool.h>

enum shape { SHAPE_LOW_PASS, SHAPE_HIGH_PASS, SHAPE_BAND_PASS };

/* The pre-warped analogue frequency for s = (z - 1) / (z + 1). */
static double warp(double frequency_hz, double rate_hz)
{
    return tan(M_PI * frequency_hz / rate_hz);
}

/* The upper-half-plane pole k of the prototype; for odd orders the last one is the real pole -1. */
static double complex prototype_pole(uint32_t order, uint32_t k)
{
    double angle = M_PI * (2.0 * k + 1 + order) / (2.0 * order);
    return cos(angle) + sin(angle) * I;
}

static double complex to_digital(double complex s)
{
    return (1 + s) / (1 - s);
}

/* A section with poles p and q (a conjugate pair or two real ones) and zeros as the shape wants them; a
 * first-order one when q is NAN. */
static void set_section(struct biquad *section, enum shape shape, double complex p, double complex q)
{
    const double zero = shape == SHAPE_HIGH_PASS ? -1 : 1; /* b = 1 + zero z^-1 ... */
    *section = (struct biquad){.b0 = 1};
    if (isnan(creal(q))) {
        section->b1 = zero;
        section->a1 = -creal(p);
        return;
    }
    section->b1 = shape == SHAPE_BAND_PASS ? 0 : 2 * zero;
    section->b2 = shape == SHAPE_BAND_PASS ? -1 : 1;
    section->a1 = -creal(p + q);
    section->a2 = creal(p * q);
}

static double complex section_response(const struct biquad *s, double complex z_inverse)
{
    return (s->b0 + (s->b1 + s->b2 * z_inverse) * z_inverse) / (1 + (s->a1 + s->a2 * z_inverse) * z_inverse);
}

/* Gives each section gain 1 at the reference frequency, so that no section overflows or loses precision. */
static void normalize(struct filter *filter, double cycles_a_sample)
{
    double complex z_inverse = cexp(-2 * M_PI * cycles_a_sample * I);
    for (uint32_t k = 0; k < filter->n_sections; k++) {
        struct biquad *s = &filter->sections[k];
        double gain = 1 / cabs(section_response(s, z_inverse));
        s->b0 *= gain;
        s->b1 *= gain;
        s->b2 *= gain;
    }
}

static enum status one_edge(enum shape shape, uint32_t order, double cutoff_hz, double rate_hz,
                            struct filter *out)
{
    if (order < 1 || order > FILTER_MAX_ORDER || !(cutoff_hz > 0) || !(cutoff_hz < rate_hz / 2))
        return STATUS_BAD_ARGUMENT;
    const double edge = warp(cutoff_hz, rate_hz);
    struct filter filter = {.n_sections = (order + 1) / 2};
    for (uint32_t k = 0; k < filter.n_sections; k++) {
        double complex pole = prototype_pole(order, k);
        double complex z = to_digital(shape == SHAPE_LOW_PASS ? edge * pole : edge / pole);
        bool real = 2 * k + 1 == order;
        set_section(&filter.sections[k], shape, real ? creal(z) : z, real ? (double complex)NAN : conj(z));
    }
    normalize(&filter, shape == SHAPE_LOW_PASS ? 0 : 0.5);
    *out = filter;
    return STATUS_OK;
}

enum status filter_low_pass(uint32_t order, double cutoff_hz, double rate_hz, struct filter *out)
{
    return one_edge(SHAPE_LOW_PASS, order, cutoff_hz, rate_hz, out);
}

enum status filter_high_pass(uint32_t order, double cutoff_hz, double rate_hz, struct filter *out)
{
    return one_edge(SHAPE_HIGH_PASS, order, cutoff_hz, rate_hz, out);
}

enum status filter_band_pass(uint32_t order, double low_hz, double high_hz, double rate_hz,
                             struct filter *out)
{
    if (order < 1 || order > FILTER_MAX_ORDER || !(low_hz > 0) || !(low_hz < high_hz) ||
        !(high_hz < rate_hz / 2))
        return STATUS_BAD_ARGUMENT;
    const double low = warp(low_hz, rate_hz), high = warp(high_hz, rate_hz);
    const double width = high - low, centre2 = low * high;
    struct filter filter = {.n_sections = 0};
    for (uint32_t k = 0; k < (order + 1) / 2; k++) {
        double complex half = prototype_pole(order, k) * width / 2;
        double complex root = csqrt(half * half - centre2);
        double complex a = to_digital(half + root), b = to_digital(half - root);
        if (2 * k + 1 == order) { /* the real pole becomes one pair */
            set_section(&filter.sections[filter.n_sections++], SHAPE_BAND_PASS, a, b);
            continue;
        }
        set_section(&filter.sections[filter.n_sections++], SHAPE_BAND_PASS, a, conj(a));
        set_section(&filter.sections[filter.n_sections++], SHAPE_BAND_PASS, b, conj(b));
    }
    normalize(&filter, atan(sqrt(centre2)) / M_PI);
    *out = filter;
    return STATUS_OK;
}

void filter_reset(struct filter *filter)
{
    for (uint32_t k = 0; k < filter->n_sections; k++)
        filter->sections[k].state1 = filter->sections[k].state2 = 0;
}

double filter_step(struct filter *filter, double x)
{
    for (uint32_t k = 0; k < filter->n_sections; k++) {
        struct biquad *s = &filter->sections[k];
        double y = s->b0 * x + s->state1;
        s->state1 = s->b1 * x - s->a1 * y + s->state2;
        s->state2 = s->b2 * x - s->a2 * y;
        x = y;
    }
    return x;
}

double complex filter_response(const struct filter *filter, double frequency_hz, double rate_hz)
{
    double complex z_inverse = cexp(-2 * M_PI * frequency_hz / rate_hz * I), response = 1;
    for (uint32_t k = 0; k < filter->n_sections; k++)
        response *= section_response(&filter->sections[k], z_inverse);
    return response;
}

double filter_power_response(const struct filter *filter, double frequency_hz, double rate_hz)
{
    double complex response = filter_response(filter, frequency_hz, rate_hz);
    return creal(response * conj(response));
}
