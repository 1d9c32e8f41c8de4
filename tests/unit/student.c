/* lib/base/student against the table of the t distribution and closed forms. */
#include "support/test.h"

#include "base/student.h"
#include <math.h>

/* Percentage points of the t distribution (Pearson and Hartley, Biometrika Tables for Statisticians, vol. 1,
 * table 12; three decimals). */
static void quantiles_agree_with_the_table(void **state)
{
    (void)state;
    static const double want[][3] = {/* dof, 0.95, 0.975 */
                                     {1, 6.314, 12.706},  {2, 2.920, 4.303},       {3, 2.353, 3.182},
                                     {5, 2.015, 2.571},   {10, 1.812, 2.228},      {30, 1.697, 2.042},
                                     {120, 1.658, 1.980}, {INFINITY, 1.645, 1.960}};
    for (size_t i = 0; i < sizeof want / sizeof want[0]; i++) {
        assert_near(student_quantile(0.95, want[i][0]), want[i][1], 5.1e-4);
        assert_near(student_quantile(0.975, want[i][0]), want[i][2], 5.1e-4);
        assert_near(student_quantile(0.05, want[i][0]), -want[i][1], 5.1e-4);
    }
}

/* dof 1: tan(pi (p - 1/2)); dof 2: (2 p - 1) / sqrt(2 p (1 - p)). */
static void quantiles_have_closed_forms(void **state)
{
    (void)state;
    for (double p = 0.001; p < 1; p += 0.0371) {
        assert_near(student_quantile(p, 1), tan(M_PI * (p - 0.5)), 1e-8 * (1 + fabs(tan(M_PI * (p - 0.5)))));
        assert_near(student_quantile(p, 2), (2 * p - 1) / sqrt(2 * p * (1 - p)), 1e-8);
        for (double dof = 0.7; dof < 1e6; dof *= 5.3)
            assert_near(student_probability(student_quantile(p, dof), dof), p, 1e-9);
    }
    assert_near(student_quantile(0.95, 9.9e6), student_quantile(0.95, 1.1e7), 1e-6);
}

static void bad_arguments_give_no_number(void **state)
{
    (void)state;
    assert_true(isnan(student_quantile(0, 5)) && isnan(student_quantile(1, 5)));
    assert_true(isnan(student_quantile(0.5, 0)) && isnan(student_quantile(NAN, 5)));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(quantiles_agree_with_the_table),
        cmocka_unit_test(quantiles_have_closed_forms),
        cmocka_unit_test(bad_arguments_give_no_number),
    };
    return cmocka_run_group_tests_name("student", tests, NULL, NULL);
}
