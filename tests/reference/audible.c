/* Sound for people's ears against scipy (tests/support/audible_check.py), and what it promises of hearing
 * safety: nothing beyond the ceiling, blows muted, clicks and whistles left. */
#include "support/test.h"

#include "base/random.h"
#include "dsp/audible.h"
#include "dsp/limiter.h"
#include <math.h>
#include <stdlib.h>

#define RATE 192000.0

static void write_file(const char *path, const float *samples, size_t n)
{
    FILE *file = fopen(path, "wb");
    assert_non_null(file);
    assert_int_equal(fwrite(samples, sizeof *samples, n, file), n);
    assert_int_equal(fclose(file), 0);
}

static float *noise(size_t n, double sigma, uint64_t seed)
{
    struct random random;
    random_reset(&random, seed);
    float *samples = malloc(n * sizeof *samples);
    assert_non_null(samples);
    for (size_t i = 0; i < n; i++)
        samples[i] = (float)(sigma * random_normal(&random));
    return samples;
}

static struct audible make(enum audible_form form, double rate_hz, double centre_hz, double gain_db,
                           float *samples, size_t n)
{
    const struct audible_setup setup = {.form = form,
                                        .rate_hz = rate_hz,
                                        .centre_hz = centre_hz,
                                        .gain_db = gain_db,
                                        .first_frame = 12345678901};
    struct audible made = {0};
    assert_int_equal(audible_make(&setup, samples, n, &made), STATUS_OK);
    for (size_t i = 0; i < made.n; i++)
        assert_true(fabsf(made.samples[i]) <= AUDIBLE_CEILING);
    return made;
}

/* scipy makes the same output from the same input. */
static void compare(const char *what, enum audible_form form, double rate_hz, double centre_hz)
{
    size_t n = 60000;
    float *samples = noise(n, 0.02, 7);
    char names[2][512];
    for (int i = 0; i < 2; i++)
        snprintf(names[i], sizeof names[i], "%s/audible-%s-%d.f32", test_build(), what, i);
    write_file(names[0], samples, n);
    struct audible made = make(form, rate_hz, centre_hz, 0, samples, n);
    write_file(names[1], made.samples, made.n);
    assert_int_equal(test_shell("/usr/bin/python3 tests/support/audible_check.py %s %.0f %.0f %.0f '%s' '%s'",
                                what, rate_hz, centre_hz, made.rate_hz, names[0], names[1]),
                     0);
    audible_destroy(&made);
    free(samples);
}

static void as_it_is_agrees_with_scipy(void **state)
{
    (void)state;
    compare("as-is", AUDIBLE_AS_IS, 48000, 0);
}

static void slowed_agrees_with_scipy(void **state)
{
    (void)state;
    compare("slowed", AUDIBLE_SLOWED, RATE, 0);
}

static void shifted_agrees_with_scipy(void **state)
{
    (void)state;
    compare("shifted", AUDIBLE_SHIFTED, 48000, 15000);
    compare("shifted", AUDIBLE_SHIFTED, RATE, 70000); /* through the decimator: by its spectrum */
}

static void the_limiter_agrees_with_scipy(void **state)
{
    (void)state;
    static const size_t lengths[] = {1, 5, 50, 20000};
    for (size_t k = 0; k < 4; k++) {
        float *samples = noise(lengths[k], 0.3, 11 + k);
        char names[2][512];
        for (int i = 0; i < 2; i++)
            snprintf(names[i], sizeof names[i], "%s/audible-limiter-%d.f32", test_build(), i);
        write_file(names[0], samples, lengths[k]);
        assert_int_equal(limiter_apply(samples, lengths[k], 2.0, 0.25, 48), STATUS_OK);
        write_file(names[1], samples, lengths[k]);
        assert_int_equal(
            test_shell("/usr/bin/python3 tests/support/audible_check.py limiter 48 0 0 '%s' '%s'", names[0],
                       names[1]),
            0);
        free(samples);
    }
}

static double rms_db(const struct audible *made, double from_s, double to_s)
{
    double sum = 0;
    size_t from = (size_t)(from_s * made->rate_hz), to = (size_t)(to_s * made->rate_hz);
    for (size_t i = from; i < to; i++)
        sum += (double)made->samples[i] * made->samples[i];
    return 10 * log10(sum / (double)(to - from) + 1e-20);
}

/* A blow as of a hammer (Lippert et al. 2016 show such envelopes): rises within a millisecond, falls by 60 dB
 * in 0.2 s; broadband. */
static void add_blow(float *samples, double at_s, double peak, uint64_t seed)
{
    struct random random;
    random_reset(&random, seed);
    size_t at = (size_t)(at_s * RATE);
    for (size_t i = 0; i < (size_t)(0.3 * RATE); i++)
        samples[at + i] +=
            (float)(peak * random_normal(&random) * pow(10, -60 * (double)i / RATE / 0.2 / 20));
}

static void blows_are_muted_and_calls_are_not(void **state)
{
    (void)state;
    size_t n = (size_t)(6 * RATE);
    float *samples = noise(n, 1e-4, 3);
    add_blow(samples, 1.0, 1e-4 * 1000, 5); /* 60 dB over the noise */
    add_blow(samples, 3.0, 1e-4 * 100, 6);  /* 40 dB */
    for (int k = 0; k < 20; k++) { /* clicks of 0.1 ms at 130 kHz folded to 60 kHz, peak 40 dB over it */
        size_t at = (size_t)((4.0 + 0.05 * k) * RATE);
        for (size_t i = 0; i < 20; i++)
            samples[at + i] += (float)(1e-4 * 100 * sin(2 * M_PI * 60000 * (double)i / RATE));
    }
    for (size_t i = 0; i < (size_t)(0.5 * RATE); i++) /* a whistle, 20 dB over the noise */
        samples[(size_t)(5.2 * RATE) + i] +=
            (float)(1e-4 * 10 * M_SQRT2 * sin(2 * M_PI * 9000 * (double)i / RATE));
    struct audible made = make(AUDIBLE_AS_IS, RATE, 0, NAN, samples, n);
    double usual_db = rms_db(&made, 0.2, 0.9), clicks_db = rms_db(&made, 4.0, 5.0),
           whistle_db = rms_db(&made, 5.25, 5.65);
    double first_db = rms_db(&made, 1.0, 1.1), second_db = rms_db(&made, 3.0, 3.05);
    printf("# figure usual %.1f dB, in a blow of 60 dB %.1f, of 40 dB %.1f, whistle %.1f, muted %.2f s (dB "
           "re full scale)\n",
           usual_db, first_db, second_db, whistle_db, made.muted_s);
    assert_near(usual_db, AUDIBLE_BACKGROUND_DB, 0.5);
    assert_true(first_db < usual_db - 20 && second_db < usual_db - 20);
    assert_true(whistle_db > usual_db + 15);
    assert_near(clicks_db, usual_db, 6);
    assert_true(made.muted_s > 0.2 && made.muted_s < 0.5);
    audible_destroy(&made);
    free(samples);
}

/* What no rule takes for a blow is held by the ceiling: full scale after a silence, and steps between
 * extremes. */
static void nothing_is_louder_than_the_ceiling(void **state)
{
    (void)state;
    for (int form = 0; form < AUDIBLE_FORM_COUNT; form++) {
        size_t n = (size_t)(2 * RATE);
        float *samples = noise(n, 1e-5, 17);
        for (size_t i = n / 2; i < n; i++)
            samples[i] = i / 7 % 2 ? 1 : -1;
        samples[5] = NAN;
        samples[6] = INFINITY;
        struct audible made = make((enum audible_form)form, RATE, 60000, NAN, samples, n); /* asserts it */
        assert_true(made.n > 0);
        audible_destroy(&made);
        free(samples);
    }
}

/* Two pieces, each with a second before it, are the whole. */
static void pieces_fit_together(void **state)
{
    (void)state;
    for (int form = 0; form < AUDIBLE_FORM_COUNT; form++) {
        size_t n = (size_t)(4 * RATE), second = (size_t)RATE;
        float *whole = noise(n, 1e-3, 23), *piece = malloc(2 * second * sizeof *piece);
        assert_non_null(piece);
        memcpy(piece, whole + 2 * second, 2 * second * sizeof *piece);
        struct audible_setup setup = {.form = (enum audible_form)form,
                                      .rate_hz = RATE,
                                      .centre_hz = 40000,
                                      .gain_db = 20,
                                      .first_frame = 777};
        struct audible all, part;
        assert_int_equal(audible_make(&setup, whole, n, &all), STATUS_OK);
        setup.first_frame += 2 * second;
        setup.n_before = second;
        assert_int_equal(audible_make(&setup, piece, 2 * second, &part), STATUS_OK);
        double worst = 0, sum = 0;
        size_t offset = all.n - part.n;
        for (size_t i = 0; i < part.n; i++) {
            worst = fmax(worst, fabs((double)part.samples[i] - all.samples[offset + i]));
            sum += (double)all.samples[offset + i] * all.samples[offset + i];
        }
        double rms = sqrt(sum / (double)part.n);
        printf("# figure form %d: a piece differs from the whole by at most %.1e of its rms\n", form,
               worst / rms);
        assert_true(worst < 1e-3 * rms);
        audible_destroy(&all);
        audible_destroy(&part);
        free(whole);
        free(piece);
    }
}

static void wrong_setups_are_refused(void **state)
{
    (void)state;
    float samples[100] = {0};
    struct audible made = {.n = 42};
    struct audible_setup setup = {.form = AUDIBLE_AS_IS, .rate_hz = 48000, .gain_db = NAN};
    assert_int_equal(audible_make(&setup, samples, 0, &made), STATUS_BAD_ARGUMENT);
    setup.rate_hz = 2e6;
    assert_int_equal(audible_make(&setup, samples, 100, &made), STATUS_BAD_ARGUMENT);
    setup = (struct audible_setup){.form = AUDIBLE_SHIFTED, .rate_hz = 48000, .gain_db = NAN};
    assert_int_equal(audible_make(&setup, samples, 100, &made), STATUS_BAD_ARGUMENT);
    assert_int_equal(made.n, 42);
    enum audible_form form;
    assert_int_equal(audible_form_from_text("shifted", &form), STATUS_OK);
    assert_int_equal(form, AUDIBLE_SHIFTED);
    assert_int_equal(audible_form_from_text("Shifted", &form), STATUS_NOT_FOUND);
    assert_int_equal(limiter_apply(samples, 100, 1, 0, 5), STATUS_BAD_ARGUMENT);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(as_it_is_agrees_with_scipy),
        cmocka_unit_test(slowed_agrees_with_scipy),
        cmocka_unit_test(shifted_agrees_with_scipy),
        cmocka_unit_test(the_limiter_agrees_with_scipy),
        cmocka_unit_test(blows_are_muted_and_calls_are_not),
        cmocka_unit_test(nothing_is_louder_than_the_ceiling),
        cmocka_unit_test(pieces_fit_together),
        cmocka_unit_test(wrong_setups_are_refused),
    };
    return cmocka_run_group_tests_name("sound for ears", tests, NULL, NULL);
}
