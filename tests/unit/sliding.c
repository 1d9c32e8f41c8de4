/* Sums of slots over windows, against sums in double precision, one after the other. */
#include "call/sliding.h"
#include "base/random.h"
#include "support/test.h"
#include <math.h>

#define BEFORE 256

static double plain_sum(const float *power, uint32_t n)
{
    double sum = 0;
    for (uint32_t i = 0; i < n; i++)
        sum += (double)power[i];
    return sum;
}

static void fill(float *power, size_t n)
{
    struct random random;
    random_reset(&random, 31);
    for (size_t i = 0; i < n; i++) {
        const double x = random_normal(&random);
        power[i] = (float)(x * x);
    }
}

/* Every window up to beyond what is summed by doubling; rounding of some 100 additions. */
static void means_are_those_of_each_window(void **state)
{
    (void)state;
    float power[BEFORE + SLIDING_MOST], means[SLIDING_MOST];
    fill(power, BEFORE + SLIDING_MOST);
    for (uint32_t window = 1; window < SLIDING_MOST + 20; window++)
        for (uint32_t n = WIDE_LANES; n <= SLIDING_MOST; n += WIDE_LANES) {
            double greatest = 0;
            const float most = sliding_means(power + BEFORE, n, window, means);
            for (uint32_t i = 0; i < n; i++) {
                double wanted = plain_sum(power + BEFORE + i + 1 - window, window) / window;
                assert_true(fabs((double)means[i] - wanted) < 2e-6 * fmax(1, wanted));
                greatest = fmax(greatest, (double)means[i]);
            }
            assert_true((double)most == greatest);
        }
}

static void sums_of_any_length(void **state)
{
    (void)state;
    float power[BEFORE];
    fill(power, BEFORE);
    for (uint32_t n = 0; n <= BEFORE; n++) {
        double wanted = plain_sum(power, n);
        assert_true(fabs(short_sum(power, n) - wanted) < 1e-5 * fmax(1, wanted));
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(means_are_those_of_each_window),
                                       cmocka_unit_test(sums_of_any_length)};
    return cmocka_run_group_tests_name("sliding", tests, NULL, NULL);
}
