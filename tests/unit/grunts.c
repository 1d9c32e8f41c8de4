/* lib/call/grunts through others: rows of pulses as published grunts have them (Terapon theraps: 73 to 260
 * ms, 11 to 21 pulses at 87 to 121 a second) in noise are recognised from the third on, with their times;
 * tones of that length, and rows that pulse more slowly, are none. */
#include "support/test.h"

#include "base/random.h"
#include "call/others.h"
#include <math.h>
#include <stdlib.h>

#define RATE 48000.0
#define TWO_PI 6.283185307179586

static const struct call_class grunt = {.name = "grunt",
                                        .form = CALL_TRAIN,
                                        .low_hz = 80,
                                        .high_hz = 2000,
                                        .sound = {.manner = MANNER_GRUNTS,
                                                  .min_snr_db = 5,
                                                  .min_s = 0.04,
                                                  .max_s = 0.32,
                                                  .low_rate_hz = 60,
                                                  .high_rate_hz = 300,
                                                  .min_repeats = 3,
                                                  .memory_s = 60}};

struct given {
    uint32_t n;
    double start_s[64], end_s[64];
};

static void take(void *context, const struct found_call *found)
{
    struct given *given = context;
    if (given->n < 64) {
        given->start_s[given->n] = found->start_frame / RATE;
        given->end_s[given->n] = found->end_frame / RATE;
    }
    given->n++;
}

/* Ten sounds, one each 2 s from 1 s on, of pulses at `rate_hz` (0: a tone) for `length_s`; in noise of 0.05.
 */
static struct given hear(double rate_hz, double length_s, uint64_t seed)
{
    struct given given = {0};
    struct others *others;
    struct random random;
    const uint32_t n = (uint32_t)(22 * RATE);
    float *sound = calloc(n, sizeof *sound);
    random_reset(&random, seed);
    assert_non_null(sound);
    for (uint32_t i = 0; i < n; i++)
        sound[i] = (float)(0.05 * random_normal(&random));
    for (int k = 0; k < 10; k++) {
        uint32_t first = (uint32_t)((1 + 2 * k) * RATE);
        for (uint32_t i = 0; i < (uint32_t)(length_s * RATE); i++) {
            double t = i / RATE, since = rate_hz > 0 ? t - floor(t * rate_hz) / rate_hz : 0;
            sound[first + i] += (float)(exp(-since / 0.0025) * sin(TWO_PI * 320 * (rate_hz > 0 ? since : t)));
        }
    }
    assert_int_equal(others_create(&grunt, 1, RATE, false, &others), STATUS_OK);
    assert_true(others_can_hear(others, 0));
    const struct found_sink sink = {take, &given};
    for (uint32_t at = 0; at < n; at += 4801)
        others_push(others, sound + at, NULL, n - at < 4801 ? n - at : 4801, &sink);
    others_finish(others, &sink);
    others_destroy(others);
    free(sound);
    return given;
}

static void rows_of_pulses_are_recognised(void **state)
{
    (void)state;
    static const double rates_hz[] = {70, 87, 121, 200}, lengths_s[] = {0.15, 0.24, 0.09, 0.1};
    for (int k = 0; k < 4; k++) {
        struct given given = hear(rates_hz[k], lengths_s[k], 100 + (uint64_t)k);
        printf("# figure rows of pulses at %.0f a second for %.2f s: %u of 10\n", rates_hz[k], lengths_s[k],
               given.n);
        assert_int_equal(given.n, 10);
        for (uint32_t i = 0; i < 10; i++) {
            assert_near(given.start_s[i], 1 + 2 * i, 0.015);
            assert_near(given.end_s[i], 1 + 2 * i + lengths_s[k], 0.025);
        }
    }
}

static void others_are_none(void **state)
{
    (void)state;
    assert_int_equal(hear(0, 0.2, 200).n, 0);   /* a tone */
    assert_int_equal(hear(30, 0.3, 201).n, 0);  /* as slow as a whale's pulsed unit */
    assert_int_equal(hear(100, 0.8, 202).n, 0); /* as long */
    assert_int_equal(hear(100, 0, 203).n, 0);   /* nothing but noise */
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(rows_of_pulses_are_recognised),
                                       cmocka_unit_test(others_are_none)};
    return cmocka_run_group_tests_name("grunts", tests, NULL, NULL);
}
