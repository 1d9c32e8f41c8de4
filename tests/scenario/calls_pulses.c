/* How weak a pulse and a train are found in Gaussian noise, against the ideal energy detector: short forms of
 * the bench's pieces (tests/bench/calls/pulses.c, trains.c). Goals: within 1.5 dB of the ideal, and 1.5 dB
 * below the single-pulse ideal. */
#include "support/test.h"

#include "bench/calls/calls.h"
#include "support/catalogue.h"
#include "support/ideal.h"
#include <math.h>
#include <stdlib.h>

static struct catalogue catalogue;

static struct calls_setup short_form(double check_scale)
{
    enum test_length length = test_length();
    return (struct calls_setup){.catalogue = &catalogue,
                                .seed = 20,
                                .scale = length == TEST_LONG    ? 1
                                         : length == TEST_SHORT ? 0.05
                                                                : check_scale};
}

/* The law that the threshold comes from must find itself again: counts drawn from a known tail. */
static void the_tail_is_fitted(void **state)
{
    (void)state;
    const struct ideal_tail truth = {.scale = 400, .shape = 3.2};
    double thresholds[IDEAL_TAIL_STEPS] = {4, 4.5, 5, 5.5}, seconds = 36000;
    uint64_t counts[IDEAL_TAIL_STEPS];
    for (int i = 0; i < IDEAL_TAIL_STEPS; i++)
        counts[i] = (uint64_t)llround(seconds * ideal_tail_rate(&truth, thresholds[i]));
    struct ideal_tail fitted = ideal_tail_fit(thresholds, counts, seconds);
    assert_near(fitted.shape, truth.shape, 0.02);
    assert_near(ideal_tail_threshold(&fitted, 1.0 / 3600), ideal_tail_threshold(&truth, 1.0 / 3600), 0.02);
}

static void single_pulses_are_found_near_the_ideal(void **state)
{
    (void)state;
    struct calls_setup setup = short_form(0.25);
    json_t *result = calls_pulses(&setup), *row;
    size_t i;
    assert_non_null(result);
    json_array_foreach(json_object_get(result, "rows"), i, row)
    {
        printf("# figure %s, seed 20, %d pulses a level: Pd 0.9 at 1 false pulse/h %.2f dB above the ideal "
               "energy "
               "detector\n",
               json_string_value(json_object_get(row, "class")),
               (int)json_integer_value(json_object_get(row, "trials")),
               json_number_value(json_object_get(row, "loss_db")));
        assert_true(json_is_real(json_object_get(row, "loss_db")));
        /* 0.5 dB for the spread of the trials and of a tail fitted to minutes of noise. */
        assert_true(json_real_value(json_object_get(row, "loss_db")) <= 1.5 + 0.5);
    }
    json_decref(result);
}

static void trains_are_found_below_single_pulses(void **state)
{
    (void)state;
    struct calls_setup setup = short_form(0.1);
    json_t *result = calls_trains(&setup), *row;
    size_t i;
    assert_non_null(result);
    json_array_foreach(json_object_get(result, "rows"), i, row)
    {
        printf("# figure %s, seed 20, %d trains of 8 a level: Pd 0.9 at 0.1 false trains/h %.2f dB below the "
               "single-pulse ideal at 1/h (goal 1.5)\n",
               json_string_value(json_object_get(row, "class")),
               (int)json_integer_value(json_object_get(row, "trials")),
               json_number_value(json_object_get(row, "gain_db")));
        assert_true(json_is_real(json_object_get(row, "gain_db")));
        /* 0.6 dB for the spread of 10 trials a level. */
        assert_true(json_real_value(json_object_get(row, "gain_db")) >= 1.5 - 0.6);
    }
    json_decref(result);
}

static int load(void **state)
{
    (void)state;
    return test_load_catalogue(&catalogue) ? 0 : -1;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_tail_is_fitted),
        cmocka_unit_test(single_pulses_are_found_near_the_ideal),
        cmocka_unit_test(trains_are_found_below_single_pulses),
    };
    return cmocka_run_group_tests_name("pulse detection", tests, load, NULL);
}
