/* How weak a call the tone tracer finds in Gaussian noise, against the sum of cell powers along the true
 * contour (known shape and frequency, unknown time, 1 false alarm an hour), which no tracer can beat.
 *
 * Calls: right whale upcall, Tukey window 0.3, f = 95 + 25 x + 75 x^3 Hz over 0.9 s (x from 0 to 1), which
 * sweeps 95 to 195 Hz as published ones do; whistles of 0.3 to 1 s, cubic through random knots between 5 and
 * 17 kHz with at most 20 kHz/s, Tukey window 0.1. Both are invented by these formulas; SNR is the mean over
 * the contour of the call's cell power over the noise's, in the class's own spectrum (Hann window, half
 * overlap). */
#include "support/test.h"

#include "base/random.h"
#include "base/units.h"
#include "call/tones.h"
#include "dsp/spectrum.h"
#include "settings/catalogue.h"
#include <math.h>
#include <stdlib.h>

#define MAX_SAMPLES 60000
#define MAX_FRAMES 400
#define LEAD_S 2.0 /* noise around each call */
#define N_LEVELS 12

static const double pi = 3.14159265358979323846;

struct signal {
    double rate_hz;
    uint32_t n;
    float samples[MAX_SAMPLES];
    double hz[MAX_SAMPLES];
};

static double tukey(double x, double share)
{
    double edge = fmin(x, 1 - x) / (share / 2);
    return edge >= 1 ? 1 : 0.5 - 0.5 * cos(pi * edge);
}

static void fill_samples(struct signal *signal, double share, double phase)
{
    for (uint32_t i = 0; i < signal->n; i++) {
        phase += 2 * pi * signal->hz[i] / signal->rate_hz;
        signal->samples[i] = (float)(tukey((i + 0.5) / signal->n, share) * sin(phase));
    }
}

static void make_upcall(struct signal *signal, struct random *random)
{
    signal->n = (uint32_t)(0.9 * signal->rate_hz);
    for (uint32_t i = 0; i < signal->n; i++) {
        double x = (i + 0.5) / signal->n;
        signal->hz[i] = 95 + 25 * x + 75 * x * x * x;
    }
    fill_samples(signal, 0.3, random_between(random, 0, 2 * pi));
}

/* Catmull-Rom cubic through knots; drawn again while it is too steep or leaves the band. */
static void make_whistle(struct signal *signal, struct random *random)
{
    bool good;
    double seconds = random_between(random, 0.3, 1.0);
    signal->n = (uint32_t)(seconds * signal->rate_hz);
    do {
        uint32_t n_knots = 3 + (uint32_t)random_between(random, 0, 4);
        double knots[8];
        for (uint32_t k = 0; k < n_knots; k++)
            knots[k] = random_between(random, 5000, 17000);
        good = true;
        for (uint32_t i = 0; i < signal->n; i++) {
            double x = (i + 0.5) / signal->n * (n_knots - 1), t;
            uint32_t k = (uint32_t)x;
            t = x - k;
            double b = knots[k], c = knots[k + 1], a = k > 0 ? knots[k - 1] : 2 * b - c;
            double d = k + 2 < n_knots ? knots[k + 2] : 2 * c - b;
            signal->hz[i] =
                b + 0.5 * t * (c - a + t * (2 * a - 5 * b + 4 * c - d + t * (3 * (b - c) + d - a)));
            good = good && signal->hz[i] > 4000 && signal->hz[i] < 18000 &&
                   (i == 0 || fabs(signal->hz[i] - signal->hz[i - 1]) * signal->rate_hz < 20000);
        }
    } while (!good);
    fill_samples(signal, 0.1, random_between(random, 0, 2 * pi));
}

/* The class's spectrum and which cells the true contour runs through. */
struct contour_cells {
    struct spectrum *spectrum;
    uint32_t n, n_frames;
    uint32_t bin[MAX_FRAMES];
    float power[1 << 15];
};

static void find_cells(struct contour_cells *cells, const struct signal *signal)
{
    cells->n_frames = 0;
    for (uint32_t at = 0; at + cells->n <= signal->n; at += cells->n / 2)
        cells->bin[cells->n_frames++] =
            (uint32_t)lround(signal->hz[at + cells->n / 2] / signal->rate_hz * cells->n);
}

/* Sum of the powers along the contour, over the mean power of a noise cell of unit variance. */
static double sum_cells(struct contour_cells *cells, const float *samples)
{
    double sum = 0;
    for (uint32_t i = 0; i < cells->n_frames; i++) {
        spectrum_power(cells->spectrum, samples + i * (cells->n / 2), cells->power);
        sum += cells->power[cells->bin[i]] * (cells->n / 2.0);
    }
    return sum;
}

/* What a gamma variable of whole order n exceeds with the probability p (Erlang's sum, bisection). */
static double gamma_quantile(uint32_t n, double p)
{
    double low = 0, high = 10.0 * n + 100;
    for (int turn = 0; turn < 100; turn++) {
        double x = (low + high) / 2, term = exp(-x), sum = 0;
        for (uint32_t k = 0; k < n; k++) {
            sum += term;
            term *= x / (k + 1);
        }
        if (sum > p)
            low = x;
        else
            high = x;
    }
    return high;
}

struct wanted {
    const struct call_class *classes;
    enum group group;
    double start_frame, end_frame;
    uint32_t n_hit, n_other;
};

/* Any call of the group that covers half of the true one. */
static void look(void *context, const struct found_call *found)
{
    struct wanted *wanted = context;
    double common = fmin(found->end_frame, wanted->end_frame) - fmax(found->start_frame, wanted->start_frame);
    bool hit = common >= 0.5 * (wanted->end_frame - wanted->start_frame) &&
               wanted->classes[found->class_index].group == wanted->group;
    wanted->n_hit += hit;
    wanted->n_other += !hit;
}

struct bench {
    const struct catalogue *catalogue;
    struct tones *tones;
    struct contour_cells cells;
    struct random random;
    struct wanted wanted;
    double per_hour; /* looks */
    uint64_t next_frame;
    uint32_t n_reference;
};

static void push_noise(struct bench *bench, double seconds, double rate_hz)
{
    struct found_sink sink = {look, &bench->wanted};
    float noise[1024];
    for (uint32_t left = (uint32_t)(seconds * rate_hz); left > 0;) {
        uint32_t n = left < 1024 ? left : 1024;
        for (uint32_t i = 0; i < n; i++)
            noise[i] = (float)random_normal(&bench->random);
        tones_push(bench->tones, noise, n, &sink);
        bench->next_frame += n;
        left -= n;
    }
}

/* One call in noise of unit variance, scaled to the SNR. */
static void try_call(struct bench *bench, struct signal *signal, double snr_db)
{
    static float mixed[MAX_SAMPLES];
    struct found_sink sink = {look, &bench->wanted};
    find_cells(&bench->cells, signal);
    double now = sum_cells(&bench->cells, signal->samples) / bench->cells.n_frames;
    float gain = (float)sqrt(units_power_ratio(snr_db) / now);
    for (uint32_t i = 0; i < signal->n; i++)
        mixed[i] = gain * signal->samples[i] + (float)random_normal(&bench->random);
    double threshold = gamma_quantile(bench->cells.n_frames, 1 / bench->per_hour);
    bench->n_reference += sum_cells(&bench->cells, mixed) > threshold;
    uint32_t before = bench->wanted.n_hit;
    bench->wanted.start_frame = (double)bench->next_frame;
    bench->wanted.end_frame = (double)bench->next_frame + signal->n;
    tones_push(bench->tones, mixed, signal->n, &sink);
    bench->next_frame += signal->n;
    push_noise(bench, LEAD_S, signal->rate_hz);
    bench->wanted.n_hit = before + (bench->wanted.n_hit > before);
}

/* SNR at which a curve crosses 0.9, between the first level above it and the one before. */
static double cross(const double *levels, const double *pd)
{
    for (uint32_t i = 1; i < N_LEVELS; i++)
        if (pd[i] >= 0.9 && pd[i - 1] < 0.9)
            return levels[i - 1] + (0.9 - pd[i - 1]) / (pd[i] - pd[i - 1]) * (levels[i] - levels[i - 1]);
    return pd[0] >= 0.9 ? levels[0] : INFINITY;
}

static double measure(const char *name, double rate_hz, void (*make)(struct signal *, struct random *),
                      uint32_t n_trials, double first_db)
{
    struct problems problems = {0};
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    assert_int_equal(catalogue_load("config/calls", &problems, NULL, catalogue), STATUS_OK);
    const struct call_class *class = catalogue->classes;
    while (strcmp(class->name, name) != 0)
        class ++;
    struct bench *bench = calloc(1, sizeof *bench);
    struct signal *signal = calloc(1, sizeof *signal);
    signal->rate_hz = rate_hz;
    bench->cells.n = 2 * (uint32_t)lround(class->tone.window_s * rate_hz / 2);
    bench->per_hour = 3600 * rate_hz / (bench->cells.n / 2);
    bench->wanted = (struct wanted){.classes = catalogue->classes, .group = class->group};
    random_reset(&bench->random, 20);
    assert_int_equal(spectrum_create(bench->cells.n, WINDOW_HANN, &bench->cells.spectrum), STATUS_OK);
    assert_int_equal(tones_create(catalogue->classes, catalogue->n_classes, rate_hz, &bench->tones),
                     STATUS_OK);
    push_noise(bench, 10, rate_hz);
    double levels[N_LEVELS], pd[N_LEVELS], reference[N_LEVELS];
    printf("# %s, %u calls a level, seed 20: SNR of a cell, Pd, Pd of the reference\n", name, n_trials);
    for (uint32_t i = 0; i < N_LEVELS; i++) {
        levels[i] = first_db + i;
        bench->wanted.n_hit = bench->n_reference = 0;
        for (uint32_t k = 0; k < n_trials; k++) {
            make(signal, &bench->random);
            try_call(bench, signal, levels[i]);
        }
        pd[i] = bench->wanted.n_hit / (double)n_trials;
        reference[i] = bench->n_reference / (double)n_trials;
        printf("#   %4.1f dB  %.2f  %.2f\n", levels[i], pd[i], reference[i]);
    }
    double loss = cross(levels, pd) - cross(levels, reference);
    printf("# figure %s: Pd 0.9 at a cell SNR of %.1f dB, %.1f dB above the sum along the true contour; %u "
           "other "
           "calls\n",
           name, cross(levels, pd), loss, bench->wanted.n_other);
    spectrum_destroy(bench->cells.spectrum);
    tones_destroy(bench->tones);
    free(bench);
    free(signal);
    free(catalogue);
    return loss;
}

static uint32_t trials(void)
{
    return test_length() == TEST_LONG ? 400 : test_length() == TEST_SHORT ? 20 : 80;
}

static void upcalls_are_found_near_the_ideal(void **state)
{
    (void)state;
    assert_true(measure("right whale upcall", 8000, make_upcall, trials(), 0) <= 4.0);
}

static void whistles_are_found_near_the_ideal(void **state)
{
    (void)state;
    assert_true(measure("delphinid whistle", 48000, make_whistle, trials(), -3) <= 6.0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(upcalls_are_found_near_the_ideal),
        cmocka_unit_test(whistles_are_found_near_the_ideal),
    };
    return cmocka_run_group_tests_name("tone detection", tests, NULL, NULL);
}
