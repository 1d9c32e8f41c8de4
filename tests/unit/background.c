/* lib/dsp/background: learns in seconds, is not pulled up by calls, follows broadband sound at once. */
#include "support/test.h"

#include "base/random.h"
#include "base/units.h"
#include "dsp/background.h"
#include <math.h>

#define N_BINS 100
#define FRAMES_PER_S 50.0

/* Noise in a bin of a spectrum: exponential power; here with a slope of 20 dB over the band. */
static float noise_power(struct random *random, uint32_t bin)
{
    return (float)(random_exponential(random) * pow(10, -2.0 * bin / N_BINS));
}

static double error_db(const float *level, uint32_t bin)
{
    return units_power_db(level[bin] / pow(10, -2.0 * bin / N_BINS));
}

static void run(struct background *background, struct random *random, double seconds, uint32_t call_bin,
                float call_power, float gain, float *level)
{
    float power[N_BINS];
    for (int frame = 0; frame < seconds * FRAMES_PER_S; frame++) {
        for (uint32_t k = 0; k < N_BINS; k++)
            power[k] = gain * noise_power(random, k);
        if (call_bin < N_BINS)
            power[call_bin] += call_power;
        background_push(background, power, level);
    }
}

static double worst_error_db(const float *level)
{
    double worst = 0;
    for (uint32_t k = 0; k < N_BINS; k++)
        worst = fmax(worst, fabs(error_db(level, k)));
    return worst;
}

static double mean_error_db(const float *level)
{
    double sum = 0;
    for (uint32_t k = 0; k < N_BINS; k++)
        sum += error_db(level, k) / N_BINS;
    return sum;
}

/* The mean of the exponential is known in closed form: 1 by construction. */
static void learns_in_seconds(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 4);
    struct background *background = NULL;
    float level[N_BINS];
    assert_int_equal(background_create(N_BINS, FRAMES_PER_S, &background), STATUS_OK);
    assert_false(background_is_ready(background));
    run(background, &random, 2, N_BINS, 0, 1, level);
    assert_true(background_is_ready(background));
    double after_2_s = mean_error_db(level);
    run(background, &random, 28, N_BINS, 0, 1, level);
    printf("# figure background, seed 4: mean error %.2f dB after 2 s (raised on purpose while young), %.2f "
           "dB after "
           "30 s, worst bin %.2f dB\n",
           after_2_s, mean_error_db(level), worst_error_db(level));
    assert_true(after_2_s > -1 && after_2_s < 4);
    assert_near(mean_error_db(level), 0, 0.3);
    assert_true(worst_error_db(level) < 2.5);
    background_destroy(background);
}

/* A call of 30 dB in one bin for 3 s may raise that bin by 0.5 dB a second and no other. */
static void calls_hardly_pull_it_up(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 5);
    struct background *background = NULL;
    float level[N_BINS];
    assert_int_equal(background_create(N_BINS, FRAMES_PER_S, &background), STATUS_OK);
    run(background, &random, 60, N_BINS, 0, 1, level);
    double before = error_db(level, 40), neighbour = error_db(level, 41);
    run(background, &random, 3, 40, 1000, 1, level);
    assert_near(error_db(level, 40), before + 1.5, 0.6);
    assert_near(error_db(level, 41), neighbour, 1.0);
    /* Song that fills half of the time for two minutes leaves it within a few dB of the noise. */
    for (int i = 0; i < 60; i++) {
        run(background, &random, 1, 40, 1000, 1, level);
        run(background, &random, 1, N_BINS, 0, 1, level);
    }
    assert_true(error_db(level, 40) < before + 5);
    /* A line that stays is learned in the end. */
    run(background, &random, 90, 40, 1000, 1, level);
    assert_true(error_db(level, 40) > units_power_db(1000 / pow(10, -0.8)) - 3);
    background_destroy(background);
}

static void broadband_sound_is_followed_at_once(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 6);
    struct background *background = NULL;
    float level[N_BINS];
    assert_int_equal(background_create(N_BINS, FRAMES_PER_S, &background), STATUS_OK);
    run(background, &random, 30, N_BINS, 0, 1, level);
    run(background, &random, 0.02, N_BINS, 0, 100, level);
    assert_near(mean_error_db(level), 20, 2);
    run(background, &random, 0.2, N_BINS, 0, 1, level);
    assert_near(mean_error_db(level), 0, 1);
    background_destroy(background);
}

/* A file that fades in from silence: the silence is not taken for the background. */
static void silence_before_the_sound_is_forgotten(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 7);
    struct background *background = NULL;
    float level[N_BINS];
    assert_int_equal(background_create(N_BINS, FRAMES_PER_S, &background), STATUS_OK);
    run(background, &random, 0.3, N_BINS, 0, 0, level);
    run(background, &random, 0.1, N_BINS, 0, 1e-6F, level);
    run(background, &random, 5, N_BINS, 0, 1, level);
    assert_near(mean_error_db(level), 1.0, 1.5);
    background_destroy(background);
}

static void raised_bins_stay_raised(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 8);
    struct background *background = NULL;
    float level[N_BINS];
    assert_int_equal(background_create(N_BINS, FRAMES_PER_S, &background), STATUS_OK);
    run(background, &random, 10, N_BINS, 0, 1, level);
    background_raise(background, 10, 50);
    background_raise(background, 11, 0); /* never down */
    background_raise(background, N_BINS, 50);
    double neighbour = level[11];
    run(background, &random, 0.02, N_BINS, 0, 1, level);
    assert_near(units_power_db(level[10] / 50), 0, 1);
    assert_near(units_power_db(level[11] / neighbour), 0, 1);
    background_destroy(background);
}

/* Shots each 10 s with a tail that begins 50 dB over the noise, falls by 15 dB a second and, within each
 * stretch of 32 bins, by 30 dB from its lowest bin to its highest. Returns the worst mean error over a
 * second, right after the last tail (out_after_db), and in it the share of bins at 4 times the level or more:
 * exp(-4) of them where the level is right. */
static double hear_tails(bool told, double *out_after_db)
{
    struct random random;
    random_reset(&random, 9);
    struct background *background = NULL;
    float level[N_BINS], power[N_BINS];
    uint32_t n_in_tail = 0, n_above = 0, n_after = 0;
    double after_db = 0;
    assert_int_equal(background_create(N_BINS, FRAMES_PER_S, &background), STATUS_OK);
    run(background, &random, 15, N_BINS, 0, 1, level);
    for (int shot = 0; shot < 8; shot++)
        for (int frame = 0; frame < 10 * FRAMES_PER_S; frame++) {
            double tail_db = 50 - 15 * frame / FRAMES_PER_S;
            if (told)
                background_set_tail(background, 0, N_BINS, tail_db > 0);
            for (uint32_t k = 0; k < N_BINS; k++) {
                double colour_db = -30.0 * (k % (N_BINS / 4)) / (N_BINS / 4);
                power[k] = noise_power(&random, k) * (float)(1 + pow(10, 0.1 * (tail_db + colour_db)));
            }
            background_push(background, power, level);
            if (shot < 5)
                continue;
            for (uint32_t k = 0; k < N_BINS && tail_db > 0; k++, n_in_tail++)
                n_above += power[k] > 4 * level[k];
            if (tail_db < -5 && tail_db > -20) {
                after_db += mean_error_db(level);
                n_after++;
            }
        }
    *out_after_db = after_db / n_after;
    background_destroy(background);
    return (double)n_above / n_in_tail;
}

static void a_tail_that_is_told_teaches_nothing_and_is_judged_by_its_colour(void **state)
{
    (void)state;
    double without_db, with_db, without = hear_tails(false, &without_db), with = hear_tails(true, &with_db);
    printf("# figure after tails of shots, seed 9: background %.1f dB too high without being told, %.1f dB "
           "when told; "
           "cells of the tail over 4 times the level %.1f %% and %.1f %% (noise: 1.8 %%)\n",
           without_db, with_db, 100 * without, 100 * with);
    assert_true(without_db > 2 && fabs(with_db) < 1);
    assert_true(with < 2.5 * exp(-4) && with < 0.5 * without);
}

static void bad_arguments_are_refused(void **state)
{
    (void)state;
    struct background *background = NULL;
    assert_int_equal(background_create(0, 50, &background), STATUS_BAD_ARGUMENT);
    assert_int_equal(background_create(10, 0, &background), STATUS_BAD_ARGUMENT);
    assert_int_equal(background_create(10, NAN, &background), STATUS_BAD_ARGUMENT);
    assert_null(background);
    background_destroy(NULL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(learns_in_seconds),
        cmocka_unit_test(calls_hardly_pull_it_up),
        cmocka_unit_test(broadband_sound_is_followed_at_once),
        cmocka_unit_test(silence_before_the_sound_is_forgotten),
        cmocka_unit_test(raised_bins_stay_raised),
        cmocka_unit_test(a_tail_that_is_told_teaches_nothing_and_is_judged_by_its_colour),
        cmocka_unit_test(bad_arguments_are_refused),
    };
    return cmocka_run_group_tests_name("background", tests, NULL, NULL);
}
