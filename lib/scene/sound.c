/* Sounds as formulas; see sound.h. Short shapes are evaluated sample by sample; damped parts by a rotation
 * that is exact at the first sample and drifts by less than 1e-10 over a tile. */
#include "scene/sound.h"
#include "scene/sound_noise.h"
#include "scene/sound_tone.h"
#include <math.h>
#include <stdbool.h>

#define TWO_PI 6.283185307179586476925
#define GAUSS_REACH 4.5  /* standard deviations to either side: 4e-5 of the peak */
#define FRONT_SIDE 3     /* Gaussians of a front end's response to either side of 0 Hz */
#define LEAST_SHARE 1e-3 /* of a part's amplitude that one of them must leave: 60 dB */
#define GAMMA_REACH 16.0 /* widths: 3e-5 of the peak */
#define DAMPED_REACH 9.0 /* widths: 1e-4 */
#define DECAY_REACH 7.0  /* time constants of noise: 1e-3 */

double sound_part_hz(const struct sound *sound, uint32_t k)
{
    if (sound->shape != SOUND_TONE)
        return sound->parts[k].frequency_hz;
    double first = contour_cycles(&sound->contour, sound->origin_s);
    double last = contour_cycles(&sound->contour, sound->origin_s + sound->length_s);
    return (k + 1) * (last - first) / sound->length_s;
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
    case SOUND_NOISE:
        return 0.42 / part->width_s;
    default:
        return 0.8 / part->width_s;
    }
}

/* What chips fill; chip lengths widen it a little. */
static void chips_band(const struct sound *sound, double *low_hz, double *high_hz)
{
    double sweep_hz = sound->parts[0].chirp_hz_s * sound->chip_s;
    *low_hz = INFINITY;
    *high_hz = 0;
    for (uint32_t i = 0; i < sound->n_chips; i++) {
        if (sound->chips[i] == SOUND_NO_CHIP)
            continue;
        double hz = sound->parts[0].frequency_hz;
        hz += sweep_hz == 0 ? sound->chips[i] * sound->slot_hz : 0;
        *low_hz = fmin(*low_hz, fmin(hz, hz + sweep_hz));
        *high_hz = fmax(*high_hz, fmax(hz, hz + sweep_hz));
    }
    *low_hz = fmax(0, *low_hz - 0.8 / sound->chip_s);
    *high_hz += 0.8 / sound->chip_s;
}

void sound_band(const struct sound *sound, double *low_hz, double *high_hz)
{
    if (sound->shape == SOUND_TONE) {
        double mean_hz;
        contour_extent(&sound->contour, low_hz, high_hz, &mean_hz);
        return;
    }
    if (sound->shape == SOUND_CHIPS) {
        chips_band(sound, low_hz, high_hz);
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
    case SOUND_NOISE:
        return part->decay_s > 0 ? part->rise_s + DECAY_REACH * part->decay_s
                                 : fmax(part->rise_s, sound->length_s - part->delay_s);
    case SOUND_CHIPS:
        return sound->n_chips * sound->chip_s;
    default:
        return part->width_s;
    }
}

void sound_measure_length(struct sound *sound)
{
    double length_s = 0;
    for (uint32_t k = 0; k < sound->n_parts; k++)
        length_s = fmax(length_s, sound->parts[k].delay_s + part_reach_s(sound, &sound->parts[k]));
    sound->length_s = length_s;
}

static double chip_at(const struct sound *sound, const struct sound_part *part, double u)
{
    double at = floor(u / sound->chip_s), v = u - at * sound->chip_s;
    uint8_t chip = at >= 0 && at < sound->n_chips ? sound->chips[(uint32_t)at] : SOUND_NO_CHIP;
    if (chip == SOUND_NO_CHIP)
        return 0;
    double envelope = sound_window_at(v / sound->chip_s, 0.1), hz = part->frequency_hz;
    if (part->chirp_hz_s == 0)
        return envelope * sin(TWO_PI * (hz + chip * sound->slot_hz) * v);
    if (chip & 1)
        v = sound->chip_s - v; /* a sweep played backwards */
    return envelope * sin(TWO_PI * (hz * v + 0.5 * part->chirp_hz_s * v * v));
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
    case SOUND_CHIPS:
        return chip_at(sound, part, u);
    default:
        return sound_window_at(u / part->width_s, 0.1) * sin(TWO_PI * part->frequency_hz * u);
    }
}

struct run {
    uint64_t variant;
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
    if (sound->shape == SOUND_NOISE) {
        sound_noise_add(sound, k, run.variant, gain * run.scale0, gain * run.scale_slope, run.t0, run.dt,
                        from, to, out);
        return;
    }
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

void sound_add(const struct sound *sound, uint64_t variant, const double *gain, double scale0, double scale1,
               double t0, double dt, uint32_t n, float *out)
{
    struct run run = {variant, scale0, (scale1 - scale0) / sound->length_s, t0, dt};
    if (sound->shape != SOUND_TONE) {
        for (uint32_t k = 0; k < sound->n_parts; k++)
            add_part(sound, k, gain[k], run, n, out);
        return;
    }
    uint32_t from, to;
    sample_range(0, sound->length_s, t0, dt, n, &from, &to);
    sound_tone_add(sound, variant, gain, scale0, run.scale_slope, t0, dt, from, to, out);
}

void sound_scale(struct sound *sound, double factor)
{
    for (uint32_t k = 0; k < sound->n_parts; k++)
        sound->parts[k].amplitude *= factor;
}

/* Of noise what is expected on average; where all of it lasts, while it lasts. */
static void measure_noise(const struct sound *sound, double *mean_square, double *peak, double *exposure)
{
    double power = 0, strongest2 = 0, sum = 0;
    bool lasts = true;
    for (uint32_t k = 0; k < sound->n_parts; k++) {
        double a2 = sound->parts[k].amplitude * sound->parts[k].amplitude;
        power += a2;
        sum += a2 * sound_noise_part_s(sound, k);
        strongest2 = fmax(strongest2, a2);
        lasts = lasts && sound->parts[k].decay_s == 0;
    }
    *mean_square = lasts ? power : sum / sound->length_s;
    *peak = 3 * sqrt(strongest2);
    *exposure = sum;
}

void sound_normalize_mean_square(struct sound *sound)
{
    if (sound->shape == SOUND_NOISE) {
        double mean_square, peak, exposure;
        measure_noise(sound, &mean_square, &peak, &exposure);
        sound_scale(sound, 1 / sqrt(mean_square));
        return;
    }
    if (sound->shape == SOUND_CHIPS) { /* while they sound; a Tukey window of 0.1 holds 1 - 5 / 8 0.1 */
        sound_scale(sound, sqrt(2 / 0.9375) / fabs(sound->parts[0].amplitude));
        return;
    }
    if (sound->shape != SOUND_TONE) {
        sound_normalize_exposure(sound);
        sound_scale(sound, sqrt(sound->length_s));
        return;
    }
    const int n = 4096;
    double envelope2 = 0, parts2 = 0;
    for (int i = 0; i < n; i++) {
        double envelope = sound_tone_envelope_at(sound, (i + 0.5) / n * sound->length_s);
        envelope2 += envelope * envelope;
    }
    for (uint32_t k = 0; k < sound->n_parts; k++)
        parts2 += sound->parts[k].amplitude * sound->parts[k].amplitude / 2;
    sound_scale(sound, 1 / sqrt(envelope2 / n * parts2));
}

/* The pulse on a grid of at least 32 points a cycle of its highest part. */
static void measure_pulse(const struct sound *sound, double *peak, double *exposure)
{
    if (sound->shape == SOUND_NOISE) {
        double mean_square;
        measure_noise(sound, &mean_square, peak, exposure);
        return;
    }
    double highest_hz = 0;
    for (uint32_t k = 0; k < sound->n_parts; k++)
        highest_hz = fmax(highest_hz, sound->parts[k].frequency_hz);
    double dt = 1 / (32 * highest_hz);
    double ones[SOUND_MAX_PARTS];
    for (uint32_t k = 0; k < SOUND_MAX_PARTS; k++)
        ones[k] = 1;
    *peak = *exposure = 0;
    for (double t = 0; t < sound->length_s; t += 64 * dt) {
        float values[64] = {0};
        sound_add(sound, 0, ones, 1, 1, t, dt, 64, values);
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
    sound_scale(sound, 1 / peak);
}

void sound_normalize_exposure(struct sound *sound)
{
    double peak, exposure;
    measure_pulse(sound, &peak, &exposure);
    sound_scale(sound, 1 / sqrt(exposure));
}

/* A low-pass whose response is a row of Gaussians, so that what is Gaussian comes out as a few such. */
struct front_end {
    int side; /* of them to either side of 0 Hz */
    double width_hz, step_hz, gain;
};

/* Each width 0.06 of the rate, each 0.12: together flat within 1 dB up to 0.36 of the rate, 6 dB down at 0.42
 * and 25 dB at 0.5. A sound of too many parts has a single one, which is 4 dB down at 0.2 of the rate. */
static struct front_end front_end_for(const struct sound *sound, double rate_hz)
{
    if (sound->n_parts * (2 * FRONT_SIDE + 1) > SOUND_MAX_PARTS)
        return (struct front_end){.width_hz = 0.2 * rate_hz, .gain = 1};
    return (struct front_end){.side = FRONT_SIDE,
                              .width_hz = 0.06 * rate_hz,
                              .step_hz = 0.12 * rate_hz,
                              .gain = 2 / sqrt(TWO_PI)}; /* step over width: the row adds up to 1 */
}

/* The product of two Gaussians is one: the part's spectrum exp(-(f - f0)2 / 2 s2) times exp(-(f - f1)2 / 2
 * r2). Returns how many there are in out[2 * side + 1]. */
static uint32_t pass_front_end(const struct sound_part *part, const struct front_end *front,
                               struct sound_part *out)
{
    double s_hz = 1 / (TWO_PI * part->width_s), r_hz = front->width_hz, sum2 = s_hz * s_hz + r_hz * r_hz;
    double narrow_hz = s_hz * r_hz / sqrt(sum2), middle_s = part->delay_s + GAUSS_REACH * part->width_s;
    uint32_t n = 0;
    for (int j = -front->side; j <= front->side; j++) {
        double centre_hz = j * front->step_hz, apart_hz = part->frequency_hz - centre_hz;
        double share = front->gain * exp(-apart_hz * apart_hz / (2 * sum2));
        double hz = (part->frequency_hz * r_hz * r_hz + centre_hz * s_hz * s_hz) / sum2;
        if (hz <= 0 || (front->side > 0 && share < LEAST_SHARE))
            continue;
        struct sound_part *passed = &out[n++];
        *passed = *part;
        passed->amplitude *= share * narrow_hz / s_hz;
        passed->frequency_hz = hz;
        passed->width_s = 1 / (TWO_PI * narrow_hz);
        passed->delay_s = middle_s - GAUSS_REACH * passed->width_s;
    }
    return n;
}

/* A Gaussian that does not sweep. */
static bool is_gabor(const struct sound *sound, const struct sound_part *part)
{
    return sound->shape == SOUND_GAUSS && part->chirp_hz_s == 0;
}

static void limit_gaussians(struct sound *sound, double rate_hz)
{
    const struct front_end front = front_end_for(sound, rate_hz);
    struct sound_part parts[SOUND_MAX_PARTS];
    double earliest_s = 0;
    uint32_t n = 0;
    for (uint32_t k = 0; k < sound->n_parts; k++) {
        const struct sound_part *part = &sound->parts[k];
        if (is_gabor(sound, part) && part->frequency_hz + 2 / (TWO_PI * part->width_s) > 0.45 * rate_hz)
            n += pass_front_end(part, &front, parts + n);
        else
            parts[n++] = *part;
    }
    for (uint32_t k = 0; k < n; k++)
        earliest_s = fmin(earliest_s, parts[k].delay_s);
    for (uint32_t k = 0; k < n; k++) {
        sound->parts[k] = parts[k];
        sound->parts[k].delay_s -= earliest_s; /* a wider pulse begins earlier; nothing is before 0 */
    }
    sound->n_parts = n;
}

void sound_limit_band(struct sound *sound, double rate_hz)
{
    for (uint32_t k = 0; k < sound->n_parts; k++) {
        struct sound_part *part = &sound->parts[k];
        double top_hz = sound_part_hz(sound, k);
        if (sound->shape == SOUND_NOISE ? top_hz + 0.42 / part->width_s > 0.48 * rate_hz
                                        : !is_gabor(sound, part) && top_hz > 0.45 * rate_hz)
            part->amplitude = 0;
    }
    if (sound->shape == SOUND_GAUSS)
        limit_gaussians(sound, rate_hz);
    if (sound->shape != SOUND_TONE)
        sound_measure_length(sound);
}
