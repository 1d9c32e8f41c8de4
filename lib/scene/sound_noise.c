/* Noise; see sound_noise.h. A cubic B-spline's spectrum is sinc4 (Unser 1999, IEEE Signal Process. Mag.
 * 16(6), 22), so the power's is sinc8: a bell without corners. */
#include "scene/sound_noise.h"
#include <math.h>

#define TWO_PI 6.283185307179586476925
/* A spline's four weights squared add up to 151 / 315 on average over where one stands between the values. */
#define SPLINE_POWER (151.0 / 315.0)

double sound_window_at(double x, double taper)
{
    double edge = taper / 2, from_end = x < 0.5 ? x : 1 - x;
    if (from_end <= 0)
        return 0;
    return from_end >= edge ? 1 : 0.5 - 0.5 * cos(TWO_PI / 2 * from_end / edge);
}

double sound_swell_at(const struct sound *sound, double time_s)
{
    double swell = 1;
    for (int i = 0; i < SOUND_MAX_SWELLS; i++)
        if (sound->swell_depth[i] != 0)
            swell *= 1 + sound->swell_depth[i] * cos(TWO_PI * sound->swell_hz[i] * time_s);
    return swell;
}

static uint64_t hash(uint64_t x)
{
    x += UINT64_C(0x9e3779b97f4a7c15);
    x = (x ^ (x >> 30)) * UINT64_C(0xbf58476d1ce4e5b9);
    x = (x ^ (x >> 27)) * UINT64_C(0x94d049bb133111eb);
    return x ^ (x >> 31);
}

/* Four uniform numbers added up are normal enough: four of them meet again in every spline. */
static double normal_of(uint64_t bits)
{
    double sum = 0;
    for (int i = 0; i < 4; i++)
        sum += (double)((bits >> (16 * i)) & 0xffff);
    return (sum / 65535 - 2) * 1.7320508075688772;
}

static double envelope_at(const struct sound *sound, const struct sound_part *part, double time_s)
{
    double u = time_s - part->delay_s, envelope = 1;
    if (u < 0 || time_s > sound->length_s)
        return 0;
    if (u < part->rise_s)
        envelope = 0.5 - 0.5 * cos(TWO_PI / 2 * u / part->rise_s);
    else if (part->decay_s > 0)
        envelope = exp(-(u - part->rise_s) / part->decay_s);
    if (sound->taper > 0)
        envelope *= sound_window_at(time_s / sound->length_s, sound->taper);
    return envelope * sound_swell_at(sound, time_s + sound->origin_s);
}

double sound_noise_part_s(const struct sound *sound, uint32_t k)
{
    const struct sound_part *part = &sound->parts[k];
    if (part->decay_s > 0)
        return part->rise_s * 3 / 8 + part->decay_s / 2;
    return fmax(0, sound->length_s - part->delay_s - part->rise_s * 5 / 8);
}

struct lattice {
    const struct sound *sound;
    const struct sound_part *part;
    uint64_t seed;
    int64_t at; /* the first of the four that meet now */
    double re[4], im[4];
};

static void draw(struct lattice *lattice, int64_t at, int into)
{
    double time_s = (double)at * lattice->part->width_s - lattice->sound->origin_s;
    double envelope = envelope_at(lattice->sound, lattice->part, time_s);
    uint64_t bits = hash(lattice->seed ^ hash((uint64_t)at));
    lattice->re[into] = envelope == 0 ? 0 : envelope * normal_of(bits);
    lattice->im[into] = envelope == 0 ? 0 : envelope * normal_of(hash(bits));
}

static void move_to(struct lattice *lattice, int64_t at)
{
    int64_t by = at - lattice->at;
    for (int i = 0; i < 4; i++)
        if (by > 0 && i + by < 4) {
            lattice->re[i] = lattice->re[i + by];
            lattice->im[i] = lattice->im[i + by];
        } else {
            draw(lattice, at + i, i);
        }
    lattice->at = at;
}

void sound_noise_add(const struct sound *sound, uint32_t k, uint64_t variant, double scale0, double slope,
                     double t0, double dt, uint32_t from, uint32_t to, float *out)
{
    const struct sound_part *part = &sound->parts[k];
    struct lattice lattice = {.sound = sound,
                              .part = part,
                              .seed = hash(sound->seed + hash(variant * SOUND_MAX_PARTS + k)),
                              .at = INT64_MIN / 2};
    double per_s = 1 / part->width_s, begin_s = t0 + from * dt;
    double cycles = part->frequency_hz * (begin_s + sound->origin_s), turn = TWO_PI * part->frequency_hz * dt;
    double angle = TWO_PI * (cycles - floor(cycles)), factor = part->amplitude / sqrt(SPLINE_POWER);
    double re = factor * cos(angle), im = factor * sin(angle), turn_re = cos(turn), turn_im = sin(turn);
    for (uint32_t i = from; i < to; i++) {
        double t = t0 + i * dt, u = (t + sound->origin_s) * per_s, first = floor(u), x = u - first;
        int64_t at = (int64_t)first - 1;
        if (at != lattice.at)
            move_to(&lattice, at);
        double y = 1 - x, x2 = x * x, w0 = y * y * y / 6, w1 = (3 * x2 * x - 6 * x2 + 4) / 6;
        double w3 = x2 * x / 6, w2 = 1 - w0 - w1 - w3;
        double a = w0 * lattice.re[0] + w1 * lattice.re[1] + w2 * lattice.re[2] + w3 * lattice.re[3];
        double b = w0 * lattice.im[0] + w1 * lattice.im[1] + w2 * lattice.im[2] + w3 * lattice.im[3];
        out[i] += (float)((scale0 + slope * t) * (a * re - b * im));
        double next = re * turn_re - im * turn_im;
        im = re * turn_im + im * turn_re;
        re = next;
    }
}
