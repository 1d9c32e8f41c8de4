/* Sounds as formulas; see sound.h. Short shapes are evaluated sample by sample; damped parts by a rotation
 * that is exact at the first sample and drifts by less than 1e-10 over a tile. */
#include "scene/sound.h"
#include <math.h>
#include <stdbool.h>

#define TWO_PI 6.283185307179586476925
#define GAUSS_REACH 4.5  /* standard deviations to either side: 4e-5 of the peak */
#define GAMMA_REACH 16.0 /* widths: 3e-5 of the peak */
#define DAMPED_REACH 9.0 /* widths: 1e-4 */

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
    double x;
    const double *c = contour->cubic[segment_at(contour, time_s, &x)];
    return c[0] + x * (c[1] + x * (c[2] + x * c[3]));
}

double contour_cycles(const struct contour *contour, double time_s)
{
    double x;
    uint32_t i = segment_at(contour, time_s, &x);
    const double *c = contour->cubic[i];
    double integral = x * (c[0] + x * (c[1] / 2 + x * (c[2] / 3 + x * c[3] / 4)));
    return contour->cycles[i] + contour->length_s / contour->n_segments * integral;
}

void contour_extent(const struct contour *contour, double *low_hz, double *high_hz, double *mean_hz)
{
    *low_hz = *high_hz = contour_hz(contour, 0);
    for (int i = 1; i <= 64; i++) {
        double hz = contour_hz(contour, contour->length_s * i / 64);
        *low_hz = fmin(*low_hz, hz);
        *high_hz = fmax(*high_hz, hz);
    }
    *mean_hz = contour_cycles(contour, contour->length_s) / contour->length_s;
}

double sound_part_hz(const struct sound *sound, uint32_t k)
{
    if (sound->shape != SOUND_TONE)
        return sound->parts[k].frequency_hz;
    return (k + 1) * contour_cycles(&sound->contour, sound->length_s) / sound->length_s;
}

/* Half the width of a part's spectrum, about -10 dB. */
static double half_band_hz(const struct sound *sound, const struct sound_part *part)
{
    switch (sound->shape) {
    case SOUND_GAUSS:
        return 1.5 / (TWO_PI * part->width_s) + fabs(part->chirp_hz_s) * part->width_s;
    case SOUND_GAMMA:
        return 1.1 / (TWO_PI * part->width_s);
    case SOUND_DAMPED:
        return 3.0 / (TWO_PI * part->width_s);
    default:
        return 0.8 / part->width_s;
    }
}

void sound_band(const struct sound *sound, double *low_hz, double *high_hz)
{
    if (sound->shape == SOUND_TONE) {
        double mean_hz;
        contour_extent(&sound->contour, low_hz, high_hz, &mean_hz);
        return;
    }
    double strongest = 0;
    for (uint32_t k = 0; k < sound->n_parts; k++)
        strongest = fmax(strongest, fabs(sound->parts[k].amplitude));
    *low_hz = INFINITY;
    *high_hz = 0;
    for (uint32_t k = 0; k < sound->n_parts; k++) {
        const struct sound_part *part = &sound->parts[k];
        if (fabs(part->amplitude) < 0.3 * strongest)
            continue;
        double half_hz = half_band_hz(sound, part);
        *low_hz = fmin(*low_hz, fmax(0, part->frequency_hz - half_hz));
        *high_hz = fmax(*high_hz, part->frequency_hz + half_hz);
    }
}

static double part_reach_s(const struct sound *sound, const struct sound_part *part)
{
    switch (sound->shape) {
    case SOUND_GAUSS:
        return 2 * GAUSS_REACH * part->width_s;
    case SOUND_GAMMA:
        return GAMMA_REACH * part->width_s;
    case SOUND_DAMPED:
        return DAMPED_REACH * part->width_s;
    default:
        return part->width_s;
    }
}

void sound_measure_length(struct sound *sound)
{
    sound->length_s = 0;
    for (uint32_t k = 0; k < sound->n_parts; k++) {
        double end_s = sound->parts[k].delay_s + part_reach_s(sound, &sound->parts[k]);
        sound->length_s = fmax(sound->length_s, end_s);
    }
}

/* Tukey window: 1 in the middle, cosine over taper / 2 of the length at each end. */
static double window_at(double x, double taper)
{
    double edge = taper / 2, from_end = x < 0.5 ? x : 1 - x;
    if (from_end <= 0)
        return 0;
    return from_end >= edge ? 1 : 0.5 - 0.5 * cos(TWO_PI / 2 * from_end / edge);
}

static double tone_envelope(const struct sound *sound, double t)
{
    double envelope = window_at(t / sound->length_s, sound->taper);
    if (sound->pulse_rate_hz > 0) {
        double swell = 0.5 - 0.5 * cos(TWO_PI * sound->pulse_rate_hz * t);
        envelope *= swell * swell;
    }
    return envelope;
}

static void add_tone(const struct sound *sound, const double *gain, double t, double scale, float *out)
{
    double envelope = scale * tone_envelope(sound, t);
    if (envelope == 0)
        return;
    double cycles = contour_cycles(&sound->contour, t);
    /* cos(k x) = 2 cos(x) cos((k - 1) x) - cos((k - 2) x) */
    double first = cos(TWO_PI * (cycles - floor(cycles))), before = 1, present = first, sum = 0;
    for (uint32_t k = 0; k < sound->n_parts; k++) {
        sum += sound->parts[k].amplitude * gain[k] * present;
        double next = 2 * first * present - before;
        before = present;
        present = next;
    }
    *out += (float)(envelope * sum);
}

static double part_at(const struct sound *sound, const struct sound_part *part, double u)
{
    switch (sound->shape) {
    case SOUND_GAUSS: {
        double v = u - GAUSS_REACH * part->width_s, w = v / part->width_s;
        return exp(-0.5 * w * w) * sin(TWO_PI * (part->frequency_hz * v + 0.5 * part->chirp_hz_s * v * v));
    }
    case SOUND_GAMMA: {
        double w = u / part->width_s;
        return w * w * exp(-w) * cos(TWO_PI * part->frequency_hz * u);
    }
    case SOUND_DAMPED:
        return (1 - exp(-u / sound->rise_s)) * exp(-u / part->width_s) * sin(TWO_PI * part->frequency_hz * u);
    default:
        return window_at(u / part->width_s, 0.1) * sin(TWO_PI * part->frequency_hz * u);
    }
}

struct run {
    double scale0, scale_slope; /* by time since the sound's start */
    double t0, dt;
};

static void add_damped(const struct sound *sound, const struct sound_part *part, double gain, struct run run,
                       uint32_t from, uint32_t to, float *out)
{
    double u = run.t0 + from * run.dt - part->delay_s;
    double decay = exp(-u / part->width_s), rise = exp(-u / sound->rise_s);
    double step = exp(-run.dt / part->width_s), rise_step = exp(-run.dt / sound->rise_s);
    double angle = TWO_PI * part->frequency_hz * u, turn = TWO_PI * part->frequency_hz * run.dt;
    double re = decay * cos(angle), im = decay * sin(angle);
    double turn_re = step * cos(turn), turn_im = step * sin(turn);
    for (uint32_t i = from; i < to; i++) {
        double scale = run.scale0 + run.scale_slope * (run.t0 + i * run.dt);
        out[i] += (float)(scale * gain * (1 - rise) * im);
        double next = re * turn_re - im * turn_im;
        im = re * turn_im + im * turn_re;
        re = next;
        rise *= rise_step;
    }
}

/* The samples, of n, whose time is in [begin_s, end_s). */
static void sample_range(double begin_s, double end_s, double t0, double dt, uint32_t n, uint32_t *from,
                         uint32_t *to)
{
    double first = ceil((begin_s - t0) / dt), last = ceil((end_s - t0) / dt);
    *from = first <= 0 ? 0 : first >= n ? n : (uint32_t)first;
    *to = last <= 0 ? 0 : last >= n ? n : (uint32_t)last;
}

static void add_part(const struct sound *sound, uint32_t k, double gain, struct run run, uint32_t n,
                     float *out)
{
    const struct sound_part *part = &sound->parts[k];
    double amplitude = part->amplitude * gain;
    uint32_t from, to;
    sample_range(part->delay_s, part->delay_s + part_reach_s(sound, part), run.t0, run.dt, n, &from, &to);
    if (amplitude == 0 || from >= to)
        return;
    if (sound->shape == SOUND_DAMPED) {
        add_damped(sound, part, amplitude, run, from, to, out);
        return;
    }
    for (uint32_t i = from; i < to; i++) {
        double t = run.t0 + i * run.dt;
        double scale = run.scale0 + run.scale_slope * t;
        out[i] += (float)(scale * amplitude * part_at(sound, part, t - part->delay_s));
    }
}

void sound_add(const struct sound *sound, const double *gain, double scale0, double scale1, double t0,
               double dt, uint32_t n, float *out)
{
    struct run run = {scale0, (scale1 - scale0) / sound->length_s, t0, dt};
    if (sound->shape != SOUND_TONE) {
        for (uint32_t k = 0; k < sound->n_parts; k++)
            add_part(sound, k, gain[k], run, n, out);
        return;
    }
    uint32_t from, to;
    sample_range(0, sound->length_s, t0, dt, n, &from, &to);
    for (uint32_t i = from; i < to; i++) {
        double t = t0 + i * dt;
        add_tone(sound, gain, t, scale0 + run.scale_slope * t, &out[i]);
    }
}

static void scale_parts(struct sound *sound, double factor)
{
    for (uint32_t k = 0; k < sound->n_parts; k++)
        sound->parts[k].amplitude *= factor;
}

void sound_normalize_mean_square(struct sound *sound)
{
    const int n = 4096;
    double envelope2 = 0, parts2 = 0;
    for (int i = 0; i < n; i++) {
        double envelope = tone_envelope(sound, (i + 0.5) / n * sound->length_s);
        envelope2 += envelope * envelope;
    }
    for (uint32_t k = 0; k < sound->n_parts; k++)
        parts2 += sound->parts[k].amplitude * sound->parts[k].amplitude / 2;
    scale_parts(sound, 1 / sqrt(envelope2 / n * parts2));
}

/* The pulse on a grid of at least 32 points a cycle of its highest part. */
static void measure_pulse(const struct sound *sound, double *peak, double *exposure)
{
    double highest_hz = 0;
    for (uint32_t k = 0; k < sound->n_parts; k++)
        highest_hz = fmax(highest_hz, sound->parts[k].frequency_hz);
    double dt = 1 / (32 * highest_hz);
    const double ones[SOUND_MAX_PARTS] = {1, 1, 1, 1, 1, 1, 1, 1};
    *peak = *exposure = 0;
    for (double t = 0; t < sound->length_s; t += 64 * dt) {
        float values[64] = {0};
        sound_add(sound, ones, 1, 1, t, dt, 64, values);
        for (int i = 0; i < 64; i++) {
            *peak = fmax(*peak, fabs((double)values[i]));
            *exposure += (double)values[i] * (double)values[i] * dt;
        }
    }
}

void sound_normalize_peak(struct sound *sound)
{
    double peak, exposure;
    measure_pulse(sound, &peak, &exposure);
    scale_parts(sound, 1 / peak);
}

void sound_normalize_exposure(struct sound *sound)
{
    double peak, exposure;
    measure_pulse(sound, &peak, &exposure);
    scale_parts(sound, 1 / sqrt(exposure));
}

/* The product of two Gaussians is one: the part's spectrum exp(-(f - f0)2 / 2 s2) times exp(-f2 / 2 r2). */
static void pass_front_end(struct sound_part *part, double r_hz)
{
    double s_hz = 1 / (TWO_PI * part->width_s), sum2 = s_hz * s_hz + r_hz * r_hz;
    double narrow_hz = s_hz * r_hz / sqrt(sum2), middle_s = part->delay_s + GAUSS_REACH * part->width_s;
    part->amplitude *= exp(-part->frequency_hz * part->frequency_hz / (2 * sum2)) * narrow_hz / s_hz;
    part->frequency_hz *= r_hz * r_hz / sum2;
    part->width_s = 1 / (TWO_PI * narrow_hz);
    part->delay_s = middle_s - GAUSS_REACH * part->width_s;
}

void sound_limit_band(struct sound *sound, double rate_hz)
{
    double earliest_s = 0;
    for (uint32_t k = 0; k < sound->n_parts; k++) {
        struct sound_part *part = &sound->parts[k];
        double top_hz = sound_part_hz(sound, k);
        if (sound->shape == SOUND_GAUSS && part->chirp_hz_s == 0) {
            if (top_hz + 2 / (TWO_PI * part->width_s) > 0.45 * rate_hz)
                pass_front_end(part, 0.2 * rate_hz);
            earliest_s = fmin(earliest_s, part->delay_s);
        } else if (top_hz > 0.45 * rate_hz) {
            part->amplitude = 0;
        }
    }
    for (uint32_t k = 0; k < sound->n_parts; k++)
        sound->parts[k].delay_s -= earliest_s; /* a wider pulse begins earlier; nothing is before 0 */
    if (sound->shape != SOUND_TONE)
        sound_measure_length(sound);
}
