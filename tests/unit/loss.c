/* lib/sea/loss against closed forms worked out apart from it. Levels within 0.05 dB are wanted, ranges within
 * 0.01 %; the laws keep four decimals. */
#include "support/test.h"

#include "sea/loss.h"
#include <math.h>

static struct loss power(double n_db, double absorption_db_km)
{
    return (struct loss){.law = LOSS_POWER, .n_db = n_db, .absorption_db_m = absorption_db_km / 1e3};
}

static struct loss damped(double damping_db_km)
{
    return (struct loss){.law = LOSS_DAMPED, .damping_db_m = damping_db_km / 1e3};
}

/* 20, 15 and 10 lg r, and spherical to 500 m then cylindrical. */
static void spreading_follows_its_law(void **state)
{
    (void)state;
    static const double want[][5] = {
        {1, 0, 0, 0, 0},
        {10, 20, 15, 10, 20},
        {50, 33.9794, 25.4846, 16.9897, 33.9794},
        {100, 40, 30, 20, 40},
        {500, 53.9794, 40.4846, 26.9897, 53.9794},
        {750, 57.5012, 43.1259, 28.7506, 55.7403},
        {1000, 60, 45, 30, 56.9897},
        {5000, 73.9794, 55.4846, 36.9897, 63.9794},
        {10000, 80, 60, 40, 66.9897},
        {30000, 89.5424, 67.1568, 44.7712, 71.7609},
    };
    struct loss twenty = power(20, 0), fifteen = power(15, 0), ten = power(10, 0);
    struct loss transition = {.law = LOSS_TRANSITION, .transition_m = 500};
    for (size_t i = 0; i < sizeof want / sizeof want[0]; i++) {
        assert_near(loss_db(&twenty, want[i][0]), want[i][1], 5.1e-5);
        assert_near(loss_db(&fifteen, want[i][0]), want[i][2], 5.1e-5);
        assert_near(loss_db(&ten, want[i][0]), want[i][3], 5.1e-5);
        assert_near(loss_db(&transition, want[i][0]), want[i][4], 5.1e-5);
        assert_near(loss_between_db(&twenty, 10, want[i][0]), want[i][1] - 20, 5.1e-5);
    }
}

/* R = R0 10^((L - T) / N). */
static void isopleths_have_their_closed_form(void **state)
{
    (void)state;
    static const double want[][5] = {
        /* level, at, threshold, N, range */
        {180, 10, 160, 15, 215.4435}, {180, 10, 160, 20, 100},         {165, 10, 120, 15, 10000},
        {190, 10, 160, 15, 1000},     {170, 750, 160, 15, 3481.1916},  {163, 750, 160, 15, 1188.6699},
        {200, 10, 183, 15, 135.9356}, {180, 750, 160, 15, 16158.2602}, {165, 750, 160, 15, 1615.8260},
    };
    for (size_t i = 0; i < sizeof want / sizeof want[0]; i++) {
        struct loss law = power(want[i][3], 0);
        double r;
        assert_int_equal(loss_range_m(&law, want[i][0], want[i][1], want[i][2], &r), STATUS_OK);
        assert_near(r / want[i][4], 1, 1e-6);
    }
}

/* SL - N lg r - a r = T has no closed form; these were found by another bisection. */
static void absorption_is_solved_for(void **state)
{
    (void)state;
    static const double want[][5] = {
        /* source, N, dB/km, threshold, range */
        {200, 15, 0.06, 120, 92177.3173}, {220, 20, 1, 140, 5381.6657},   {191, 20, 40, 100, 818.4926},
        {178, 20, 40, 100, 571.4941},     {240, 15, 0, 160, 215443.4690},
    };
    for (size_t i = 0; i < sizeof want / sizeof want[0]; i++) {
        struct loss law = power(want[i][1], want[i][2]);
        double r, again;
        assert_int_equal(loss_source_range_m(&law, want[i][0], want[i][3], &r), STATUS_OK);
        assert_near(r / want[i][4], 1, 1e-6);
        assert_near(want[i][0] - loss_db(&law, r), want[i][3], 1e-6);
        assert_int_equal(loss_range_m(&law, want[i][0] - loss_db(&law, 40), 40, want[i][3], &again),
                         STATUS_OK);
        assert_near(again / r, 1, 1e-8);
    }
}

/* A threshold above the level gives a range nearer than the measurement, by either way of solving. */
static void a_threshold_above_the_level_lies_nearer(void **state)
{
    (void)state;
    struct loss laws[] = {
        power(15, 0),
        power(15, 1),
        damped(1.6),
        {.law = LOSS_TRANSITION, .transition_m = 500},
        {.law = LOSS_ENERGY_FLUX, .depth_m = 30, .critical_rad = 0.4887, .eta_np_rad = 0.3}};
    for (size_t i = 0; i < sizeof laws / sizeof laws[0]; i++) {
        double r = -1;
        assert_int_equal(loss_range_m(&laws[i], 160, 750, 170, &r), STATUS_OK);
        assert_true(r > 0 && r < 750);
        assert_near(loss_between_db(&laws[i], 750, r), -10, 1e-6);
        assert_int_equal(loss_range_m(&laws[i], 160, 750, 160, &r), STATUS_OK);
        assert_near(r / 750, 1, 1e-8);
    }
    double r;
    assert_int_equal(loss_range_m(&laws[0], 160, 750, 170, &r), STATUS_OK);
    assert_near(r, 750 * pow(10, -10.0 / 15), 1e-6);
}

/* Levels of a pile at ranges, 180 dB at 750 m, for depth, grazing angle and reflection; and its isopleths. */
static void a_pile_falls_by_damped_cylindrical_spreading(void **state)
{
    (void)state;
    static const double range_m[] = {100, 1500, 3000, 5000, 10000};
    static const double want[][8] = {
        {20, 0.9529, 3.2008, 190.8312, 174.5891, 166.7775, 158.1573, 139.1428},
        {30, 0.9529, 2.1339, 190.1376, 175.3893, 169.1781, 162.6919, 149.0121},
        {40, 0.9529, 1.6004, 189.7909, 175.7894, 170.3785, 164.9591, 153.9467},
        {40, 0.7000, 11.8396, 196.4463, 168.1100, 147.3404, 121.4427, 59.2346},
    };
    for (size_t i = 0; i < sizeof want / sizeof want[0]; i++) {
        double damping = loss_damping_db_m(want[i][0], 17 * M_PI / 180, want[i][1]);
        /* four digits of 0.9529 leave 1.1e-3 of its logarithm open */
        assert_near(1e3 * damping / want[i][2], 1, want[i][1] == 0.7 ? 1e-5 : 1.1e-3);
        struct loss law = damped(want[i][2]);
        for (int k = 0; k < 5; k++)
            assert_near(180 - loss_between_db(&law, 750, range_m[k]), want[i][3 + k], 6e-4);
    }
    static const double isopleth[][4] = {{180, 1.6, 160, 7135.3046},
                                         {180, 3.2, 160, 4552.5272},
                                         {170, 1.6, 160, 3125.7066},
                                         {165, 1.6, 160, 1682.2757}};
    for (size_t i = 0; i < sizeof isopleth / sizeof isopleth[0]; i++) {
        struct loss law = damped(isopleth[i][1]);
        double r;
        assert_int_equal(loss_range_m(&law, isopleth[i][0], 750, isopleth[i][2], &r), STATUS_OK);
        assert_near(r / isopleth[i][3], 1, 1e-6);
    }
    assert_near(loss_cone_rad(1500, 5130) * 180 / M_PI, 17.002, 5e-4);
}

/* Depth 30 m, eta 0.3 Np/rad, critical angle 28 degrees: Weston's flux and its limits. */
static void energy_flux_has_its_limits(void **state)
{
    (void)state;
    static const double want[][4] = {/* range, cylindrical, mode stripping, all */
                                     {100, 34.8706, 32.2855, 35.2054},   {300, 39.6418, 39.4423, 40.5846},
                                     {1000, 44.8706, 47.2855, 47.4126},  {3000, 49.6418, 54.4423, 54.4429},
                                     {10000, 54.8706, 62.2855, 62.2855}, {30000, 59.6418, 69.4423, 69.4423}};
    struct loss law = {
        .law = LOSS_ENERGY_FLUX, .depth_m = 30, .critical_rad = 28 * M_PI / 180, .eta_np_rad = 0.3};
    struct loss hard = law;
    hard.eta_np_rad = 0;
    for (size_t i = 0; i < sizeof want / sizeof want[0]; i++) {
        assert_near(loss_db(&law, want[i][0]), want[i][3], 5.1e-5);
        assert_near(loss_db(&hard, want[i][0]), want[i][1], 5.1e-5);
    }
    assert_near(loss_db(&law, 1e4), want[4][2], 1e-3);
    assert_near(loss_db(&law, 10), 20, 1e-9); /* spherical near the source */
    /* Where the limits meet: H / (2 theta_c), where spherical spreading ends, and pi H / (4 eta theta_c^2).
     */
    assert_near(loss_db(&hard, 30.694) - 20 * log10(30.694), 0, 1e-3);
    assert_near(loss_db(&hard, 30.6) - 20 * log10(30.6), 0, 1e-9);
    assert_true(loss_db(&hard, 30.8) < 20 * log10(30.8));
    assert_near(loss_db(&hard, 328.866), 15 * log10(328.866) + 5 * log10(0.3 * 30 / M_PI), 1e-4);
    double last = loss_db(&law, 1);
    for (double r = 1; r < 1e5; r *= 1.01) {
        assert_true(loss_db(&law, r) >= last);
        last = loss_db(&law, r);
    }
}

static void bad_input_is_refused(void **state)
{
    (void)state;
    struct loss law = power(15, 0);
    double r = 7;
    assert_int_equal(loss_range_m(&law, 160, 0, 150, &r), STATUS_OUT_OF_RANGE);
    assert_int_equal(loss_range_m(&law, NAN, 750, 150, &r), STATUS_OUT_OF_RANGE);
    assert_int_equal(loss_range_m(&law, 160, INFINITY, 150, &r), STATUS_OUT_OF_RANGE);
    struct loss pile = damped(1.6), flat = power(0, 0), gain = power(15, -1);
    assert_int_equal(loss_source_range_m(&pile, 220, 160, &r), STATUS_OUT_OF_RANGE);
    assert_int_equal(loss_check(&flat), STATUS_OUT_OF_RANGE);
    assert_int_equal(loss_check(&gain), STATUS_OUT_OF_RANGE);
    assert_true(r == 7);
    assert_int_equal(loss_range_m(&law, 1000, 750, 0, &r), STATUS_OK);
    assert_true(isinf(r));
    assert_int_equal(loss_range_m(&law, 0, 750, 1000, &r), STATUS_OK);
    assert_true(r == 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(spreading_follows_its_law),
        cmocka_unit_test(isopleths_have_their_closed_form),
        cmocka_unit_test(absorption_is_solved_for),
        cmocka_unit_test(a_threshold_above_the_level_lies_nearer),
        cmocka_unit_test(a_pile_falls_by_damped_cylindrical_spreading),
        cmocka_unit_test(energy_flux_has_its_limits),
        cmocka_unit_test(bad_input_is_refused),
    };
    return cmocka_run_group_tests_name("loss", tests, NULL, NULL);
}
