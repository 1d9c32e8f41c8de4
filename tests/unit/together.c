/* lib/level/together by closed forms: N lg r without absorption, so that ranges have one. */
#include "support/test.h"

#include "base/time.h"
#include "level/together.h"
#include <math.h>
#include <stdlib.h>
#include <time.h>

#define LAW_N_DB 15.0
#define BAND 10 /* 100 Hz, counted from 10 Hz */

static struct criterion criterion(enum criterion_metric metric, double value)
{
    struct criterion one = {.effect = EFFECT_INJURY,
                            .sound = SOUND_ANY,
                            .metric = metric,
                            .value = value,
                            .quiet_db = NAN,
                            .limit_range_m = NAN,
                            .basis = {MARK_READ, "a test"}};
    snprintf(one.name, sizeof one.name, "one");
    if (metric == METRIC_SEL_CUMULATIVE)
        one.window = ACCUMULATE_JOB;
    if (metric == METRIC_SEL_SINGLE)
        one.sound = SOUND_IMPULSIVE;
    if (metric == METRIC_SPL)
        one.average = AVERAGE_1_S;
    return one;
}

static const struct exposure_loss loss = {.n_db = LAW_N_DB};

static struct exposure *make_exposure(const struct criterion *criteria, enum criterion_sound sound)
{
    struct exposure *exposure = NULL;
    const struct exposure_setup setup = {
        .n_criteria = 1, .criteria = criteria, .sound = sound, .reference_m = 750, .loss = loss};
    assert_int_equal(exposure_create(&setup, &exposure), STATUS_OK);
    return exposure;
}

/* Sounds of one decidecade heard at a range, one a second. */
static void push(struct exposure *exposure, int n, double level_db, double range_m)
{
    for (int i = 0; i < n; i++) {
        struct exposure_sound sound = {.time_ns = i * TIME_NS_PER_S,
                                       .seconds = 1,
                                       .range_m = range_m,
                                       .sel_db = level_db,
                                       .spl_db = level_db,
                                       .peak_db = NAN,
                                       .peak_to_peak_db = NAN,
                                       .positive_impulse_pa_s = NAN,
                                       .n_bands = BAND + 1};
        for (int b = 0; b <= BAND; b++)
            sound.band_sel_db[b] = b == BAND ? level_db : -INFINITY;
        assert_int_equal(exposure_push(exposure, &sound), STATUS_OK);
    }
}

static struct together_other other(double ahead_m, double starboard_m, double level_db, double at_m)
{
    struct together_other one = {.ahead_m = ahead_m,
                                 .starboard_m = starboard_m,
                                 .sound = SOUND_CONTINUOUS,
                                 .at_m = at_m,
                                 .rate_per_s = 1,
                                 .level_db = level_db};
    for (int b = 0; b < LEVEL_MAX_BANDS; b++)
        one.band_db[b] = b == BAND ? level_db : -INFINITY;
    return one;
}

static struct together_reach reach(struct exposure *exposure, const struct criterion *one,
                                   const struct together_other *others, uint32_t n, int64_t now_ns)
{
    struct together *together = NULL;
    struct together_reach out;
    const struct together_setup setup = {.n_others = n, .others = others, .loss = loss, .inner_m = 1};
    assert_int_equal(together_create(&setup, &together), STATUS_OK);
    assert_int_equal(together_get(together, exposure, 0, one, now_ns, &out), STATUS_OK);
    together_destroy(together);
    return out;
}

/* R = R0 10^((L - T) / N); n equal sources at one place add 10 lg n: R n^(10 / N). 1e-3: the distances' own
 * bisection ends at 3e-6. */
static void sources_at_one_place_add_ten_lg_n(void **state)
{
    (void)state;
    struct criterion one = criterion(METRIC_SPL, 120);
    struct exposure *exposure = make_exposure(&one, SOUND_CONTINUOUS);
    struct together_other others[7];
    push(exposure, 3, 130, 750);
    double alone_m = 750 * pow(10, 10 / LAW_N_DB);
    struct exposure_distance distance;
    assert_int_equal(exposure_get_distance(exposure, 0, 0, 3 * TIME_NS_PER_S, &distance), STATUS_OK);
    assert_near(distance.distance_m / alone_m, 1, 1e-5);
    for (uint32_t n = 1; n <= 7; n++) {
        others[n - 1] = other(0, 0, 130, 750);
        struct together_reach out = reach(exposure, &one, others, n, 3 * TIME_NS_PER_S);
        assert_near(out.distance_m / (alone_m * pow(n + 1, 10 / LAW_N_DB)), 1, 1e-6);
        assert_near(out.middle_m / out.distance_m, 1, 1e-9);
        assert_int_equal(out.islands, 1);
    }
    /* silent ones, next to nothing: ours alone */
    others[0] = other(0, 0, 0, 1);
    assert_near(reach(exposure, &one, others, 1, 3 * TIME_NS_PER_S).distance_m / alone_m, 1, 1e-5);
    exposure_destroy(exposure);
}

/* On the line through both, beyond the second (at d ahead) the farthest point R has
 * S (R^-1.5 + (R - d)^-1.5) = T, solved here by bisection; abeam of a pair far away both add 3.0103 dB. */
static void two_sources_reach_farther_than_one(void **state)
{
    (void)state;
    const double d = 600;
    struct criterion one = criterion(METRIC_SPL, 120);
    struct exposure *exposure = make_exposure(&one, SOUND_CONTINUOUS);
    push(exposure, 3, 130, 750);
    double source = pow(10, 13) * pow(750, 1.5), low = d + 1, high = 1e6;
    for (int i = 0; i < 200; i++) {
        double middle = 0.5 * (low + high);
        if (source * (pow(middle, -1.5) + pow(middle - d, -1.5)) >= pow(10, 12))
            low = middle;
        else
            high = middle;
    }
    /* to starboard: the bearing is 90 from ahead */
    struct together_other another = other(0, d, 130, 750);
    struct together_reach out = reach(exposure, &one, &another, 1, 3 * TIME_NS_PER_S);
    printf("# figure two sources 600 m apart: %.2f m from ours, by the equation %.2f m\n", out.distance_m,
           low);
    assert_near(out.distance_m / low, 1, 1e-6);
    assert_near(out.bearing_deg, 90, 0.01);
    assert_near(out.middle_m, low - d / 2, 0.01);
    assert_near(fabs(fabs(out.middle_bearing_deg - 180) - 90), 0, 0.1); /* either way: they are equal */
    assert_int_equal(out.islands, 1);
    assert_near(out.ours_m, out.distance_m, 1e-6);
    exposure_destroy(exposure);
}

/* Two zones of 100 m, 5 km apart: two islands; what our own zone is asked for is ours alone. */
static void far_apart_they_are_islands(void **state)
{
    (void)state;
    struct criterion one = criterion(METRIC_SPL, 150);
    struct exposure *exposure = make_exposure(&one, SOUND_CONTINUOUS);
    push(exposure, 3, 150, 100);
    struct together_other another = other(-5000, 0, 150, 100);
    struct together_reach out = reach(exposure, &one, &another, 1, 3 * TIME_NS_PER_S);
    assert_int_equal(out.islands, 2);
    assert_near(out.distance_m, 5100, 1); /* the other's 100 m, and 0.01 dB of ours */
    assert_near(out.bearing_deg, 180, 0.01);
    assert_near(out.ours_m, 100, 1e-3);
    another.ahead_m = -150; /* 100 m from each: one */
    out = reach(exposure, &one, &another, 1, 3 * TIME_NS_PER_S);
    assert_int_equal(out.islands, 1);
    assert_true(out.ours_m == out.distance_m);
    exposure_destroy(exposure);
}

/* 600 blows of 170 dB at 750 m in 599 s, and a second hammer of one a second, as loud, at the same place:
 * 1,199 in the window add 10 lg 1199 = 30.7882 dB. A continuous source with an SPL equal to that SEL adds as
 * much. Of one impulse alone, the two are taken together: + 3.0103 dB. Peaks do not add. */
static void each_metric_takes_the_other_in_its_way(void **state)
{
    (void)state;
    struct criterion one = criterion(METRIC_SEL_CUMULATIVE, 183);
    struct exposure *exposure = make_exposure(&one, SOUND_IMPULSIVE);
    struct together_other hammer = other(0, 0, 170, 750);
    int64_t now_ns = 599 * TIME_NS_PER_S;
    push(exposure, 600, 170, 750);
    double wanted_m = 750 * pow(10, (170 + 10 * log10(600 + 599) - 183) / LAW_N_DB);
    assert_near(reach(exposure, &one, &hammer, 1, now_ns).distance_m / wanted_m, 1, 1e-5);
    hammer.sound = SOUND_IMPULSIVE;
    assert_near(reach(exposure, &one, &hammer, 1, now_ns).distance_m / wanted_m, 1, 1e-5);
    hammer.rate_per_s = 2;
    wanted_m = 750 * pow(10, (170 + 10 * log10(600 + 1198) - 183) / LAW_N_DB);
    assert_near(reach(exposure, &one, &hammer, 1, now_ns).distance_m / wanted_m, 1, 1e-5);
    exposure_destroy(exposure);

    one = criterion(METRIC_SEL_SINGLE, 160);
    exposure = make_exposure(&one, SOUND_IMPULSIVE);
    push(exposure, 5, 170, 750);
    wanted_m = 750 * pow(10, (10 + 10 * log10(2)) / LAW_N_DB);
    assert_near(reach(exposure, &one, &hammer, 1, now_ns).distance_m / wanted_m, 1, 1e-5);
    exposure_destroy(exposure);

    one = criterion(METRIC_PEAK, 160);
    exposure = make_exposure(&one, SOUND_IMPULSIVE);
    push(exposure, 5, 170, 750);
    struct together *together = NULL;
    struct together_reach out = {.distance_m = 7};
    const struct together_setup setup = {.n_others = 1, .others = &hammer, .loss = loss, .inner_m = 1};
    assert_int_equal(together_create(&setup, &together), STATUS_OK);
    assert_int_equal(together_get(together, exposure, 0, &one, now_ns, &out), STATUS_NOT_FOUND);
    assert_true(out.distance_m == 7);
    together_destroy(together);
    exposure_destroy(exposure);
}

/* The interval is that of the levels where nothing else is unsure: +- 1.6449 x 3 dB for both. */
static void the_interval_is_the_levels(void **state)
{
    (void)state;
    struct criterion one = criterion(METRIC_SPL, 120);
    struct exposure *exposure = NULL;
    const struct exposure_setup setup = {.n_criteria = 1,
                                         .criteria = &one,
                                         .sound = SOUND_CONTINUOUS,
                                         .reference_m = 750,
                                         .level_spread_db = 3,
                                         .loss = loss};
    assert_int_equal(exposure_create(&setup, &exposure), STATUS_OK);
    push(exposure, 3, 130, 750);
    struct together_other another = other(0, 0, 130, 750);
    another.spread_db = 3;
    struct together_reach out = reach(exposure, &one, &another, 1, 3 * TIME_NS_PER_S);
    assert_near(out.high_m / out.distance_m / pow(10, 1.6448536 * 3 / LAW_N_DB), 1, 1e-6);
    assert_near(out.distance_m / out.low_m / pow(10, 1.6448536 * 3 / LAW_N_DB), 1, 1e-6);
    exposure_destroy(exposure);
}

/* Time of one criterion with 1, 3 and 8 broadband others around us, the worst for the mesh: no bound
 * asserted, machines are shared. */
static void what_it_costs(void **state)
{
    (void)state;
    struct criterion one = criterion(METRIC_SEL_CUMULATIVE, 183);
    struct exposure *exposure = make_exposure(&one, SOUND_IMPULSIVE);
    push(exposure, 600, 165, 750);
    for (uint32_t n = 1; n <= 8; n = n == 1 ? 3 : n + 5) {
        struct together_other others[8];
        struct together *together = NULL;
        struct together_reach out;
        for (uint32_t i = 0; i < n; i++) {
            others[i] = other(2000 * cos(i), 2000 * sin(i), 150, 1);
            for (int b = 0; b < 34; b++)
                others[i].band_db[b] = 135;
        }
        const struct together_setup setup = {.n_others = n, .others = others, .loss = loss, .inner_m = 20};
        assert_int_equal(together_create(&setup, &together), STATUS_OK);
        struct timespec from, to;
        clock_gettime(CLOCK_THREAD_CPUTIME_ID, &from);
        for (int i = 0; i < 20; i++)
            assert_int_equal(together_get(together, exposure, 0, &one, 599 * TIME_NS_PER_S, &out), STATUS_OK);
        clock_gettime(CLOCK_THREAD_CPUTIME_ID, &to);
        double ms = 1e3 * (double)(to.tv_sec - from.tv_sec) + 1e-6 * (double)(to.tv_nsec - from.tv_nsec);
        printf("# figure a criterion with %u others: %.2f ms a minute, %u islands, %.0f m\n", n, ms / 20,
               out.islands, out.distance_m);
        assert_true(out.islands >= 1);
        together_destroy(together);
    }
    exposure_destroy(exposure);
}

static void bad_setups_are_refused(void **state)
{
    (void)state;
    struct together_other another = other(0, 0, 130, 750);
    struct together *together = NULL;
    struct together_setup setup = {.n_others = 0, .others = &another, .loss = loss, .inner_m = 1};
    assert_int_equal(together_create(&setup, &together), STATUS_BAD_ARGUMENT);
    setup.n_others = 1;
    another.at_m = 0;
    assert_int_equal(together_create(&setup, &together), STATUS_BAD_ARGUMENT);
    another = other(NAN, 0, 130, 750);
    assert_int_equal(together_create(&setup, &together), STATUS_BAD_ARGUMENT);
    another = other(0, 0, 130, 750);
    another.sound = SOUND_IMPULSIVE;
    another.rate_per_s = 0;
    assert_int_equal(together_create(&setup, &together), STATUS_BAD_ARGUMENT);
    assert_null(together);
    together_destroy(NULL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(sources_at_one_place_add_ten_lg_n),
        cmocka_unit_test(two_sources_reach_farther_than_one),
        cmocka_unit_test(far_apart_they_are_islands),
        cmocka_unit_test(each_metric_takes_the_other_in_its_way),
        cmocka_unit_test(the_interval_is_the_levels),
        cmocka_unit_test(what_it_costs),
        cmocka_unit_test(bad_setups_are_refused),
    };
    return cmocka_run_group_tests_name("together", tests, NULL, NULL);
}
