/* Time weighting, percentiles, energy sums and kurtosis: closed forms, and as the meter gives them. */
#include "support/test.h"

#include "base/random.h"
#include "base/units.h"
#include "level/meter.h"
#include "level/moments.h"
#include "level/percentile.h"
#include "level/time_weighting.h"
#include <math.h>
#include <stdlib.h>

#define MAX_SECONDS 64

struct rows {
    uint32_t n;
    struct found_level level[MAX_SECONDS];
};

static void keep(void *context, const struct found_level *level)
{
    struct rows *rows = context;
    assert_true(rows->n < MAX_SECONDS);
    rows->level[rows->n++] = *level;
}

static void measure(double rate, const float *x, size_t n, uint32_t chunk, bool relative, struct rows *rows)
{
    struct meter *meter;
    struct level_sink sink = {keep, rows};
    rows->n = 0;
    assert_int_equal(meter_create(rate, relative, &meter), STATUS_OK);
    for (size_t done = 0; done < n;) {
        size_t take = chunk < n - done ? chunk : n - done;
        meter_push(meter, x + done, (uint32_t)take, &sink);
        done += take;
    }
    meter_finish(meter, &sink);
    meter_destroy(meter);
}

static struct rows rows;

/* ---- closed forms of ISO 18405:2017 quantities: a sine of 1 Pa has an SPL of 10 lg(0.5 / 1e-12) = 116.9897
 * dB, a zero-to-peak level of 120 dB, and over 10 s an SEL 10 dB above its SPL. */
static void a_sine_has_its_levels(void **state)
{
    (void)state;
    enum { RATE = 48000, SECONDS = 10 };
    float *x = malloc(sizeof *x * RATE * SECONDS);
    for (int i = 0; i < RATE * SECONDS; i++)
        x[i] = (float)sin(2 * M_PI * 250 * (i + 0.3) / RATE);
    measure(RATE, x, (size_t)RATE * SECONDS, 4096, false, &rows);
    assert_int_equal(rows.n, SECONDS);
    double sum = 0;
    struct moments all = {0};
    for (uint32_t s = 0; s < rows.n; s++) {
        assert_near(rows.level[s].spl_db, 116.9897, 0.001);
        assert_near(rows.level[s].peak_db, 120.0, 0.002);
        assert_near(moments_kurtosis(&rows.level[s].moments), 1.5, 1e-4); /* of a sine */
        sum += units_power_ratio(rows.level[s].spl_db);
        moments_add(&all, &rows.level[s].moments);
    }
    assert_near(units_power_db(sum), 126.9897, 0.001);
    assert_near(moments_kurtosis(&all), 1.5, 1e-4);
    assert_near(rows.level[SECONDS - 1].fast_max_db, 116.9897, 0.05);
    assert_near(rows.level[SECONDS - 1].slow_max_db, 116.9897, 0.05);
    free(x);
}

/* Day sums: equal seconds add 10 lg N; 86,400 seconds of 120 dB make 169.3651 dB (10 lg 86400 = 49.3651). */
static void energies_add(void **state)
{
    (void)state;
    double sum = 0;
    for (int i = 0; i < 86400; i++)
        sum += units_power_ratio(120);
    assert_near(units_power_db(sum), 169.365137, 1e-5);
    static const double three[] = {150, 153, 147};
    assert_near(percentile_energy_mean_db(three, 3), 150.6651, 1e-4);
    assert_near(percentile_energy_mean_db(three, 3) + 10 * log10(3), 155.4363, 1e-4);
    assert_near(units_sum_db(units_sum_db(150, 153), 147), 155.4363, 1e-4);
}

/* The background's share: L(s + n) - L(n) dB gives the correction 10 lg(1 - 10^(-d / 10)). */
static void backgrounds_subtract(void **state)
{
    (void)state;
    static const double difference[] = {3, 4, 5, 6, 8, 10, 15, 20},
                        correction[] = {-3.0206, -2.2048, -1.6509, -1.2563,
                                        -0.7494, -0.4576, -0.1396, -0.0436};
    for (int i = 0; i < 8; i++) {
        double signal = units_power_ratio(100 + difference[i]) - units_power_ratio(100);
        assert_near(units_power_db(signal) - (100 + difference[i]), correction[i], 1e-4);
    }
}

/* One blow's SEL from the mean level over T s with n blows: LE = 10 lg(10^(Leq/10) - 10^(Lbg/10)) - 10 lg(n
 * T0 / T), T0 = 1 s (German measuring practice for offshore piles; the formula from memory). */
static void one_blow_from_a_long_mean(void **state)
{
    (void)state;
    static const double rows_of[4][5] = {{165, 130, 20, 30, 166.7595},
                                         {165, 160, 20, 30, 165.1100},
                                         {150, 140, 45, 30, 147.7815},
                                         {170, 100, 1, 1, 170.0000}};
    for (int i = 0; i < 4; i++) {
        const double *row = rows_of[i];
        double energy = (units_power_ratio(row[0]) - units_power_ratio(row[1])) * row[3] / row[2];
        assert_near(units_power_db(energy), row[4], 1e-4);
    }
}

/* 101 .. 200 dB, one a second. Type 7 of Hyndman and Fan (1996), as numpy and R's default compute it. */
static void levels_exceeded(void **state)
{
    (void)state;
    static const double percent[] = {1, 5, 10, 50, 90, 95, 99},
                        wanted[] = {199.01, 195.05, 190.10, 150.50, 110.90, 105.95, 101.99};
    double sorted[101];
    struct random random;
    random_reset(&random, 11);
    int order[100];
    for (int i = 0; i < 100; i++)
        order[i] = 101 + i;
    for (int i = 99; i > 0; i--) {
        int j = (int)(random_uniform(&random) * (i + 1)), swap = order[i];
        order[i] = order[j];
        order[j] = swap;
    }
    for (uint32_t i = 0; i < 100; i++)
        percentile_insert(sorted, i, order[i]);
    for (int i = 0; i < 7; i++)
        assert_near(percentile_exceeded_db(sorted, 100, percent[i]), wanted[i], 1e-9);
    assert_near(percentile_energy_mean_db(sorted, 100), 186.868253, 1e-5);
    percentile_insert(sorted, 100, 300);
    percentile_remove(sorted, 101, 300);
    percentile_remove(sorted, 100, 150);
    assert_near(percentile_exceeded_db(sorted, 99, 50), 151, 1e-9);
    assert_near(percentile_exceeded_db(sorted, 99, 100), 101, 1e-9);
    assert_near(percentile_exceeded_db(sorted, 99, 0), 200, 1e-9);
    assert_true(isnan(percentile_exceeded_db(sorted, 0, 50)));
    double silence[] = {-INFINITY, -INFINITY, 100};
    assert_true(percentile_exceeded_db(silence, 3, 95) == -INFINITY);
    assert_near(percentile_exceeded_db(silence, 3, 0), 100, 1e-9);
}

/* A tone burst's maximum is 10 lg(1 - exp(-Tb / tau)) above the steady level (the closed form behind the list
 * of IEC 61672-1:2013, table 4): burst lengths in ms, fast, slow, and its SEL over the steady SPL. */
static const double bursts[12][4] = {
    {1000, -0.0015, -1.9920, 0.0000},    {500, -0.0803, -4.0509, -3.0103},
    {200, -0.9794, -7.4168, -6.9897},    {100, -2.5911, -10.2153, -10.0000},
    {50, -4.8191, -13.1184, -13.0103},   {20, -8.3016, -17.0331, -16.9897},
    {10, -11.1417, -20.0217, -20.0000},  {5, -14.0660, -23.0212, -23.0103},
    {2, -17.9935, -26.9940, -26.9897},   {1, -20.9865, -30.0022, -30.0000},
    {0.5, -23.9881, -33.0114, -33.0103}, {0.25, -26.9940, -36.0211, -36.0206}};

static void bursts_have_their_maxima(void **state)
{
    (void)state;
    static const double rates[] = {48000, 44100, 96000};
    double worst_fast = 0, worst_slow = 0, worst_sel = 0;
    for (int r = 0; r < 3; r++)
        for (int b = 0; b < 12; b++) {
            const double rate = rates[r];
            size_t n = (size_t)(rate * 6), from = (size_t)(rate * 2.30037),
                   length = (size_t)lround(rate * bursts[b][0] / 1000);
            float *x = calloc(n, sizeof *x);
            for (size_t i = 0; i < length; i++) /* mean square 1 at every sample */
                x[from + i] = i % 2 ? -1 : 1;
            measure(rate, x, n, 4096, false, &rows);
            free(x);
            double fast = -INFINITY, slow = -INFINITY, exposure = 0, actual = (double)length / rate;
            for (uint32_t s = 0; s < rows.n; s++) {
                fast = fmax(fast, rows.level[s].fast_max_db - 120);
                slow = fmax(slow, rows.level[s].slow_max_db - 120);
                exposure += units_power_ratio(rows.level[s].spl_db - 120);
            }
            double whole =
                10 * log10(actual * 1000 / bursts[b][0]); /* of a burst that is not whole samples */
            worst_fast = fmax(worst_fast, fabs(fast - bursts[b][1] - whole));
            worst_slow = fmax(worst_slow, fabs(slow - bursts[b][2] - whole));
            worst_sel = fmax(worst_sel, fabs(10 * log10(exposure) - bursts[b][3] - whole));
        }
    printf(
        "# figure bursts of 0.25 to 1000 ms: fast within %.4f dB, slow within %.4f dB, SEL within %.4f dB of "
        "the closed forms\n",
        worst_fast, worst_slow, worst_sel);
    assert_true(worst_fast < 0.05);
    assert_true(worst_slow < 0.05);
    assert_true(worst_sel < 0.05);
}

/* After a burst the level falls by 10 lg(e) / tau: 34.7436 and 4.3429 dB/s. The maximum of a second after the
 * burst is at its begin, so two such seconds differ by one second's fall. */
static void levels_fall_at_their_rate(void **state)
{
    (void)state;
    enum { RATE = 48000, SECONDS = 8 };
    static float x[RATE * SECONDS];
    for (int i = 0; i < RATE * 3; i++)
        x[i] = i % 2 ? -1 : 1;
    measure(RATE, x, (size_t)RATE * SECONDS, 777, false, &rows);
    assert_int_equal(rows.n, SECONDS);
    assert_near(rows.level[4].slow_max_db - rows.level[5].slow_max_db, 4.3429, 0.001);
    assert_near(rows.level[4].fast_max_db - rows.level[5].fast_max_db, 34.7436, 0.001);
}

/* Kurtosis of known distributions (closed forms), each within five of the standard deviations that its
 * estimate has; the Gaussian's is sqrt(24 / N). */
static double laplace(struct random *random)
{
    double x = random_exponential(random);
    return random_uniform(random) < 0.5 ? x : -x;
}

static void kurtosis_of_known_signals(void **state)
{
    (void)state;
    enum { RATE = 48000, N = RATE * 10 };
    static const double wanted[] = {1.5, 1.8, 3.0, 6.0, 1.0, 100.0},
                        tolerance[] = {1e-3, 0.01, 0.04, 0.3, 1e-6, 0.1};
    static const char *const names[] = {"sine", "uniform", "Gaussian", "Laplace", "square", "1 % duty"};
    float *x = malloc(sizeof *x * N);
    for (int kind = 0; kind < 6; kind++) {
        struct random random;
        random_reset(&random, 20);
        for (int i = 0; i < N; i++)
            x[i] = (float)(kind == 0       ? sin(2 * M_PI * 997 * i / RATE)
                           : kind == 1     ? random_between(&random, -1, 1)
                           : kind == 2     ? random_normal(&random)
                           : kind == 3     ? laplace(&random)
                           : kind == 4     ? (i / 24 % 2 ? -1 : 1)
                           : i / 480 % 100 ? 0
                           : i / 48000 % 2 ? 1
                                           : -1);
        measure(RATE, x, N, 4096, false, &rows);
        struct moments all = {0};
        for (uint32_t s = 0; s < rows.n; s++)
            moments_add(&all, &rows.level[s].moments);
        assert_near(all.n, N, 0);
        double beta = moments_kurtosis(&all);
        printf("# figure kurtosis of a %s over 10 s: %.4f for %.1f\n", names[kind], beta, wanted[kind]);
        assert_near(beta, wanted[kind], tolerance[kind]);
    }
    free(x);
}

/* 1 s windows: an exponential of tau 10 ms has T / tau = 100 by raw moments, 98.6937 by central ones; a
 * damped sine (20 ms, 200 Hz) T / tau_eff = 74.646, and 60 s with 40 of them 111.969. With Gaussian noise of
 * variance v = 10^(-r / 10) of the signal's mean square: (beta + 6 v + 3 v^2) / (1 + v)^2. */
static void kurtosis_of_pulses(void **state)
{
    (void)state;
    enum { RATE = 96000 };
    float *x = calloc((size_t)RATE * 60, sizeof *x);
    for (int i = 0; i < RATE; i++)
        x[i] = (float)(1000 * exp(-(i + 0.5) / RATE / 0.01));
    measure(RATE, x, RATE, 4096, false, &rows);
    assert_near(moments_kurtosis(&rows.level[0].moments), 98.6937, 0.01);
    for (int i = 0; i < RATE; i++)
        x[i] = (float)(1000 * exp(-(i + 0.5) / RATE / 0.02) * sin(2 * M_PI * 200 * (i + 0.5) / RATE));
    measure(RATE, x, RATE, 4096, false, &rows);
    struct moments one = rows.level[0].moments;
    double beta = moments_kurtosis(&one);
    printf("# figure kurtosis of a damped sine in 1 s: %.4f for 74.646\n", beta);
    assert_near(beta, 74.646, 0.2); /* raw moments; its mean is small */
    static const double ratio_db[] = {20, 10, 0, -10}, wanted[] = {73.2343, 62.2116, 20.9115, 3.5921};
    for (int k = 0; k < 4; k++) {
        double v = pow(10, -ratio_db[k] / 10);
        assert_near((74.646 + 6 * v + 3 * v * v) / ((1 + v) * (1 + v)), wanted[k], 1e-3);
        struct random random;
        random_reset(&random, 30 + (uint64_t)k);
        const double rms = sqrt(one.sum2 / one.n);
        float *y = malloc(sizeof *y * RATE);
        double sum = 0;
        for (int run = 0; run < 20; run++) {
            for (int i = 0; i < RATE; i++)
                y[i] = x[i] + (float)(rms * sqrt(v) * random_normal(&random));
            measure(RATE, y, RATE, 4096, false, &rows);
            sum += moments_kurtosis(&rows.level[0].moments) / 20;
        }
        free(y);
        printf("# figure the same with noise %.0f dB below: %.3f for %.3f (mean of 20)\n", ratio_db[k], sum,
               wanted[k]);
        assert_near(sum, wanted[k], 0.01 * wanted[k]);
    }
    memset(x, 0, sizeof *x * RATE * 60);
    for (int p = 0; p < 40; p++)
        for (int i = 0; i < RATE; i++)
            x[(size_t)p * RATE * 3 / 2 + (size_t)i] +=
                (float)(1000 * exp(-(i + 0.5) / RATE / 0.02) * sin(2 * M_PI * 200 * (i + 0.5) / RATE));
    measure(RATE, x, (size_t)RATE * 60, 4096, false, &rows);
    struct moments all = {0};
    for (uint32_t s = 0; s < rows.n; s++)
        moments_add(&all, &rows.level[s].moments);
    printf("# figure kurtosis of 40 damped sines in 60 s: %.4f for 111.969\n", moments_kurtosis(&all));
    assert_near(moments_kurtosis(&all), 111.9691, 0.3);
    free(x);
}

/* 4.02 lg(beta / 3), Goley et al. 2011 (0 dB at a Gaussian's 3). */
static void goley_adjustment(void **state)
{
    (void)state;
    static const double beta[] = {3, 5, 10, 20, 40, 100, 300},
                        wanted[] = {0, 0.8918, 2.1020, 3.3121, 4.5223, 6.1220, 8.0400};
    for (int i = 0; i < 7; i++)
        assert_near(moments_goley_db(beta[i]), wanted[i], 1e-4);
    assert_true(isnan(moments_kurtosis(&(struct moments){0})));
}

/* An offset, a relative channel's tiny numbers and the way the sound is cut change nothing. */
static void offset_unit_and_chunks_do_not_matter(void **state)
{
    (void)state;
    enum { RATE = 44100, N = RATE * 4 };
    struct random random;
    random_reset(&random, 40);
    float *x = malloc(sizeof *x * N), *shifted = malloc(sizeof *x * N), *small = malloc(sizeof *x * N);
    for (int i = 0; i < N; i++) {
        x[i] = (float)(0.01 * laplace(&random));
        shifted[i] = x[i] + 0.5f;
        small[i] = x[i] * 1e-6f;
    }
    static struct rows first;
    measure(RATE, x, N, 4096, false, &first);
    static const uint32_t chunks[] = {1, 7, 1000, N};
    for (int c = 0; c < 4; c++) {
        measure(RATE, x, N, chunks[c], false, &rows);
        assert_int_equal(rows.n, first.n);
        for (uint32_t s = 0; s < rows.n; s++) {
            assert_true(rows.level[s].fast_max_db == first.level[s].fast_max_db);
            assert_true(rows.level[s].slow_max_db == first.level[s].slow_max_db);
            assert_true(rows.level[s].moments.sum4 == first.level[s].moments.sum4);
        }
    }
    measure(RATE, shifted, N, 4096, false, &rows);
    for (uint32_t s = 0; s < rows.n; s++) {
        assert_near(rows.level[s].fast_max_db, first.level[s].fast_max_db, 0.002);
        assert_near(moments_kurtosis(&rows.level[s].moments), moments_kurtosis(&first.level[s].moments),
                    1e-3);
    }
    measure(RATE, small, N, 4096, true, &rows);
    for (uint32_t s = 0; s < rows.n; s++)
        assert_near(moments_kurtosis(&rows.level[s].moments), moments_kurtosis(&first.level[s].moments),
                    1e-3);
    free(x);
    free(shifted);
    free(small);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_sine_has_its_levels),
        cmocka_unit_test(energies_add),
        cmocka_unit_test(backgrounds_subtract),
        cmocka_unit_test(levels_exceeded),
        cmocka_unit_test(one_blow_from_a_long_mean),
        cmocka_unit_test(bursts_have_their_maxima),
        cmocka_unit_test(levels_fall_at_their_rate),
        cmocka_unit_test(kurtosis_of_known_signals),
        cmocka_unit_test(kurtosis_of_pulses),
        cmocka_unit_test(goley_adjustment),
        cmocka_unit_test(offset_unit_and_chunks_do_not_matter),
    };
    return cmocka_run_group_tests_name("running levels", tests, NULL, NULL);
}
