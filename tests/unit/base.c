/* lib/base: UTC, sample numbers, rounding, decibels, random numbers. */
#include "support/test.h"

#include "base/random.h"
#include "base/round.h"
#include "base/time.h"
#include "base/units.h"
#include <math.h>
#include <stdlib.h>

/* Independent reference: the C library's timegm. */
static void utc_agrees_with_timegm(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 1);
    for (int i = 0; i < 20000; i++) {
        time_t seconds = (time_t)random_between(&random, 0, 4102444800.0); /* 1970 to 2100 */
        char text[TIME_UTC_SIZE], wanted[40];
        time_format_utc((int64_t)seconds * TIME_NS_PER_S + 1000, text);
        struct tm parts;
        gmtime_r(&seconds, &parts);
        strftime(wanted, sizeof wanted, "%Y-%m-%dT%H:%M:%S.000001Z", &parts);
        assert_string_equal(text, wanted);
        int64_t back;
        assert_int_equal(time_parse_utc(text, &back), STATUS_OK);
        assert_int_equal(back, (int64_t)seconds * TIME_NS_PER_S + 1000);
    }
}

static void bad_utc_is_refused(void **state)
{
    (void)state;
    int64_t out = 42;
    static const char *const bad_form[] = {"",
                                           "2026-03-01",
                                           "2026-03-01 12:00:00Z",
                                           "2026-03-01T12:00:00",
                                           "2026-3-1T12:00:00Z",
                                           "2026-03-01T12:00:00.Z",
                                           "2026-03-01T12:00:00Zx"};
    static const char *const bad_value[] = {"2026-02-29T12:00:00Z", "2026-13-01T12:00:00Z",
                                            "2026-03-01T24:00:00Z", "2026-00-01T12:00:00Z"};
    for (size_t i = 0; i < sizeof bad_form / sizeof bad_form[0]; i++)
        assert_int_equal(time_parse_utc(bad_form[i], &out), STATUS_BAD_FORMAT);
    for (size_t i = 0; i < sizeof bad_value / sizeof bad_value[0]; i++)
        assert_int_equal(time_parse_utc(bad_value[i], &out), STATUS_OUT_OF_RANGE);
    assert_int_equal(out, 42);
}

/* A year of frames at 384 kHz must not drift by a microsecond from exact integer arithmetic. */
static void frames_keep_microseconds_for_a_year(void **state)
{
    (void)state;
    struct time_map map = {.anchor_frame = 0, .anchor_ns = 5000, .rate_hz = 384000};
    uint64_t frame = UINT64_C(384000) * 86400 * 365 + 192000;
    assert_int_equal(time_of_frame(&map, frame),
                     5000 + INT64_C(86400) * 365 * TIME_NS_PER_S + TIME_NS_PER_S / 2);
    map.anchor_frame = frame;
    assert_int_equal(time_of_frame(&map, frame - 384000), 5000 - TIME_NS_PER_S);
}

/* What is printed with the same decimals and read back is the same double. */
static void rounded_numbers_survive_printing(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 2);
    for (int i = 0; i < 20000; i++) {
        int decimals = (int)(random_bits(&random) % 7);
        double x = round_decimals(random_between(&random, -1e6, 1e6), decimals);
        char text[64];
        snprintf(text, sizeof text, "%.*f", decimals, x);
        assert_true(strtod(text, NULL) == x);
    }
    assert_true(isnan(round_decimals(NAN, 2)));
    assert_false(signbit(round_decimals(-0.001, 2)));
}

/* V1 of ISO 18405 closed forms: a sine of 1 Pa amplitude; V1b: energy sum of 150, 153, 147 dB. */
static void decibels(void **state)
{
    (void)state;
    assert_near(units_spl_db(0.5), 116.9897, 1e-4);
    assert_near(units_peak_db(1.0), 120.0, 1e-9);
    assert_near(units_sel_db(5.0), 126.9897, 1e-4);
    assert_near(units_sum_db(units_sum_db(150, 153), 147), 155.4363, 1e-4);
}

/* Moments of the normal generator: mean 0, variance 1, kurtosis 3 (sd sqrt(24/N)). */
static void normal_numbers_have_normal_moments(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 3);
    const int n = 400000;
    double sum = 0, sum2 = 0, sum4 = 0;
    for (int i = 0; i < n; i++) {
        double x = random_normal(&random);
        sum += x;
        sum2 += x * x;
        sum4 += x * x * x * x;
    }
    assert_near(sum / n, 0, 4 / sqrt(n));
    assert_near(sum2 / n, 1, 4 * sqrt(2.0 / n));
    assert_near(sum4 / n / (sum2 / n * sum2 / n), 3, 4 * sqrt(24.0 / n));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(utc_agrees_with_timegm),
        cmocka_unit_test(bad_utc_is_refused),
        cmocka_unit_test(frames_keep_microseconds_for_a_year),
        cmocka_unit_test(rounded_numbers_survive_printing),
        cmocka_unit_test(decibels),
        cmocka_unit_test(normal_numbers_have_normal_moments),
    };
    return cmocka_run_group_tests_name("base", tests, NULL, NULL);
}
