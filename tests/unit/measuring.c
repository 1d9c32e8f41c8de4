/* lib/listen/measuring: which channel counts, and which are measured beside it. The cases are the rule
 * itself, which is the project's own; 750 m is the range of ISO 18406:2017. */
#include "support/test.h"

#include "flow.h"
#include "listen/measuring.h"
#include <math.h>

enum trust { GOOD, UNCALIBRATED, NO_ROOM };

struct ear {
    enum channel_role role;
    double range_m;
    enum trust trust;
};

static struct measuring choose(uint32_t n, const struct ear *ears)
{
    struct calibration calibration[FLOW_MAX_CHANNELS] = {0};
    double range_m[FLOW_MAX_CHANNELS] = {0};
    for (uint32_t i = 0; i < n; i++) {
        calibration[i] = (struct calibration){.known = ears[i].trust != UNCALIBRATED,
                                              .sensitivity_db = -180,
                                              .full_scale_v = 1, /* clips at 180 dB */
                                              .expected_peak_db = ears[i].trust == NO_ROOM ? 178 : NAN,
                                              .self_noise_db = NAN,
                                              .role = ears[i].role};
        range_m[i] = ears[i].range_m;
    }
    return measuring_choose(n, calibration, range_m);
}

static void nobody_measures(void **state)
{
    (void)state;
    const struct ear ears[] = {{ROLE_LISTEN, 750, GOOD}, {ROLE_LISTEN, 3000, GOOD}};
    struct measuring measuring = choose(2, ears);
    assert_int_equal(measuring.reference, 0);
    assert_int_equal(measuring.beside, 0);
    assert_false(measuring_has(&measuring, 1));
}

static void an_array_at_one_range_keeps_one_channel(void **state)
{
    (void)state;
    struct ear ears[16];
    for (int i = 0; i < 16; i++)
        ears[i] = (struct ear){ROLE_BOTH, 320 + i, GOOD};
    struct measuring measuring = choose(16, ears);
    assert_int_equal(measuring.reference, 1);
    assert_int_equal(measuring.beside, 0);
    for (int i = 0; i < 16; i++)
        ears[i].range_m = NAN; /* nobody has said where it is */
    measuring = choose(16, ears);
    assert_int_equal(measuring.reference, 1);
    assert_int_equal(measuring.beside, 0);
}

static void the_one_nearest_750_m_counts(void **state)
{
    (void)state;
    const struct ear ears[] = {{ROLE_BOTH, 750, GOOD},    {ROLE_MEASURE, 3000, GOOD},
                               {ROLE_LISTEN, 900, GOOD},  {ROLE_MEASURE, 740, GOOD},
                               {ROLE_MEASURE, 751, GOOD}, {ROLE_BOTH, 200, GOOD}};
    struct measuring measuring = choose(6, ears);
    assert_int_equal(measuring.reference, 4); /* 751 m is the same place, and later */
    assert_int_equal(measuring.beside, 1U << 1 | 1U << 5);
    assert_true(measuring_has(&measuring, 4) && measuring_has(&measuring, 2) && measuring_has(&measuring, 6));
    assert_false(measuring_has(&measuring, 1) || measuring_has(&measuring, 3) ||
                 measuring_has(&measuring, 5));
}

static void only_levels_that_can_be_trusted_are_measured_beside(void **state)
{
    (void)state;
    const struct ear ears[] = {{ROLE_MEASURE, 750, UNCALIBRATED},
                               {ROLE_MEASURE, 1500, GOOD},
                               {ROLE_MEASURE, 375, NO_ROOM},
                               {ROLE_MEASURE, NAN, GOOD},
                               {ROLE_MEASURE, 6000, GOOD}};
    struct measuring measuring = choose(5, ears);
    assert_int_equal(measuring.reference, 2);
    assert_int_equal(measuring.beside, 1U << 4);
    measuring = choose(1, ears); /* relative levels are better than none */
    assert_int_equal(measuring.reference, 1);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(nobody_measures),
        cmocka_unit_test(an_array_at_one_range_keeps_one_channel),
        cmocka_unit_test(the_one_nearest_750_m_counts),
        cmocka_unit_test(only_levels_that_can_be_trusted_are_measured_beside),
    };
    return cmocka_run_group_tests_name("measuring", tests, NULL, NULL);
}
