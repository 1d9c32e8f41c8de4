/* lib/level/field by closed forms. */
#include "support/test.h"

#include "level/field.h"
#include <math.h>

static struct field_source source(double east_m, double north_m, double level_db, double at_m, double n_db)
{
    return (struct field_source){.east_m = east_m,
                                 .north_m = north_m,
                                 .level_db = level_db,
                                 .at_m = at_m,
                                 .loss = {.law = LOSS_POWER, .n_db = n_db}};
}

static struct field_zone zone(const struct field_source *sources, uint32_t n, double threshold_db)
{
    struct field_zone out;
    double east, north;
    field_middle(sources, n, &east, &north);
    assert_int_equal(field_zone_get(sources, n, east, north, threshold_db, &out), STATUS_OK);
    return out;
}

/* Two equal sources: 10 lg 2 = 3.0103 dB more on the line that is as far from both. */
static void equal_sources_add_three_decibels(void **state)
{
    (void)state;
    struct field_source two[] = {source(-200, 50, 180, 10, 15), source(200, 50, 180, 10, 15)};
    for (double north = -3000; north <= 3000; north += 117)
        assert_near(field_level_db(two, 2, 0, north) - field_level_db(two, 1, 0, north), 3.0103, 5e-5);
    two[1].level_db = -INFINITY;
    assert_near(field_level_db(two, 2, 0, 700), field_level_db(two, 1, 0, 700), 1e-12);
}

/* R = R0 10^((L - T) / N): 215.4435 m, 1188.6699 m; with absorption 818.4926 m by another bisection. */
static void one_source_has_its_isopleth(void **state)
{
    (void)state;
    struct field_source one = source(123, -45, 180, 10, 15);
    assert_near(zone(&one, 1, 160).radius_m / 215.4435, 1, 1e-6);
    one = source(123, -45, 163, 750, 15);
    assert_near(zone(&one, 1, 160).radius_m / 1188.6699, 1, 1e-6);
    one = source(0, 0, 191, 1, 20);
    one.loss.absorption_db_m = 0.04;
    one.level_db -= 0.04; /* the closed case counts absorption from 0 m, a source level from 1 m */
    assert_near(zone(&one, 1, 100).radius_m / 818.4926, 1, 1e-6);
    struct field_zone near = zone(&one, 1, 195);
    assert_true(near.radius_m == 0 && isnan(near.bearing_deg));
    assert_true(isinf(
        zone(&(struct field_source){.level_db = 400, .at_m = 1, .loss = {.law = LOSS_POWER, .n_db = 10}}, 1,
             60)
            .radius_m));
    /* measured from a place 1,000 m west of the source the zone is 1,000 m wider, towards the east */
    struct field_zone aside;
    one = source(0, 0, 180, 10, 15);
    assert_int_equal(field_zone_get(&one, 1, -1000, 0, 160, &aside), STATUS_OK);
    assert_near(aside.radius_m, 1215.4435, 1e-3);
    assert_near(aside.bearing_deg, 90, 1e-3);
}

/* Two equal sources at -d and d, spherical spreading: on their line 2 (R^2 + d^2) / (R^2 - d^2)^2 =
 * 10^(-K/10), K = level at 1 m less threshold, a quadratic in R^2; farthest there, since each source's ring
 * reaches farthest there. */
static void two_sources_reach_farthest_on_their_line(void **state)
{
    (void)state;
    double d = 400, k_db = 60, q = pow(10, -k_db / 10);
    struct field_source two[] = {source(-d, 0, 200, 1, 20), source(d, 0, 200, 1, 20)};
    struct field_zone whole = zone(two, 2, 200 - k_db);
    /* q x^2 - 2 (q d^2 + 1) x + (q d^4 - 2 d^2) = 0, x = R^2 */
    double b = q * d * d + 1, c = q * pow(d, 4) - 2 * d * d, x = (b + sqrt(b * b - q * c)) / q;
    printf("# figure two sources 800 m apart: zone %.2f m around the whole, closed form %.2f m\n",
           whole.radius_m, sqrt(x));
    assert_near(whole.radius_m / sqrt(x), 1, 1e-6);
    assert_near(fabs(fabs(whole.bearing_deg - 180) - 90), 0, 1e-2);
    struct field_source turned[] = {source(-d * sin(0.5), -d * cos(0.5), 200, 1, 20),
                                    source(d * sin(0.5), d * cos(0.5), 200, 1, 20)};
    assert_near(zone(turned, 2, 200 - k_db).radius_m / sqrt(x), 1, 1e-6);
}

/* Far from n equal sources the zone is that of one with 10 lg n more, as a far beacon network's is. */
static void a_network_is_one_source_from_afar(void **state)
{
    (void)state;
    struct field_source many[25], one = source(0, 0, 190 + 10 * log10(25), 1, 15);
    for (int i = 0; i < 25; i++)
        many[i] = source(20.0 * (i % 5 - 2), 20.0 * (i / 5 - 2), 190, 1, 15);
    assert_near(zone(many, 25, 120).radius_m / zone(&one, 1, 120).radius_m, 1, 1e-4);
    /* among them: quiet beacons reach only around themselves, the farthest at a corner */
    for (int i = 0; i < 25; i++)
        many[i] = source(2000.0 * (i % 5 - 2), 2000.0 * (i / 5 - 2), 150, 1, 20);
    struct field_zone corners = zone(many, 25, 120);
    assert_near(corners.radius_m, hypot(4000, 4000) + pow(10, 1.5), 0.1);
    assert_near(fmod(corners.bearing_deg, 90), 45, 0.01);
}

/* A beacon that reaches 2 m, 9 km from one that reaches 1 km: far less than the mesh that is looked along. */
static void a_small_far_zone_is_not_missed(void **state)
{
    (void)state;
    struct field_source two[] = {source(0, 0, 180, 1, 20),
                                 source(9000 * sin(0.3), 9000 * cos(0.3), 126.1, 1, 20)};
    struct field_zone out;
    assert_int_equal(field_zone_get(two, 2, 0, 0, 120, &out), STATUS_OK);
    assert_near(out.radius_m, 9000 + pow(10, 6.1 / 20), 0.1); /* the other adds 0.05 dB there */
    assert_near(out.bearing_deg, 0.3 * 180 / M_PI, 0.1);
}

/* A curve of the same law has the same zone: linear in lg range, so no error but rounding. One that rises, or
 * stops, is refused. */
static void a_curve_is_its_law(void **state)
{
    (void)state;
    struct field_curve curve;
    for (uint32_t i = 0; i < FIELD_CURVE_N; i++)
        curve.db[i] = 180 - 15 * log10(field_curve_range_m(i) / 10);
    struct field_source both[] = {source(-700, 300, 180, 10, 15), {.east_m = 900, .curve = &curve}};
    struct field_source laws[] = {both[0], source(900, 0, 180, 10, 15)};
    for (double threshold = 130; threshold <= 190; threshold += 7.5)
        assert_near(zone(both, 2, threshold).radius_m, zone(laws, 2, threshold).radius_m, 1e-3);
    curve.db[20] = curve.db[19] + 1;
    assert_int_equal(field_sources_check(both, 2), STATUS_OUT_OF_RANGE);
    curve.db[20] = NAN;
    assert_int_equal(field_sources_check(both, 2), STATUS_OUT_OF_RANGE);
}

/* Spherical spreading, two equal sources D apart: the line between them is lowest in its middle, where both
 * give 2 (2 / D)^2: one island while the threshold is below 6.0206 + 3.0103 dB - 20 lg D of the level at 1 m.
 * Nowhere reached: none. A third one that bridges the others makes one of three. */
static void islands_part_at_the_saddle(void **state)
{
    (void)state;
    struct field_source row[] = {source(0, 0, 200, 1, 20), source(1000, 0, 200, 1, 20),
                                 source(500, 0, 200, 1, 20)};
    uint32_t island[3];
    double saddle = 200 - 60 + 6.0206 + 3.0103;
    assert_int_equal(field_islands(row, 2, saddle - 0.01, island), 1);
    assert_int_equal(island[1], 0);
    assert_int_equal(field_islands(row, 2, saddle + 0.05, island), 2);
    assert_int_equal(island[1], 1);
    assert_int_equal(field_islands(row, 3, saddle + 0.05, island), 1);
    assert_int_equal(field_islands(row, 3, 210, island), 0);
    assert_int_equal(island[0], 3);
}

static void a_grid_is_its_points(void **state)
{
    (void)state;
    struct field_source two[] = {source(-200, 50, 180, 10, 15), source(300, -70, 170, 1, 20)};
    struct field_grid grid = {-500, -300, 100, 11, 7};
    double db[77];
    assert_int_equal(field_grid_db(two, 2, &grid, db), STATUS_OK);
    for (uint32_t i = 0; i < 77; i++)
        assert_near(db[i], field_level_db(two, 2, -500 + 100.0 * (i % 11), -300 + 100.0 * (i / 11)), 0);
    grid.step_m = 0;
    db[0] = 7;
    assert_int_equal(field_grid_db(two, 2, &grid, db), STATUS_OUT_OF_RANGE);
    assert_true(db[0] == 7);
}

static void bad_sources_are_refused(void **state)
{
    (void)state;
    struct field_source one = source(0, 0, 180, 10, 15);
    struct field_zone out = {.radius_m = 7};
    assert_int_equal(field_sources_check(&one, 0), STATUS_OUT_OF_RANGE);
    assert_int_equal(field_sources_check(&one, FIELD_MAX_SOURCES + 1), STATUS_OUT_OF_RANGE);
    one.at_m = 0;
    assert_int_equal(field_zone_get(&one, 1, 0, 0, 160, &out), STATUS_OUT_OF_RANGE);
    one = source(0, NAN, 180, 10, 15);
    assert_int_equal(field_sources_check(&one, 1), STATUS_OUT_OF_RANGE);
    one = source(0, 0, INFINITY, 10, 15);
    assert_int_equal(field_sources_check(&one, 1), STATUS_OUT_OF_RANGE);
    one = source(0, 0, 180, 10, -1);
    assert_int_equal(field_sources_check(&one, 1), STATUS_OUT_OF_RANGE);
    assert_true(out.radius_m == 7);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(equal_sources_add_three_decibels),
        cmocka_unit_test(one_source_has_its_isopleth),
        cmocka_unit_test(two_sources_reach_farthest_on_their_line),
        cmocka_unit_test(a_network_is_one_source_from_afar),
        cmocka_unit_test(a_small_far_zone_is_not_missed),
        cmocka_unit_test(a_curve_is_its_law),
        cmocka_unit_test(islands_part_at_the_saddle),
        cmocka_unit_test(a_grid_is_its_points),
        cmocka_unit_test(bad_sources_are_refused),
    };
    return cmocka_run_group_tests_name("field", tests, NULL, NULL);
}
