/* Recipes; see recipe.h. Where a recipe follows a published measurement it is named; the rest is common
 * practice, no source. */
#include "scene/recipe.h"
#include "base/units.h"
#include "scene/sound_noise.h"
#include <math.h>

void recipe_partials(struct sound *sound, const double *amplitude, uint32_t n)
{
    sound->n_parts = n;
    for (uint32_t k = 0; k < n; k++)
        sound->parts[k].amplitude = amplitude[k];
}

void recipe_tone(struct sound *out, double length_s, double taper)
{
    *out = (struct sound){.shape = SOUND_TONE, .length_s = length_s, .taper = taper, .n_parts = 1};
    out->parts[0].amplitude = 1;
}

void recipe_pulse(struct sound *out, enum sound_shape shape, const struct sound_part *parts, uint32_t n)
{
    *out = (struct sound){.shape = shape, .n_parts = n};
    for (uint32_t k = 0; k < n; k++)
        out->parts[k] = parts[k];
}

uint32_t recipe_between(struct random *random, uint32_t low, uint32_t high)
{
    return low + (uint32_t)(random_bits(random) % (high - low + 1));
}

void recipe_train(const struct scene_emitter *emitter, struct recipe_rhythm rhythm, struct random *random,
                  struct emission *out)
{
    if (emitter->pulses > 0)
        rhythm.pulses = emitter->pulses;
    if (isfinite(emitter->pulse_interval_s)) {
        rhythm.interval_s = emitter->pulse_interval_s;
        rhythm.low_s = 0.8 * rhythm.interval_s;
        rhythm.high_s = 1.2 * rhythm.interval_s;
        rhythm.walk = 0;
        rhythm.scatter = 0.04;
    }
    double at_s = 0, interval_s = rhythm.interval_s;
    out->n_pulses = rhythm.pulses;
    for (uint32_t i = 0; i < rhythm.pulses; i++) {
        double across = rhythm.pulses > 1 ? (double)i / (rhythm.pulses - 1) : 0.5;
        double sweep_db = rhythm.sweep_db * (0.5 - 0.5 * cos(6.283185307179586 * across)) - rhythm.sweep_db;
        out->pulse_s[i] = at_s;
        out->pulse_gain[i] = (float)units_amplitude_ratio(sweep_db);
        interval_s *= exp(rhythm.walk * random_normal(random));
        interval_s = fmin(rhythm.high_s, fmax(rhythm.low_s, interval_s));
        double scattered_s = interval_s * exp(rhythm.scatter * random_normal(random));
        at_s += fmin(rhythm.high_s, fmax(rhythm.low_s, scattered_s));
    }
}

void recipe_ramped_train(const struct scene_emitter *emitter, const struct recipe_ramp *ramp,
                         struct random *random, struct emission *out)
{
    if (emitter->pulses > 0 || isfinite(emitter->pulse_interval_s)) {
        struct recipe_rhythm even = {.pulses = 100,
                                     .interval_s = ramp->to_s,
                                     .low_s = 0.8 * ramp->to_s,
                                     .high_s = 1.2 * ramp->to_s,
                                     .scatter = ramp->scatter};
        recipe_train(emitter, even, random, out);
        return;
    }
    double t = 0;
    uint32_t n = 0;
    while (n < SCENE_MAX_PULSES && t <= ramp->length_s + ramp->hold_s) {
        double x = fmin(1, t / ramp->length_s), a = ramp->from_s, b = ramp->to_s;
        out->pulse_s[n] = t;
        out->pulse_gain[n++] =
            (float)units_amplitude_ratio(fmin(0, ramp->level_db * (random_normal(random) - 2)));
        double interval_s = ramp->linear_rate ? 1 / ((1 - x) / a + x / b) : a * pow(b / a, x);
        t += interval_s * exp(ramp->scatter * random_normal(random));
    }
    out->n_pulses = n;
}

void recipe_alike(struct emission *out, uint32_t n)
{
    out->n_pulses = n;
    for (uint32_t i = 0; i < n; i++)
        out->pulse_gain[i] = 1;
}

static void add_gaps(struct random *random, struct sound *out)
{
    uint32_t n = recipe_between(random, 1, SOUND_MAX_GAPS);
    for (uint32_t i = 0; i < n; i++) {
        out->gap_s[i] = out->length_s * random_between(random, 0.2, 0.8);
        out->gap_length_s[i] = random_between(random, 0.005, 0.03);
    }
}

void recipe_whistle(const struct recipe_whistle *form, double rate_hz, struct random *random,
                    struct sound *out)
{
    double knots[CONTOUR_MAX_SEGMENTS + 1], top_hz = fmin(form->high_hz, 0.4 * rate_hz);
    uint32_t n = recipe_between(random, form->least_knots, form->most_knots) - 1;
    double length_s = random_between(random, form->shortest_s, form->longest_s);
    double most_hz = fmin(form->most_hz_s * length_s / n, 0.4 * (top_hz - form->low_hz));
    knots[0] = random_between(random, form->low_hz, top_hz);
    for (uint32_t i = 1; i <= n; i++) {
        double next_hz = knots[i - 1] + most_hz * random_between(random, -1, 1);
        if (next_hz < form->low_hz || next_hz > top_hz) /* back into its range */
            next_hz = 2 * knots[i - 1] - next_hz;
        knots[i] = fmin(top_hz, fmax(form->low_hz, next_hz));
    }
    recipe_tone(out, length_s, 0.1);
    if (random_uniform(random) < form->steps_share)
        contour_steps(&out->contour, knots, n > 2 ? n : 3, length_s);
    else
        contour_through(&out->contour, knots, n, length_s);
    if (random_uniform(random) < form->gaps_share)
        add_gaps(random, out);
    double second_db = random_between(random, form->second_low_db, form->second_high_db);
    const double level[] = {1, units_amplitude_ratio(second_db), units_amplitude_ratio(2 * second_db)};
    recipe_partials(out, level, 3);
    sound_normalize_mean_square(out);
}

/* A struck pile: energy from 100 to 500 Hz, rise of 1 to 5 ms, 90 % of the energy in 50 to 100 ms near the
 * pile (common practice, no source). */
void recipe_blow(double rate_hz, struct sound *out)
{
    static const struct sound_part parts[] = {{.amplitude = 1.0, .frequency_hz = 112, .width_s = 0.048},
                                              {.amplitude = 0.8, .frequency_hz = 187, .width_s = 0.042},
                                              {.amplitude = 0.6, .frequency_hz = 341, .width_s = 0.031},
                                              {.amplitude = 0.35, .frequency_hz = 623, .width_s = 0.020},
                                              {.amplitude = 0.2, .frequency_hz = 1310, .width_s = 0.010},
                                              {.amplitude = 0.12, .frequency_hz = 3120, .width_s = 0.005},
                                              {.amplitude = 0.06, .frequency_hz = 7510, .width_s = 0.002}};
    recipe_pulse(out, SOUND_DAMPED, parts, sizeof parts / sizeof parts[0]);
    out->rise_s = 0.0015;
    sound_measure_length(out);
    sound_normalize_exposure(out);
    sound_limit_band(out, rate_hz);
}

/* An airgun array: energy below 250 Hz with a weak tail above, 0.1 to 0.2 s near it (common practice, no
 * source).
 */
void recipe_shot(double rate_hz, struct sound *out)
{
    static const struct sound_part parts[] = {{.amplitude = 1.0, .frequency_hz = 28, .width_s = 0.05},
                                              {.amplitude = 1.0, .frequency_hz = 61, .width_s = 0.03},
                                              {.amplitude = 0.7, .frequency_hz = 124, .width_s = 0.015},
                                              {.amplitude = 0.3, .frequency_hz = 410, .width_s = 0.006},
                                              {.amplitude = 0.05, .frequency_hz = 2300, .width_s = 0.002}};
    recipe_pulse(out, SOUND_DAMPED, parts, sizeof parts / sizeof parts[0]);
    out->rise_s = 0.002;
    sound_measure_length(out);
    sound_normalize_exposure(out);
    sound_limit_band(out, rate_hz);
}

/* Cavitation where the ghosts of an array meet: 10 to 20 kHz, 7 to 14 ms after the peak, rising for 5 to 6 ms
 * and then dropping, alike in energy and not in waveform (Landro et al. 2013, Geophysics 78, P19;
 * Khodabandeloo et al. 2017). Reverberation for seconds: common practice, no source. */
void recipe_shot_tail(double burst_s, double reverberation_s, uint64_t seed, struct sound *out)
{
    *out = (struct sound){.shape = SOUND_NOISE, .n_parts = 5, .seed = seed};
    out->parts[0] = (struct sound_part){.amplitude = burst_s > 0,
                                        .frequency_hz = 14500,
                                        .delay_s = 0.008,
                                        .width_s = 0.83 / 9000,
                                        .rise_s = 0.0055,
                                        .decay_s = 3e-4};
    for (uint32_t k = 1; k < 5; k++) {
        double hz = 25 * pow(2, k);
        out->parts[k] = (struct sound_part){.amplitude = reverberation_s > 0 ? pow(0.6, k) : 0,
                                            .frequency_hz = hz,
                                            .delay_s = 0.05,
                                            .width_s = 0.83 / (0.8 * hz),
                                            .rise_s = 0.15,
                                            .decay_s = fmax(1e-3, reverberation_s / 6.9)};
    }
    double sum = 0;
    for (uint32_t k = 1; k < 5; k++)
        sum += out->parts[k].amplitude * out->parts[k].amplitude * sound_noise_part_s(out, k);
    for (uint32_t k = 1; k < 5 && sum > 0; k++)
        out->parts[k].amplitude *= sqrt(0.1 / sum);
    out->parts[0].amplitude *= sqrt(burst_s / sound_noise_part_s(out, 0));
    sound_measure_length(out);
}

void recipe_ping(double frequency_hz, double ping_s, struct sound *out)
{
    recipe_pulse(out, SOUND_BURST,
                 &(struct sound_part){.amplitude = 1, .frequency_hz = frequency_hz, .width_s = ping_s}, 1);
    sound_measure_length(out);
    sound_normalize_exposure(out);
    out->parts[0].amplitude *= sqrt(ping_s);
}

/* Snapping shrimp: a few microseconds wide, to above 200 kHz (Au and Banks 1998, J. Acoust. Soc. Am. 103,
 * 41). */
void recipe_snap(double rate_hz, struct random *random, struct sound *out)
{
    double width_s = random_between(random, 3e-6, 8e-6);
    const struct sound_part parts[] = {
        {.amplitude = 0.1, .frequency_hz = 8000, .width_s = 40e-6},
        {.amplitude = 1, .frequency_hz = 0.2 / width_s, .delay_s = 350e-6, .width_s = width_s}};
    recipe_pulse(out, SOUND_GAUSS, parts, 2);
    sound_measure_length(out);
    sound_normalize_peak(out);
    sound_limit_band(out, rate_hz);
}
