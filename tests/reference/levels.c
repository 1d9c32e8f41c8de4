/* Spectra, filters, decidecades, levels and impulse measures against numpy and scipy on the same samples
 * (tests/support/levels_check.py, in double precision and without decimation). */
#include "support/test.h"

#include "base/random.h"
#include "dsp/filter.h"
#include "dsp/spectrum.h"
#include "level/impulse_bands.h"
#include "level/impulse_measure.h"
#include "level/meter.h"
#include "level/percentile.h"
#include <math.h>
#include <stdlib.h>

static void write_file(const char *name, const void *data, size_t bytes)
{
    char path[600];
    snprintf(path, sizeof path, "%s/levels-%s", test_build(), name);
    FILE *file = fopen(path, "wb");
    assert_non_null(file);
    assert_int_equal(fwrite(data, 1, bytes, file), bytes);
    assert_int_equal(fclose(file), 0);
}

static void check(const char *what, double parameter)
{
    char command[1024];
    snprintf(command, sizeof command, "/usr/bin/python3 tests/support/levels_check.py %s %.0f '%s/levels-'",
             what, parameter, test_build());
    fflush(stdout);
    assert_int_equal(system(command), 0);
}

/* Noise whose spectrum falls by 10 dB a decade or so, with an offset and two tones. */
static float *make_sound(double rate, size_t n, uint64_t seed)
{
    struct random random;
    random_reset(&random, seed);
    struct filter low;
    filter_low_pass(1, 200, rate, &low);
    float *x = malloc(n * sizeof *x);
    for (size_t i = 0; i < n; i++) {
        double white = random_normal(&random), t = (double)i / rate;
        x[i] = (float)(filter_step(&low, white) * 10 + 0.2 * white + 0.4 + 0.5 * sin(2 * M_PI * 63 * t) +
                       0.1 * sin(2 * M_PI * 3200 * t));
    }
    return x;
}

static void spectra(void **state)
{
    (void)state;
    static const enum window_shape shapes[] = {WINDOW_HANN, WINDOW_SINE, WINDOW_RECTANGLE};
    enum { N = 1024 };
    float *x = make_sound(48000, N, 101);
    static float power[3][N / 2 + 1];
    for (int s = 0; s < 3; s++) {
        struct spectrum *spectrum;
        assert_int_equal(spectrum_create(N, shapes[s], &spectrum), STATUS_OK);
        spectrum_power(spectrum, x, power[s]);
        spectrum_destroy(spectrum);
    }
    write_file("input", x, N * sizeof *x);
    write_file("output", power, sizeof power);
    free(x);
    check("spectrum", N);
}

static void filters(void **state)
{
    (void)state;
    enum { N = 96000 };
    float *x = make_sound(48000, N, 102);
    static double y[3][N];
    struct filter filter[3];
    assert_int_equal(filter_low_pass(5, 3000, 48000, &filter[0]), STATUS_OK);
    assert_int_equal(filter_high_pass(4, 20, 48000, &filter[1]), STATUS_OK);
    assert_int_equal(filter_band_pass(3, 891.250938, 1122.018454, 48000, &filter[2]), STATUS_OK);
    for (int f = 0; f < 3; f++)
        for (int i = 0; i < N; i++)
            y[f][i] = filter_step(&filter[f], x[i]);
    write_file("input", x, N * sizeof *x);
    write_file("output", y, sizeof y);
    free(x);
    check("filter", 48000);
}

struct level_rows {
    uint32_t n;
    double row[16][2 + LEVEL_MAX_BANDS];
};

static void keep(void *context, const struct found_level *level)
{
    struct level_rows *rows = context;
    rows->row[rows->n][0] = level->spl_db;
    rows->row[rows->n][1] = level->peak_db;
    memcpy(&rows->row[rows->n][2], level->band_db, sizeof level->band_db);
    rows->n++;
}

static void levels(void **state)
{
    (void)state;
    static const double rates[] = {48000, 96000};
    for (int r = 0; r < 2; r++) {
        size_t n = (size_t)(rates[r] * 8.5);
        float *x = make_sound(rates[r], n, 103);
        struct level_rows rows = {0};
        struct level_sink sink = {keep, &rows};
        struct meter *meter;
        assert_int_equal(meter_create(rates[r], false, &meter), STATUS_OK);
        meter_reset(meter, 0);
        meter_push(meter, x, (uint32_t)n, &sink);
        meter_destroy(meter);
        assert_int_equal(rows.n, 8);
        write_file("input", x, n * sizeof *x);
        write_file("output", rows.row, 8 * sizeof rows.row[0]);
        free(x);
        check("levels", rates[r]);
    }
}

static void impulses(void **state)
{
    (void)state;
    enum { RATE = 96000, N = RATE / 2 };
    static float x[N];
    struct random random;
    random_reset(&random, 104);
    struct filter band;
    filter_band_pass(2, 60, 600, RATE, &band);
    for (int i = 0; i < N; i++) {
        double t = ((double)i - 9600) / RATE, blow = filter_step(&band, t < 0 ? 0 : random_normal(&random));
        x[i] = (float)(3 + random_normal(&random) + 3000 * blow * exp(-t / 0.06));
    }
    struct impulse_window window = {x, N, RATE, 3, 1, INFINITY};
    struct impulse_measures m;
    assert_int_equal(impulse_measure(&window, &m), STATUS_OK);
    double row[] = {m.sel_db,      m.peak_db,  m.peak_to_peak_db,      m.rms90_db, m.t90_s, m.t5_frame,
                    m.effective_s, m.kurtosis, m.positive_impulse_pa_s};
    write_file("input", x, sizeof x);
    write_file("output", row, sizeof row);
    check("impulse", RATE);
}

struct running_rows {
    uint32_t n;
    double row[10][5]; /* SPL, fast, slow, kurtosis, SEL */
    struct moments all;
};

static void keep_running(void *context, const struct found_level *level)
{
    struct running_rows *rows = context;
    assert_true(rows->n < 10);
    double *row = rows->row[rows->n++];
    row[0] = level->spl_db;
    row[1] = level->fast_max_db;
    row[2] = level->slow_max_db;
    row[3] = moments_kurtosis(&level->moments);
    row[4] = level->spl_db + 10 * log10(level->frames / 48000.0);
    moments_add(&rows->all, &level->moments);
}

/* Ten seconds of noise with clicks and a hum that comes and goes. */
static void running_levels(void **state)
{
    (void)state;
    enum { RATE = 48000, SECONDS = 10, N = RATE * SECONDS };
    static float x[N];
    struct random random;
    random_reset(&random, 105);
    for (int i = 0; i < N; i++) {
        double t = (double)i / RATE, since = fmod(t + 0.3, 0.7), hum = fmod(t, 3) < 1.2 ? 2 : 0.1;
        x[i] = (float)(0.3 + 0.5 * random_normal(&random) + hum * sin(2 * M_PI * 120 * t) +
                       60 * exp(-since / 0.01) * sin(2 * M_PI * 500 * since));
    }
    static struct running_rows rows;
    struct level_sink sink = {keep_running, &rows};
    struct meter *meter;
    assert_int_equal(meter_create(RATE, false, &meter), STATUS_OK);
    meter_push(meter, x, N, &sink);
    meter_finish(meter, &sink);
    meter_destroy(meter);
    assert_int_equal(rows.n, SECONDS);
    double sorted[SECONDS], out[SECONDS * 5 + 5];
    for (uint32_t i = 0; i < SECONDS; i++) {
        percentile_insert(sorted, i, rows.row[i][0]);
        memcpy(&out[i * 5], rows.row[i], sizeof rows.row[i]);
    }
    out[SECONDS * 5] = moments_kurtosis(&rows.all);
    out[SECONDS * 5 + 1] = percentile_exceeded_db(sorted, SECONDS, 5);
    out[SECONDS * 5 + 2] = percentile_exceeded_db(sorted, SECONDS, 50);
    out[SECONDS * 5 + 3] = percentile_exceeded_db(sorted, SECONDS, 95);
    out[SECONDS * 5 + 4] = percentile_energy_mean_db(sorted, SECONDS);
    write_file("input", x, sizeof x);
    write_file("output", out, sizeof out);
    check("running", RATE);
}

/* One blow in noise: 256 ms of quiet, then a window of 0.45 s. */
static void impulse_decidecades(void **state)
{
    (void)state;
    enum { RATE = 96000, QUIET = 24576, N = 43200 };
    static float x[QUIET + N];
    struct random random;
    random_reset(&random, 106);
    struct filter low;
    filter_low_pass(1, 100, RATE, &low);
    for (int i = 0; i < QUIET + N; i++) {
        double t = ((double)i - QUIET - 4800) / RATE, white = random_normal(&random);
        double blow = t < 0 ? 0 : exp(-t / 0.04) * (sin(2 * M_PI * 150 * t) + 0.5 * sin(2 * M_PI * 1100 * t));
        x[i] = (float)(2 + 5 * filter_step(&low, white) + 0.1 * white + 100 * blow);
    }
    struct impulse_bands *bands;
    double out[LEVEL_MAX_BANDS];
    assert_int_equal(impulse_bands_create(RATE, 124704, &bands), STATUS_OK);
    impulse_bands_learn(bands, x, QUIET, 2);
    impulse_bands_measure(bands, x + QUIET, N, 2, out);
    impulse_bands_destroy(bands);
    write_file("input", x, sizeof x);
    write_file("output", out, sizeof out);
    check("impulse_bands", RATE);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(spectra),  cmocka_unit_test(filters),        cmocka_unit_test(levels),
        cmocka_unit_test(impulses), cmocka_unit_test(running_levels), cmocka_unit_test(impulse_decidecades),
    };
    return cmocka_run_group_tests_name("levels against numpy and scipy", tests, NULL, NULL);
}
