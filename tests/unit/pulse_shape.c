/* lib/call pulse_shape and alike: what pulses look like against closed forms and published figures, and which
 * of them are put together. */
#include "support/test.h"

#include "base/random.h"
#include "call/alike.h"
#include "call/bands.h"
#include "call/pulse_shape.h"
#include "support/clicks.h"
#include <math.h>
#include <stdlib.h>

#define SLOT 3
#define N 16384
#define AT 8192.0

/* A pulse alone in samples of rate_hz, seen by a class's shaper; noise of that deviation. */
static struct pulse_shape look(const struct call_class *call_class, double rate_hz, const float *x,
                               double background_pa2)
{
    struct band_edges edges = {call_class->low_hz, call_class->high_hz};
    struct bands *bands;
    struct pulse_shaper *shaper;
    struct pulse_shape shape;
    uint32_t n_slots = N / SLOT / 2 * 2;
    assert_int_equal(bands_create(rate_hz, &edges, 1, SLOT, n_slots, 16, &bands), STATUS_OK);
    assert_int_equal(pulse_shaper_create(call_class, rate_hz, SLOT, &shaper), STATUS_OK);
    bands_push(bands, x);
    int64_t frame = (int64_t)AT, slot = (int64_t)((AT + bands_get_delay(bands, 0)) / SLOT);
    struct pulse_sound sound = {.samples = bands_get_samples(bands) + frame,
                                .samples_before = frame,
                                .samples_after = (int64_t)n_slots * SLOT - frame,
                                .power = bands_get_power(bands, 0) + slot,
                                .slots_before = slot,
                                .slots_after = n_slots - slot,
                                .background_pa2 = background_pa2};
    pulse_shaper_get(shaper, &sound, &shape);
    pulse_shaper_destroy(shaper);
    bands_destroy(bands);
    return shape;
}

static struct call_class class_of(double low_hz, double high_hz, double pulse_s)
{
    return (struct call_class){.low_hz = low_hz,
                               .high_hz = high_hz,
                               .train = {.pulse_s = pulse_s, .min_interval_s = 0.03, .max_interval_s = 0.6}};
}

/* A Gaussian of standard deviation s in time: envelope 10 dB down at s sqrt(2 ln 10 / 2) either side, and
 * power spectrum of standard deviation 1 / (2 pi s sqrt 2) (Fourier pair of the Gaussian). */
static void a_gaussian_has_its_closed_form(void **state)
{
    (void)state;
    const double rate_hz = 192000, sigma_s = 6e-5, hz = 40000;
    struct call_class call_class = class_of(15000, 65000, 2e-4);
    float *x = calloc(N, sizeof *x);
    assert_non_null(x);
    clicks_add_gabor(x, N, rate_hz, AT + 0.3, 1, hz, sigma_s);
    struct pulse_shape shape = look(&call_class, rate_hz, x, 1e-12);
    assert_near(shape.centroid_hz, hz, 50);
    assert_near(shape.bandwidth_hz, 1 / (2 * M_PI * sigma_s * sqrt(2)), 60);
    assert_near(shape.length_s, 2 * sigma_s * sqrt(M_LN10), 2e-6);
    assert_near(shape.sweep_hz_s / 1e6, 0, 0.5); /* kHz/ms */
    free(x);
}

/* Published: Cuvier's beaked whale 42 kHz and 97 kHz/ms (Zimmer et al. 2005), made as a Gaussian of 65 us
 * whose phase is quadratic. */
static void a_sweep_is_measured(void **state)
{
    (void)state;
    const double rate_hz = 192000, sigma_s = 65e-6, hz = 42000, sweep_hz_s = 97e6;
    struct call_class call_class = class_of(15000, 75000, 2.5e-4);
    float *x = calloc(N, sizeof *x);
    assert_non_null(x);
    for (int k = 0; k < N; k++) {
        double t = (k - AT) / rate_hz;
        x[k] = (float)(exp(-t * t / (2 * sigma_s * sigma_s)) *
                       cos(2 * M_PI * (hz * t + sweep_hz_s * t * t / 2)));
    }
    struct pulse_shape shape = look(&call_class, rate_hz, x, 1e-12);
    assert_near(shape.sweep_hz_s / 1e6, 97, 2);
    assert_near(shape.centroid_hz, hz, 100);
    assert_near(shape.length_s, 2 * sigma_s * sqrt(M_LN10), 5e-6);
    free(x);
}

/* Two pulses 4 ms apart: the autocorrelation of the envelope is greatest at that lag. */
static void what_follows_is_seen_at_its_lag(void **state)
{
    (void)state;
    const double rate_hz = 96000, first_lag_s = 6e-4, reach_s = 0.01;
    struct call_class call_class = class_of(5000, 20000, 2e-4);
    float *x = calloc(N, sizeof *x);
    assert_non_null(x);
    clicks_add_gabor(x, N, rate_hz, AT, 1, 11000, 45e-6);
    clicks_add_gabor(x, N, rate_hz, AT + 0.004 * rate_hz, 0.5, 11000, 45e-6);
    struct pulse_shape shape = look(&call_class, rate_hz, x, 1e-12);
    uint32_t greatest = 0;
    for (uint32_t l = 1; l < PULSE_SHAPE_LAGS; l++)
        if (shape.echoes[l] > shape.echoes[greatest])
            greatest = l;
    double step_s = (reach_s - first_lag_s) / PULSE_SHAPE_LAGS;
    assert_near(first_lag_s + (greatest + 0.5) * step_s, 0.004, 1.5 * step_s);
    free(x);
}

/* The same pulse twice is alike, one of another frequency is not, whatever the noise says of a weak one. */
static void likeness_tells_two_animals_apart(void **state)
{
    (void)state;
    const double rate_hz = 96000, hz[3] = {9000, 9000, 15000};
    struct call_class call_class = class_of(5000, 20000, 2e-4);
    struct pulse_shape shapes[3];
    struct random random;
    random_reset(&random, 8);
    float *x = calloc(N, sizeof *x);
    assert_non_null(x);
    for (int i = 0; i < 3; i++) {
        memset(x, 0, N * sizeof *x);
        clicks_add_noise(x, N, 0.02, &random);
        clicks_add_gabor(x, N, rate_hz, AT, 1, hz[i], 45e-6);
        shapes[i] = look(&call_class, rate_hz, x, 0.02 * 0.02 * 15000 / 48000);
    }
    free(x);
    assert_true(pulse_shape_likeness(&shapes[0], &shapes[1]) > 1);
    assert_true(pulse_shape_likeness(&shapes[0], &shapes[2]) < -3);
    assert_near(pulse_shape_likeness(&shapes[0], &shapes[2]), pulse_shape_likeness(&shapes[2], &shapes[0]),
                1e-6);
}

/* Pulses of two made-up animals by turns, and one hidden. */
static void groups_are_the_animals(void **state)
{
    (void)state;
    struct pulse pulses[12];
    bool hidden[12] = {[5] = true};
    uint32_t group[12];
    memset(pulses, 0, sizeof pulses);
    for (uint32_t i = 0; i < 12; i++) {
        pulses[i].frame = 5000.0 * i;
        pulses[i].snr = i % 2 ? 30 : 100;
        for (uint32_t b = 0; b < PULSE_SHAPE_BANDS; b++) {
            pulses[i].shape.bands_db[b] = (float)(-6 - 4 * fabs((double)b - (i % 2 ? 2 : 5)));
            pulses[i].shape.doubt_db[b] = 1;
        }
    }
    struct alike *alike;
    assert_int_equal(alike_create(&alike), STATUS_OK);
    alike_find(alike, pulses, hidden, 12, 1000, 3, group);
    alike_destroy(alike);
    for (uint32_t i = 0; i < 12; i++) {
        if (i == 5)
            continue;
        assert_int_equal(group[i], i % 2);
    }
    assert_int_equal(group[5], 5);
    alike_destroy(NULL);
    pulse_shaper_destroy(NULL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_gaussian_has_its_closed_form),  cmocka_unit_test(a_sweep_is_measured),
        cmocka_unit_test(what_follows_is_seen_at_its_lag), cmocka_unit_test(likeness_tells_two_animals_apart),
        cmocka_unit_test(groups_are_the_animals),
    };
    return cmocka_run_group_tests_name("pulse shapes", tests, NULL, NULL);
}
