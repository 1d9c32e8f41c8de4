/* Propagation loss, isopleths, fits and intervals against scipy (tests/support/loss_check.py): one line a
 * case, its kind, what went in, and what lib says of it. */
#include "support/test.h"

#include "base/random.h"
#include "base/student.h"
#include "level/quieting.h"
#include "sea/fit.h"
#include "sea/loss.h"
#include <math.h>
#include <stdlib.h>

#define SEED 4243

static void write_isopleths(FILE *file, struct random *random)
{
    for (int i = 0; i < 200; i++) {
        struct loss law = {.law = (enum loss_law)(i % 4),
                           .n_db = random_between(random, 8, 25),
                           .transition_m = random_between(random, 50, 2000),
                           .damping_db_m = random_between(random, 0, 4e-3),
                           .depth_m = random_between(random, 5, 200),
                           .critical_rad = random_between(random, 0.1, 1),
                           .eta_np_rad = random_between(random, 0.05, 1),
                           .absorption_db_m = i % 3 ? random_between(random, 0, 0.04) : 0};
        double at = random_between(random, 10, 2000), level = random_between(random, 130, 200);
        double threshold = level + random_between(random, -40, 20), range;
        assert_int_equal(loss_range_m(&law, level, at, threshold, &range), STATUS_OK);
        fprintf(file, "range %d %.17g %.17g %.17g %.17g %.17g %.17g %.17g %.17g %.17g %.17g %.17g\n", i % 4,
                law.n_db, law.transition_m, law.damping_db_m, law.depth_m, law.critical_rad, law.eta_np_rad,
                law.absorption_db_m, level, at, threshold, range);
    }
}

static void write_fits(FILE *file, struct random *random)
{
    struct fit *fit = NULL;
    assert_int_equal(fit_create(400, 0, &fit), STATUS_OK);
    for (int i = 0; i < 30; i++) {
        struct fitted law;
        double n_db = random_between(random, 10, 20), scatter = random_between(random, 0.5, 2);
        fit_reset(fit);
        fprintf(file, "fit");
        for (int k = 0; k < 400; k++) {
            double r = 300 * pow(5, random_uniform(random));
            double level = 210 - n_db * log10(r) + scatter * random_normal(random);
            assert_int_equal(fit_push(fit, &(struct fit_point){1, 0, r, level}), STATUS_OK);
            fprintf(file, " %.17g %.17g", r, level);
        }
        assert_int_equal(fit_get(fit, &law), STATUS_OK);
        fprintf(file, " %.17g %.17g %.17g\n", law.n_db, law.scatter_db, n_db);
    }
    fit_destroy(fit);
}

static void write_insertion_losses(FILE *file, struct random *random)
{
    for (int i = 0; i < 30; i++) {
        struct quieting quieting;
        struct insertion_loss loss;
        int n_off = 5 + i, n_on = 40 - i;
        quieting_reset(&quieting);
        fprintf(file, "welch %d", n_off);
        for (int k = 0; k < n_off + n_on; k++) {
            struct quieting_impulse impulse = {
                k >= n_off, 170 + (k < n_off ? 1 : 3) * random_normal(random), NAN, 0, {0}};
            assert_int_equal(quieting_push(&quieting, &impulse), STATUS_OK);
            fprintf(file, " %.17g", impulse.sel_db);
        }
        assert_int_equal(quieting_get(&quieting, &loss), STATUS_OK);
        fprintf(file, " %.17g %.17g\n", loss.broadband.low_db, loss.broadband.high_db);
    }
}

static void agrees_with_scipy(void **state)
{
    (void)state;
    char path[512], command[1200];
    struct random random;
    random_reset(&random, SEED);
    snprintf(path, sizeof path, "%s/loss-cases.txt", test_build());
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    write_isopleths(file, &random);
    write_fits(file, &random);
    write_insertion_losses(file, &random);
    for (int i = 0; i < 100; i++) {
        double p = random_between(&random, 0.0005, 0.9995), dof = pow(10, random_between(&random, -0.3, 5));
        fprintf(file, "student %.17g %.17g %.17g\n", p, dof, student_quantile(p, dof));
    }
    assert_int_equal(fclose(file), 0);
    snprintf(command, sizeof command, "/usr/bin/python3 tests/support/loss_check.py '%s'", path);
    fflush(stdout);
    assert_int_equal(system(command), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(agrees_with_scipy)};
    return cmocka_run_group_tests_name("loss_reference", tests, NULL, NULL);
}
