/* Gaussian noise alone: calls of each tone class must not be more frequent than the class says
 * (false_per_hour). White noise and noise that falls by 6 dB an octave above 150 Hz, at 44.1 and 48 kHz;
 * every stretch of 10 min begins afresh, so that the learning of the background is in it. */
#include "support/test.h"

#include "base/random.h"
#include "call/tones.h"
#include "support/catalogue.h"
#include <math.h>
#include <stdlib.h>

#define STRETCH_S 600.0

struct counts {
    uint32_t n[CATALOGUE_MAX_CLASSES];
};

static void count(void *context, const struct found_call *found)
{
    ((struct counts *)context)->n[found->class_index]++;
}

static void run_stretch(const struct catalogue *catalogue, uint64_t seed, double rate_hz, double seconds,
                        struct counts *counts)
{
    struct random random;
    random_reset(&random, seed);
    const bool coloured = seed % 4 >= 2;
    const double share = 1 - exp(-2 * 3.14159265358979 * 150 / rate_hz);
    struct tones *tones = NULL;
    struct found_sink sink = {count, counts};
    assert_int_equal(tones_create(catalogue->classes, catalogue->n_classes, rate_hz, &tones), STATUS_OK);
    double low = 0;
    float noise[2048];
    for (uint64_t at = 0; (double)at < seconds * rate_hz; at += 2048) {
        for (uint32_t i = 0; i < 2048; i++) {
            double x = random_normal(&random);
            low += share * (x - low);
            noise[i] = (float)(coloured ? 20 * low + 0.05 * x : x);
        }
        tones_push(tones, noise, 2048, &sink);
    }
    tones_finish(tones, &sink);
    tones_destroy(tones);
}

/* Probability of n or more events of a Poisson law of this mean. */
static double poisson_tail(double mean, uint32_t n)
{
    double term = exp(-mean), below = 0;
    for (uint32_t k = 0; k < n; k++) {
        below += term;
        term *= mean / (k + 1);
    }
    return 1 - below;
}

static void noise_makes_no_more_calls_than_stated(void **state)
{
    (void)state;
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    assert_true(catalogue && test_load_catalogue(catalogue));
    const uint32_t n_stretches = test_length() == TEST_LONG ? 40 : test_length() == TEST_SHORT ? 1 : 10;
    const double seconds = test_length() == TEST_SHORT ? 60 : STRETCH_S;
    struct counts counts = {0};
    for (uint32_t i = 0; i < n_stretches; i++)
        run_stretch(catalogue, 100 + i, i % 2 ? 44100 : 48000, seconds, &counts);
    double hours = n_stretches * seconds / 3600;
    for (uint32_t c = 0; c < catalogue->n_classes; c++) {
        const struct call_class *class = &catalogue->classes[c];
        if (class->form != CALL_TONE)
            continue;
        double p = poisson_tail(class->false_per_hour * hours, counts.n[c]);
        printf("# figure noise, seeds 100 to %u, %.2f h: %u calls of class %s (stated %g an hour, p %.3f)\n",
               99 + n_stretches, hours, counts.n[c], class->name, class->false_per_hour, p);
        assert_true(p > 0.01);
    }
    free(catalogue);
}

/* The slow classes need hours, which a low rate makes cheap. */
static void noise_makes_no_slow_calls(void **state)
{
    (void)state;
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    assert_true(catalogue && test_load_catalogue(catalogue));
    const uint32_t n_stretches = test_length() == TEST_LONG ? 60 : test_length() == TEST_SHORT ? 2 : 20;
    struct counts counts = {0};
    for (uint32_t i = 0; i < n_stretches; i++)
        run_stretch(catalogue, 200 + i, 1000, 3 * STRETCH_S, &counts);
    const double hours = n_stretches * 3 * STRETCH_S / 3600;
    for (uint32_t c = 0; c < catalogue->n_classes; c++) {
        const struct call_class *class = &catalogue->classes[c];
        if (class->form != CALL_TONE || class->high_hz > 120)
            continue;
        double p = poisson_tail(class->false_per_hour * hours, counts.n[c]);
        printf("# figure noise at 1 kHz, seeds 200 to %u, %.1f h: %u calls of class %s (stated %g an hour, p "
               "%.3f)\n",
               199 + n_stretches, hours, counts.n[c], class->name, class->false_per_hour, p);
        assert_true(p > 0.01);
    }
    free(catalogue);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(noise_makes_no_more_calls_than_stated),
        cmocka_unit_test(noise_makes_no_slow_calls),
    };
    return cmocka_run_group_tests_name("tones in noise", tests, NULL, NULL);
}
