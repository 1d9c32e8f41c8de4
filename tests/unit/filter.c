/* lib/dsp/filter: responses against the closed form of Butterworth (1930), |H|^2 = 1 / (1 + W^2n), with the
 * frequency W of the bilinear transform (tan(pi f / rate)). */
#include "support/test.h"

#include "dsp/filter.h"
#include <math.h>

static double warped(double f, double rate)
{
    return tan(M_PI * f / rate);
}

static void responses_are_butterworth(void **state)
{
    (void)state;
    const double rate = 48000;
    static const double cutoffs[] = {10, 200, 5000, 20000};
    struct filter low, high, band;
    for (uint32_t order = 1; order <= 8; order++)
        for (int c = 0; c < 4; c++) {
            const double cut = cutoffs[c], top = cut * 1.122;
            assert_int_equal(filter_low_pass(order, cut, rate, &low), STATUS_OK);
            assert_int_equal(filter_high_pass(order, cut, rate, &high), STATUS_OK);
            assert_int_equal(filter_band_pass(order, cut, top, rate, &band), STATUS_OK);
            for (double f = cut / 4; f < 23000 && f < cut * 4; f *= 1.07) {
                double w = warped(f, rate), n = order;
                double u = w / warped(cut, rate);
                double v =
                    (w - warped(cut, rate) * warped(top, rate) / w) / (warped(top, rate) - warped(cut, rate));
                assert_near(10 * log10(filter_power_response(&low, f, rate) * (1 + pow(u, 2 * n))), 0, 1e-4);
                assert_near(10 * log10(filter_power_response(&high, f, rate) * (1 + pow(1 / u, 2 * n))), 0,
                            1e-4);
                if (filter_power_response(&band, f, rate) > 1e-9)
                    assert_near(10 * log10(filter_power_response(&band, f, rate) * (1 + pow(v, 2 * n))), 0,
                                1e-3);
            }
        }
}

/* A filtered tone has the level that the response says. */
static void steps_follow_the_response(void **state)
{
    (void)state;
    struct filter filter;
    assert_int_equal(filter_band_pass(3, 90, 110, 1000, &filter), STATUS_OK);
    static const double tones[] = {80, 90, 100, 110, 130};
    for (int t = 0; t < 5; t++) {
        filter_reset(&filter);
        double sum = 0;
        for (int i = 0; i < 12000; i++) {
            double y = filter_step(&filter, sin(2 * M_PI * tones[t] * i / 1000));
            sum += i >= 2000 ? y * y : 0;
        }
        assert_near(10 * log10(sum / 5000), 10 * log10(filter_power_response(&filter, tones[t], 1000)), 1e-3);
    }
}

static void bad_edges_are_refused(void **state)
{
    (void)state;
    struct filter filter = {.n_sections = 77};
    assert_int_equal(filter_low_pass(0, 10, 100, &filter), STATUS_BAD_ARGUMENT);
    assert_int_equal(filter_low_pass(9, 10, 100, &filter), STATUS_BAD_ARGUMENT);
    assert_int_equal(filter_low_pass(2, 50, 100, &filter), STATUS_BAD_ARGUMENT);
    assert_int_equal(filter_high_pass(2, 0, 100, &filter), STATUS_BAD_ARGUMENT);
    assert_int_equal(filter_high_pass(2, NAN, 100, &filter), STATUS_BAD_ARGUMENT);
    assert_int_equal(filter_band_pass(2, 20, 10, 100, &filter), STATUS_BAD_ARGUMENT);
    assert_int_equal(filter_band_pass(2, 20, 50, 100, &filter), STATUS_BAD_ARGUMENT);
    assert_int_equal(filter.n_sections, 77);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(responses_are_butterworth),
        cmocka_unit_test(steps_follow_the_response),
        cmocka_unit_test(bad_edges_are_refused),
    };
    return cmocka_run_group_tests_name("filter", tests, NULL, NULL);
}
