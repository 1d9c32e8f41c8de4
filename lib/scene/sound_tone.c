/* Tones; see sound_tone.h. */
#include "scene/sound_tone.h"
#include "scene/sound_noise.h"
#include <math.h>

#define TWO_PI 6.283185307179586476925
#define GAP_EDGE_S 0.005
#define SPAN 16 /* samples */

/* What gaps leave at a time; their edges are cosines. */
static double gap_at(const struct sound *sound, double t)
{
    double left = 1;
    for (int i = 0; i < SOUND_MAX_GAPS; i++) {
        double outside = fmax(sound->gap_s[i] - t, t - sound->gap_s[i] - sound->gap_length_s[i]);
        if (sound->gap_length_s[i] > 0 && outside < GAP_EDGE_S)
            left *= outside <= 0 ? 0 : 0.5 - 0.5 * cos(TWO_PI / 2 * outside / GAP_EDGE_S);
    }
    return left;
}

double sound_tone_envelope_at(const struct sound *sound, double t)
{
    double envelope = sound_window_at(t / sound->length_s, sound->taper);
    if (sound->pulse_rate_hz > 0) {
        double swell = 0.5 - 0.5 * cos(TWO_PI * sound->pulse_rate_hz * t);
        envelope *= swell * swell;
    }
    if (sound->decay_s > 0)
        envelope *= exp(-t / sound->decay_s);
    return envelope * sound_swell_at(sound, t + sound->origin_s) * gap_at(sound, t);
}

/* The phase by cubic interpolation over SPAN samples (Hermite's, from phases and frequencies at both ends):
 * a spiral is dear, and goes smoothly. Within 1e-6 cycles at 8 kHz and a wobble of 4 Hz, less at higher
 * rates. */
struct span {
    uint32_t end; /* the first sample after it */
    double from, a, b, c;
};

static void span_from(const struct contour *contour, double time_s, double dt, uint32_t first,
                      struct span *span)
{
    double length_s = SPAN * dt, from = contour_cycles(contour, time_s);
    double to = contour_cycles(contour, time_s + length_s) - from;
    double at_from = length_s * contour_hz(contour, time_s);
    double at_to = length_s * contour_hz(contour, time_s + length_s);
    *span = (struct span){.end = first + SPAN,
                          .from = from - floor(from),
                          .a = at_from,
                          .b = 3 * to - 2 * at_from - at_to,
                          .c = at_from + at_to - 2 * to};
}

static double cycles_at(const struct sound *sound, double t, double dt, uint32_t i, struct span *span)
{
    if (sound->contour.n_segments > 0)
        return contour_cycles(&sound->contour, t + sound->origin_s);
    if (i >= span->end)
        span_from(&sound->contour, t + sound->origin_s, dt, i, span);
    double x = 1 - (span->end - i) / (double)SPAN;
    return span->from + x * (span->a + x * (span->b + x * span->c));
}

static float tone_at(const struct sound *sound, const double *gain, double envelope, double cycles)
{
    /* cos(k x) = 2 cos(x) cos((k - 1) x) - cos((k - 2) x) */
    double first = cos(TWO_PI * (cycles - floor(cycles))), before = 1, present = first, sum = 0;
    for (uint32_t k = 0; k < sound->n_parts; k++) {
        sum += sound->parts[k].amplitude * gain[k] * present;
        double next = 2 * first * present - before;
        before = present;
        present = next;
    }
    return (float)(envelope * sum);
}

void sound_tone_add(const struct sound *sound, uint64_t variant, const double *gain, double scale0,
                    double slope, double t0, double dt, uint32_t from, uint32_t to, float *out)
{
    double phase = (double)variant * 0.6180339887498949; /* the golden ratio keeps any two apart */
    struct span span = {0};
    for (uint32_t i = from; i < to; i++) {
        double t = t0 + i * dt, envelope = (scale0 + slope * t) * sound_tone_envelope_at(sound, t);
        double cycles = cycles_at(sound, t, dt, i, &span);
        if (envelope != 0)
            out[i] += tone_at(sound, gain, envelope, cycles + phase);
    }
}
