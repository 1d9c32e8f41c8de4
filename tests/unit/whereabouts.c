/* lib/place/whereabouts: against scipy 1.10.1, scipy.stats.lognorm(s, scale=median). */
#include "support/test.h"

#include "place/whereabouts.h"
#include <math.h>

static void quantiles_agree_with_scipy(void **state)
{
    (void)state;
    static const struct {
        double median_m, spread, p, wanted_m;
    } cases[] = {
        {400, 0.2, 0.05, 287.86563372955555},    {400, 0.2, 0.5, 400},
        {400, 0.2, 0.95, 555.8148707334652},     {400, 0.2, 1e-6, 154.59049999668088},
        {400, 0.2, 0.999999, 1034.992447810501}, {1200, 0.3, 0.05, 732.6153095555967},
        {1200, 0.3, 0.95, 1965.560890166903},    {1200, 0.3, 1e-6, 288.31382099646294},
        {80, 0.5, 0.05, 35.149128394199394},     {80, 0.5, 0.95, 182.08132868114535},
        {80, 0.5, 0.999999, 861.5549078277958},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct whereabouts w = {true, cases[i].median_m, cases[i].spread};
        assert_near(whereabouts_quantile_m(&w, cases[i].p) / cases[i].wanted_m, 1, 1e-10);
    }
}

static void p_inside_agrees_with_scipy(void **state)
{
    (void)state;
    static const struct {
        double median_m, spread, radius_m, wanted;
    } cases[] = {
        {400, 0.2, 100, 2.0824223487002437e-12}, {400, 0.2, 500, 0.8677285162799573},
        {400, 0.2, 1500, 0.9999999999806249},    {1200, 0.3, 100, 6.004402961554145e-17},
        {1200, 0.3, 500, 0.0017601278886390074}, {1200, 0.3, 1500, 0.7715048412238013},
        {80, 0.5, 100, 0.6723050642884576},      {80, 0.5, 500, 0.999876409413847},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct whereabouts w = {true, cases[i].median_m, cases[i].spread};
        assert_near(whereabouts_p_inside(&w, cases[i].radius_m) / cases[i].wanted, 1, 1e-9);
    }
}

/* The two functions are each other's inverse, down to a probability of 1e-12. */
static void inside_the_quantile_is_p(void **state)
{
    (void)state;
    struct whereabouts w = {true, 700, 0.35};
    for (double p = 1e-12; p < 1; p = p < 0.5 ? p * 1.7 : 1 - (1 - p) / 1.7) {
        assert_near(whereabouts_p_inside(&w, whereabouts_quantile_m(&w, p)) / p, 1, 1e-9);
        if (1 - p < 1e-12)
            break;
    }
}

static void edges(void **state)
{
    (void)state;
    struct whereabouts unknown = {false, 300, 0.2}, w = {true, 300, 0.2}, sharp = {true, 300, 0},
                       here = {true, 0, 0.2};
    assert_true(isnan(whereabouts_quantile_m(&unknown, 0.5)));
    assert_true(isnan(whereabouts_p_inside(&unknown, INFINITY)));
    assert_true(isnan(whereabouts_quantile_m(&w, 0)));
    assert_true(isnan(whereabouts_quantile_m(&w, 1)));
    assert_true(isnan(whereabouts_quantile_m(&w, NAN)));
    assert_true(isnan(whereabouts_p_inside(&w, NAN)));
    assert_true(whereabouts_p_inside(&w, INFINITY) == 1);
    assert_true(whereabouts_p_inside(&w, 0) == 0);
    assert_true(whereabouts_p_inside(&sharp, 300) == 1);
    assert_true(whereabouts_p_inside(&sharp, 299.9) == 0);
    assert_true(whereabouts_p_inside(&here, 1) == 1);
    assert_true(whereabouts_quantile_m(&here, 0.95) == 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(quantiles_agree_with_scipy),
        cmocka_unit_test(p_inside_agrees_with_scipy),
        cmocka_unit_test(inside_the_quantile_is_p),
        cmocka_unit_test(edges),
    };
    return cmocka_run_group_tests_name("whereabouts", tests, NULL, NULL);
}
