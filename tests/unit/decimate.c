/* lib/dsp/decimate: pass band, aliases, delay, chunks, bad factors. The check against scipy is
 * tests/reference/decimate.c. */
#include "support/test.h"

#include "base/random.h"
#include "base/units.h"
#include "dsp/decimate.h"
#include <math.h>
#include <stdlib.h>

static const double pi = 3.14159265358979323846;
static const uint32_t factors[] = {1, 2, 3, 4, 5, 6, 7, 8, 11, 12, 13, 16, 48, 64, 96, 192};
#define N_FACTORS (sizeof factors / sizeof factors[0])

/* Gain in dB of a sine of f cycles per output sample, measured at the output after the filters have filled.
 */
static double gain_db(uint32_t factor, double f)
{
    struct decimator *decimator = NULL;
    assert_int_equal(decimator_create(factor, &decimator), STATUS_OK);
    size_t n = 600 * (size_t)factor, n_out = 0;
    float *in = malloc(n * sizeof *in), *out = malloc(700 * sizeof *out);
    for (size_t i = 0; i < n; i++)
        in[i] = (float)cos(2 * pi * f / factor * (double)i + 0.3);
    n_out = decimator_push(decimator, in, n, out);
    double power = 0;
    size_t count = 0;
    for (size_t k = 200; k < n_out; k++, count++)
        power += (double)out[k] * out[k];
    decimator_destroy(decimator);
    free(in);
    free(out);
    return units_power_db(2 * power / (double)count + 1e-30);
}

/* A pure sine's mean square over 400 samples is 0.5 within 1/(800 sin(2 pi f)) (geometric sum): frequencies
 * with whole periods in 400 samples make it exact. */
static void pass_band_is_flat_to_0_05_db(void **state)
{
    (void)state;
    double worst = 0;
    for (size_t i = 0; i < N_FACTORS; i++)
        for (int k = 3; k <= 160; k += 7)
            worst = fmax(worst, fabs(gain_db(factors[i], k / 400.0)));
    printf("# figure decimate: pass band within %.4f dB\n", worst);
    assert_true(worst <= 0.05);
}

static void aliases_are_80_db_down(void **state)
{
    (void)state;
    double worst = -999;
    for (size_t i = 1; i < N_FACTORS; i++)
        for (int zone = 1; zone <= (int)factors[i] / 2; zone += 1 + (int)factors[i] / 16)
            for (int k = -160; k <= 160; k += 16) {
                double f = zone + k / 400.0;
                if (f > factors[i] / 2.0)
                    continue;
                worst = fmax(worst, gain_db(factors[i], f));
            }
    printf("# figure decimate: aliases at most %.1f dB\n", worst);
    assert_true(worst <= -80);
}

/* A slow sine comes out shifted by exactly the stated delay. */
static void delay_is_as_stated(void **state)
{
    (void)state;
    for (size_t i = 0; i < N_FACTORS; i++) {
        struct decimator *decimator = NULL;
        assert_int_equal(decimator_create(factors[i], &decimator), STATUS_OK);
        double delay = decimator_get_delay(decimator), f = 0.1 / factors[i];
        size_t n = 400 * (size_t)factors[i];
        float *in = malloc(n * sizeof *in), out[402];
        for (size_t k = 0; k < n; k++)
            in[k] = (float)sin(2 * pi * f * (double)k);
        size_t n_out = decimator_push(decimator, in, n, out);
        assert_int_equal(n_out, 400);
        for (size_t k = 200; k < n_out; k++)
            assert_near(out[k], sin(2 * pi * f * ((double)k * factors[i] - delay)), 1e-4);
        decimator_destroy(decimator);
        free(in);
    }
}

static void chunks_and_resets_change_nothing(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 5);
    enum { N = 50000 };
    float *in = malloc(N * sizeof *in), *whole = malloc((N + 1) * sizeof *whole),
          *parts = malloc((N + 1) * sizeof *parts);
    for (size_t k = 0; k < N; k++)
        in[k] = (float)random_normal(&random);
    for (size_t i = 0; i < N_FACTORS; i++) {
        struct decimator *decimator = NULL;
        assert_int_equal(decimator_create(factors[i], &decimator), STATUS_OK);
        size_t n_whole = decimator_push(decimator, in, N, whole);
        assert_int_equal(n_whole, (N + factors[i] - 1) / factors[i]);
        decimator_reset(decimator);
        size_t n_parts = 0;
        for (size_t at = 0; at < N;) {
            size_t n = 1 + (size_t)random_between(&random, 0, i % 2 ? 3000 : 40);
            n = n < N - at ? n : N - at;
            size_t got = decimator_push(decimator, in + at, n, parts + n_parts);
            assert_true(got <= n / factors[i] + 1);
            n_parts += got;
            at += n;
        }
        assert_int_equal(n_parts, n_whole);
        assert_memory_equal(parts, whole, n_whole * sizeof *whole);
        decimator_destroy(decimator);
    }
    free(in);
    free(whole);
    free(parts);
}

static void bad_factors_are_refused(void **state)
{
    (void)state;
    struct decimator *decimator = NULL;
    assert_int_equal(decimator_create(0, &decimator), STATUS_BAD_ARGUMENT);
    assert_int_equal(decimator_create(17, &decimator), STATUS_BAD_ARGUMENT);
    assert_int_equal(decimator_create(2 * 19, &decimator), STATUS_BAD_ARGUMENT);
    assert_null(decimator);
    decimator_destroy(NULL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(pass_band_is_flat_to_0_05_db), cmocka_unit_test(aliases_are_80_db_down),
        cmocka_unit_test(delay_is_as_stated),           cmocka_unit_test(chunks_and_resets_change_nothing),
        cmocka_unit_test(bad_factors_are_refused),
    };
    return cmocka_run_group_tests_name("decimate", tests, NULL, NULL);
}
