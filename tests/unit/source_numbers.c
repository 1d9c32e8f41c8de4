/* lib/level/source: the three numbers by closed forms, and every reason for which one is missing. */
#include "support/test.h"

#include "level/source.h"
#include <math.h>

static struct source_law fifteen(void)
{
    return (struct source_law){.metric = METRIC_SEL_SINGLE,
                               .low_hz = 10,
                               .high_hz = 20000,
                               .loss = {.law = LOSS_POWER, .n_db = 15},
                               .n_spread_db = SOURCE_ASSUMED_N_SPREAD_DB,
                               .scatter_db = 1};
}

static struct source_measurement heard(double range_m)
{
    return (struct source_measurement){.metric = METRIC_SEL_SINGLE,
                                       .level_db = 170,
                                       .low_hz = 10,
                                       .high_hz = 20000,
                                       .spread_db = 1,
                                       .range_m = range_m,
                                       .off_axis_deg = NAN,
                                       .sound_speed_m_s = 1500};
}

static const struct source_shape point = {.form = SOURCE_POINT}, pile = {.form = SOURCE_LINE},
                                 array = {
                                     .form = SOURCE_ARRAY, .aperture_m = 20, .main_hz = 100, .lobe_deg = 10};

static struct source_numbers get(const struct source_measurement *m, const struct source_shape *shape,
                                 const struct source_law *law)
{
    struct source_numbers numbers;
    assert_int_equal(source_numbers_get(m, shape, law, &numbers), STATUS_OK);
    return numbers;
}

static void missing(struct source_number number, const char *word)
{
    assert_false(number.known);
    assert_true(isnan(number.db) && isnan(number.low_db) && isnan(number.high_db));
    assert_non_null(strstr(number.reason, word));
}

/* 170 dB at 300 m: 170 - 15 lg 2.5 at 750 m, 170 + 15 lg 300 at 1 m; spreads add as squares: 1 dB of
 * calibration, 1 dB of scatter, 2.5 dB a decade of N; 1.6449 of them on either side. */
static void numbers_have_their_closed_form(void **state)
{
    (void)state;
    struct source_measurement m = heard(300);
    struct source_law law = fifteen();
    struct source_numbers n = get(&m, &point, &law);
    assert_near(n.received.db, 170, 1e-12);
    assert_near(n.received.high_db - 170, 1.6449, 1e-4);
    assert_near(n.at_750_m.db, 170 - 15 * log10(2.5), 1e-9);
    double spread = sqrt(2 + pow(2.5 * log10(2.5), 2));
    assert_near(n.at_750_m.high_db - n.at_750_m.db, 1.6449 * spread, 1e-3);
    assert_near(n.at_750_m.db - n.at_750_m.low_db, 1.6449 * spread, 1e-3);
    assert_near(n.back_calculated.db, 170 + 15 * log10(300), 1e-9);
    assert_near(n.back_calculated.high_db - n.back_calculated.db, 1.6449 * sqrt(2 + pow(2.5 * log10(300), 2)),
                2e-3);
    assert_false(n.measured_at_750_m);
    assert_string_equal(n.model, "N lg r");
    assert_string_equal(source_level_text(n.metric), "energy source level");
    assert_near(n.n_db, 15, 0);
    m.range_m = 713;
    assert_true(get(&m, &point, &law).measured_at_750_m);
    m.range_m = 712;
    assert_false(get(&m, &point, &law).measured_at_750_m);
    m.range_m = 787.4;
    assert_true(get(&m, &point, &law).measured_at_750_m);
}

static void without_a_range_only_the_received_level_stands(void **state)
{
    (void)state;
    struct source_law law = fifteen();
    const double unknown[] = {0, -3, NAN, INFINITY};
    for (int i = 0; i < 4; i++) {
        struct source_measurement m = heard(unknown[i]);
        struct source_numbers n = get(&m, &point, &law);
        assert_true(n.received.known && n.received.db == 170);
        missing(n.at_750_m, "range");
        missing(n.back_calculated, "range");
        assert_false(n.measured_at_750_m);
    }
    struct source_measurement m = heard(300);
    missing(get(&m, &point, NULL).at_750_m, "no loss law");
    m.relative = true;
    missing(get(&m, &point, &law).at_750_m, "uncalibrated");
    assert_true(get(&m, &point, &law).received.known);
}

static void a_law_stays_in_its_band(void **state)
{
    (void)state;
    struct source_law law = fifteen();
    law.low_hz = 100;
    law.high_hz = 500;
    struct source_measurement clicks = heard(300);
    clicks.low_hz = 110000;
    clicks.high_hz = 150000;
    missing(get(&clicks, &point, &law).at_750_m, "another band");
    missing(get(&clicks, &point, &law).back_calculated, "another band");
    clicks.low_hz = 100;
    missing(get(&clicks, &point, &law).at_750_m, "another band");
    clicks.high_hz = 500;
    assert_true(get(&clicks, &point, &law).at_750_m.known);
    clicks.metric = METRIC_PEAK;
    missing(get(&clicks, &point, &law).at_750_m, "another metric");
}

static void a_source_level_only_where_it_means_something(void **state)
{
    (void)state;
    struct source_law law = fifteen(), cone = fifteen();
    struct source_measurement m = heard(300);
    assert_true(get(&m, &pile, &law).at_750_m.known);
    missing(get(&m, &pile, &law).back_calculated, "line source");
    cone.loss = (struct loss){.law = LOSS_DAMPED, .damping_db_m = 1.6e-3};
    missing(get(&m, &point, &cone).back_calculated, "1 m");
    missing(get(&m, &array, &law).back_calculated, "direction");
    m.off_axis_deg = -60;
    missing(get(&m, &array, &law).back_calculated, "off the array's axis");
    m.off_axis_deg = 5;
    assert_true(get(&m, &array, &law).back_calculated.known);
    m.range_m = 26; /* the far field begins at 20^2 100 / 1500 = 26.7 m */
    missing(get(&m, &array, &law).back_calculated, "near field");
    m.range_m = 27;
    assert_true(get(&m, &array, &law).back_calculated.known);
    m.metric = law.metric = METRIC_PEAK;
    missing(get(&m, &point, &law).back_calculated, "peak");
    assert_true(get(&m, &point, &law).at_750_m.known);
    m.metric = law.metric = METRIC_SEL_CUMULATIVE;
    missing(get(&m, &point, &law).back_calculated, "sum");
    assert_true(get(&m, &point, &law).at_750_m.known);
}

/* 180 dB at 750 m, 1.6004 dB/km, 10 lg r: 175.7894 dB at 1500 m (damped cylindrical spreading worked out
 * apart). */
static void a_pile_is_normalised_by_its_own_law(void **state)
{
    (void)state;
    struct source_law law = fifteen();
    law.loss = (struct loss){.law = LOSS_DAMPED, .damping_db_m = 1.6004e-3};
    struct source_measurement m = heard(1500);
    m.level_db = 175.7894;
    struct source_numbers n = get(&m, &pile, &law);
    assert_near(n.at_750_m.db, 180, 1e-3);
    assert_true(isnan(n.n_db));
    assert_string_equal(n.model, "damped cylindrical");
}

static void a_fit_moves_levels(void **state)
{
    (void)state;
    struct fit *fit;
    struct fitted fitted;
    assert_int_equal(fit_create(200, 0, &fit), STATUS_OK);
    for (int i = 0; i < 100; i++) {
        double r = 300 * pow(5, i / 99.0);
        fit_push(fit, &(struct fit_point){1, 0, r, 220 - 18 * log10(r) + (i % 2 ? 1 : -1)});
    }
    assert_int_equal(fit_get(fit, &fitted), STATUS_OK);
    fit_destroy(fit);
    struct source_law law = source_law_of_fit(&fitted, METRIC_SEL_SINGLE, 10, 20000);
    struct source_measurement m = heard(300);
    struct source_numbers n = get(&m, &point, &law);
    double db, low, high;
    fitted_move(&fitted, 300, 170, 750, &db, &low, &high);
    assert_near(n.at_750_m.db, db, 1e-9);
    assert_near(n.at_750_m.db, 170 - 18 * log10(2.5), 0.3);
    assert_near(n.at_750_m.low_db, db - hypot(db - low, 1.6449), 1e-3);
    assert_near(n.n_db, 18, 0.3);
    assert_true(n.is_fitted && n.n_spread_db < SOURCE_ASSUMED_N_SPREAD_DB);
}

/* Clicks do not fall by the law of a pile's band; absorption is each frequency's own. */
static void a_sea_has_a_law_for_each_band(void **state)
{
    (void)state;
    struct source_sea sea = {.n_laws = 1, .laws = {fifteen()}, .n_db = 20};
    double db, spread;
    sea.laws[0].low_hz = 100;
    sea.laws[0].high_hz = 500;
    sea.laws[0].n_spread_db = 0.3;
    source_sea_between(&sea, 200, 750, 7500, &db, &spread);
    assert_near(db, 15, 1e-9);
    assert_near(spread, 0.3, 1e-9);
    source_sea_between(&sea, 130000, 750, 7500, &db, &spread);
    assert_near(db, 20, 1e-9);
    assert_near(spread, SOURCE_ASSUMED_N_SPREAD_DB, 1e-9);
    sea.has_water = true;
    sea.water = absorption_of(10, 35, 0, 8);
    source_sea_between(&sea, 130000, 750, 1750, &db, &spread);
    assert_near(db, 20 * log10(1750.0 / 750) + 41.1118, 1e-3); /* Francois and Garrison, dB/km */
    sea.has_water = false;
    sea.laws[0].is_fitted = true;
    sea.laws[0].fitted = (struct fitted){.nearest_m = 375, .farthest_m = 1500};
    source_sea_between(&sea, 200, 1500, 375, &db, &spread);
    assert_near(db, -15 * log10(4), 1e-9);
    assert_near(spread, 0.3 * log10(4), 1e-9);
    source_sea_between(&sea, 200, 750, 15000, &db, &spread); /* a decade beyond what was heard */
    assert_near(spread, hypot(0.3 * log10(20), 2.5), 1e-9);
    source_sea_between(&sea, 200, 37.5, 3.75, &db, &spread); /* all of it nearer */
    assert_near(spread, hypot(0.3, 2.5), 1e-9);
}

static void bad_input_is_refused(void **state)
{
    (void)state;
    struct source_numbers n = {.n_db = 7};
    struct source_law law = fifteen();
    struct source_measurement m = heard(300);
    m.level_db = NAN;
    assert_int_equal(source_numbers_get(&m, &point, &law, &n), STATUS_OUT_OF_RANGE);
    m = heard(300);
    m.spread_db = -1;
    assert_int_equal(source_numbers_get(&m, &point, &law, &n), STATUS_OUT_OF_RANGE);
    m = heard(300);
    law.loss.n_db = 0;
    assert_int_equal(source_numbers_get(&m, &point, &law, &n), STATUS_OUT_OF_RANGE);
    assert_true(n.n_db == 7);
    assert_near(source_range_m((double[]){0, 0, 10}, (double[]){300, 400, 10}), 500, 1e-12);
    assert_near(source_range_m((double[]){0, 0, 0}, (double[]){2, 3, 6}), 7, 1e-12);
    assert_true(isnan(source_range_m((double[]){NAN, 0, 0}, (double[]){2, 3, 6})));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(numbers_have_their_closed_form),
        cmocka_unit_test(without_a_range_only_the_received_level_stands),
        cmocka_unit_test(a_law_stays_in_its_band),
        cmocka_unit_test(a_source_level_only_where_it_means_something),
        cmocka_unit_test(a_pile_is_normalised_by_its_own_law),
        cmocka_unit_test(a_fit_moves_levels),
        cmocka_unit_test(a_sea_has_a_law_for_each_band),
        cmocka_unit_test(bad_input_is_refused),
    };
    return cmocka_run_group_tests_name("source_numbers", tests, NULL, NULL);
}
