/* lib/dsp/spectrum: Parseval's theorem, the level of a tone, the overlap of the sine window, bad arguments.
 */
#include "support/test.h"

#include "base/random.h"
#include "dsp/spectrum.h"
#include <math.h>
#include <stdlib.h>

static const enum window_shape shapes[] = {WINDOW_HANN, WINDOW_SINE, WINDOW_RECTANGLE};
static const uint32_t lengths[] = {16, 48, 1000, 1024, 4096};

/* Parseval: the one-sided bins sum to sum(x^2 w^2) / sum(w^2), computed in double from the samples. */
static void bins_sum_to_the_windowed_mean_square(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 11);
    for (size_t s = 0; s < 3; s++)
        for (size_t l = 0; l < sizeof lengths / sizeof lengths[0]; l++) {
            const uint32_t n = lengths[l];
            struct spectrum *spectrum;
            assert_int_equal(spectrum_create(n, shapes[s], &spectrum), STATUS_OK);
            float *x = malloc(n * sizeof *x), *power = malloc((n / 2 + 1) * sizeof *power);
            const float *w = spectrum_get_window(spectrum);
            double wanted = 0, energy = 0, sum = 0;
            for (uint32_t i = 0; i < n; i++) {
                x[i] = (float)(random_normal(&random) + 0.5);
                wanted += (double)x[i] * x[i] * w[i] * w[i];
                energy += (double)w[i] * w[i];
            }
            spectrum_power(spectrum, x, power);
            for (uint32_t k = 0; k <= n / 2; k++)
                sum += power[k];
            assert_near(sum / (wanted / energy), 1.0, 2e-6);
            free(x);
            free(power);
            spectrum_destroy(spectrum);
        }
}

/* A sine of amplitude 1 has mean square 1/2 (ISO 18405), wherever it lies between two bins. */
static void a_tone_has_its_mean_square(void **state)
{
    (void)state;
    enum { N = 1024 };
    struct spectrum *spectrum;
    assert_int_equal(spectrum_create(N, WINDOW_SINE, &spectrum), STATUS_OK);
    static float x[N], power[N / 2 + 1];
    for (int step = 0; step <= 8; step++) {
        double bin = 100 + step / 8.0, sum = 0;
        for (int i = 0; i < N; i++)
            x[i] = (float)sin(2 * M_PI * bin * i / N + 0.3);
        spectrum_power(spectrum, x, power);
        for (int k = 84; k <= 117; k++)
            sum += power[k];
        assert_near(10 * log10(sum / 0.5), 0, 0.01);
    }
    spectrum_destroy(spectrum);
}

/* Princen and Bradley (1986): the squares of half-overlapped sine windows sum to 1. */
static void sine_windows_overlap_to_one(void **state)
{
    (void)state;
    struct spectrum *spectrum;
    assert_int_equal(spectrum_create(512, WINDOW_SINE, &spectrum), STATUS_OK);
    const float *w = spectrum_get_window(spectrum);
    for (int i = 0; i < 256; i++)
        assert_near((double)w[i] * w[i] + (double)w[i + 256] * w[i + 256], 1.0, 2e-7);
    spectrum_destroy(spectrum);
}

static void bad_lengths_are_refused(void **state)
{
    (void)state;
    struct spectrum *spectrum = NULL;
    static const uint32_t bad[] = {0, 8, 17, 1u << 22};
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++)
        assert_int_equal(spectrum_create(bad[i], WINDOW_HANN, &spectrum), STATUS_BAD_ARGUMENT);
    assert_null(spectrum);
    spectrum_destroy(NULL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(bins_sum_to_the_windowed_mean_square),
        cmocka_unit_test(a_tone_has_its_mean_square),
        cmocka_unit_test(sine_windows_overlap_to_one),
        cmocka_unit_test(bad_lengths_are_refused),
    };
    return cmocka_run_group_tests_name("spectrum", tests, NULL, NULL);
}
