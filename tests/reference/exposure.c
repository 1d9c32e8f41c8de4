/* Weighting and exposure against numpy and scipy on the same numbers (tests/support/exposure_check.py): the
 * formulas written down a second time, sums over single impulses instead of buckets, integrals instead of
 * sums. */
#include "support/test.h"

#include "base/random.h"
#include "level/exposure.h"
#include <math.h>
#include <stdlib.h>

#define N_SOUNDS 6000
#define N_BANDS 41 /* to 100 kHz */
#define N_STARTS 6
#define SPEED_M_S 1.5

static void write_file(const char *name, const void *data, size_t bytes)
{
    char path[600];
    snprintf(path, sizeof path, "%s/exposure-%s", test_build(), name);
    FILE *file = fopen(path, "wb");
    assert_non_null(file);
    assert_int_equal(fwrite(data, 1, bytes, file), bytes);
    assert_int_equal(fclose(file), 0);
}

static void check(const char *what)
{
    char command[1024];
    snprintf(command, sizeof command, "/usr/bin/python3 tests/support/exposure_check.py %s '%s/exposure-'",
             what, test_build());
    fflush(stdout);
    assert_int_equal(system(command), 0);
}

/* Every row: its parameters, W at 200 frequencies from 10 Hz to 160 kHz, and the weight of all bands both
 * ways. */
static void weighting(void **state)
{
    (void)state;
    enum { COLUMNS = 5 + 200 + 2 * LEVEL_MAX_BANDS };
    static double rows[64][COLUMNS];
    uint32_t n = 0;
    for (; weighting_at(n); n++) {
        const struct weighting *w = weighting_at(n);
        const double parameters[5] = {w->a, w->b, w->f1_hz, w->f2_hz, w->c_db};
        memcpy(rows[n], parameters, sizeof parameters);
        for (int f = 0; f < 200; f++)
            rows[n][5 + f] = weighting_db(w, 10 * pow(16000, f / 199.0));
        for (int b = 0; b < LEVEL_MAX_BANDS; b++) {
            rows[n][205 + b] = weighting_band_db(w, LEVEL_FIRST_BAND + b, BAND_WEIGHTING_CENTRE);
            rows[n][205 + LEVEL_MAX_BANDS + b] =
                weighting_band_db(w, LEVEL_FIRST_BAND + b, BAND_WEIGHTING_ACROSS);
        }
    }
    write_file("output", rows, n * sizeof rows[0]);
    check("weighting");
}

/* 14 lg r and 0.02 dB/km at 1 kHz, growing as f^1.5. */
static void loss(void *context, double hz, double from_m, double to_m, double *out_db, double *out_spread_db)
{
    (void)context;
    *out_db = 14 * log10(to_m / from_m) + 2e-5 * pow(hz / 1000, 1.5) * (to_m - from_m);
    *out_spread_db = 0;
}

static struct exposure *create(const struct criterion *criteria, uint32_t n)
{
    struct exposure_setup setup = {.n_criteria = n,
                                   .criteria = criteria,
                                   .how = BAND_WEIGHTING_ACROSS,
                                   .reference_m = 750,
                                   .loss = {.between = loss}};
    struct exposure *exposure = NULL;
    assert_int_equal(exposure_create(&setup, &exposure), STATUS_OK);
    return exposure;
}

/* Three hours of blows, irregular in time and level, growing over the first 20 minutes; heard from 600 to
 * 1100 m. */
static void give_sounds(struct exposure *exposure)
{
    static double rows[N_SOUNDS][3 + N_BANDS];
    struct random random;
    random_reset(&random, 77);
    double time_s = 500;
    for (int i = 0; i < N_SOUNDS; i++) {
        time_s += 1 + 1.6 * random_uniform(&random) + (i == 2500 ? 1800 : 0);
        double growth_db = fmin(0, (time_s - 500 - 1200) / 100);
        struct exposure_sound sound = {.time_ns = (int64_t)(time_s * 1e9),
                                       .range_m = 850 + 250 * sin(i / 500.0),
                                       .sel_db = 172 + growth_db + 1.5 * random_normal(&random),
                                       .n_bands = N_BANDS};
        for (int b = 0; b < N_BANDS; b++) {
            double lg_hz = 3 + (LEVEL_FIRST_BAND + b) / 10.0;
            sound.band_sel_db[b] = sound.sel_db - 9 - 14 * fabs(lg_hz - 2.2) + random_normal(&random);
            rows[i][3 + b] = sound.band_sel_db[b];
        }
        rows[i][0] = time_s;
        rows[i][1] = sound.range_m;
        rows[i][2] = sound.sel_db;
        assert_int_equal(exposure_push(exposure, &sound), STATUS_OK);
    }
    write_file("input", rows, sizeof rows);
}

/* Levels of receivers that stay and flee, and the start range that just reaches each criterion. */
static void fleeing(void **state)
{
    (void)state;
    static const char *const names[] = {"", "NMFS 2018 LF", "Southall 2019 VHF", "NMFS 2024 VHF",
                                        "NMFS 2024 PW"};
    static const double values_db[] = {195, 185, 155, 159, 178},
                        starts_m[N_STARTS] = {50, 200, 750, 3000, 9000, 40000};
    struct criterion criteria[5];
    static double out[5][1 + 5 + 2 + 2 * N_STARTS + 2];
    for (int i = 0; i < 5; i++) {
        criteria[i] = (struct criterion){.name = "reference",
                                         .metric = METRIC_SEL_CUMULATIVE,
                                         .effect = EFFECT_INJURY,
                                         .window = ACCUMULATE_24_H,
                                         .value = values_db[i],
                                         .quiet_db = NAN,
                                         .limit_range_m = NAN,
                                         .basis = {MARK_READ, "a test"}};
        if (*names[i])
            assert_int_equal(weighting_from_name(names[i], &criteria[i].weighting), STATUS_OK);
    }
    struct exposure *exposure = create(criteria, 5);
    give_sounds(exposure);
    for (uint32_t i = 0; i < 5; i++) {
        const struct weighting *w = criteria[i].weighting;
        const double parameters[6] = {w ? 1 : 0,        w ? w->a : 0,     w ? w->b : 0,
                                      w ? w->f1_hz : 0, w ? w->f2_hz : 0, w ? w->c_db : 0};
        memcpy(out[i], parameters, sizeof parameters);
        struct exposure_state now;
        struct exposure_level level;
        struct exposure_distance distance;
        assert_int_equal(exposure_get(exposure, i, 0, &now), STATUS_OK);
        out[i][6] = values_db[i];
        out[i][7] = now.level_db;
        for (int k = 0; k < N_STARTS; k++)
            for (int flees = 0; flees < 2; flees++) {
                assert_int_equal(exposure_get_at(exposure, i, starts_m[k], flees ? SPEED_M_S : 0, 0, &level),
                                 STATUS_OK);
                out[i][8 + 2 * k + flees] = level.level_db;
            }
        for (int flees = 0; flees < 2; flees++) {
            assert_int_equal(exposure_get_distance(exposure, i, flees ? SPEED_M_S : 0, 0, &distance),
                             STATUS_OK);
            out[i][8 + 2 * N_STARTS + flees] = distance.distance_m;
        }
    }
    exposure_destroy(exposure);
    write_file("output", out, sizeof out);
    check("fleeing");
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(weighting), cmocka_unit_test(fleeing)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
