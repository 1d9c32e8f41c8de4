/* lib/call/tones: calls beside what hides them: a ship's line that they cross, blows of the own source that
 * the gate tells of, and another call. Sounds are invented: upcalls (Clark 1982, Anim. Behav. 30, 1060: 95 to
 * 195 Hz, quickening) in Gaussian noise. */
#include "support/test.h"

#include "base/random.h"
#include "call/tones.h"
#include "support/catalogue.h"
#include <math.h>
#include <stdlib.h>

#define RATE 8000
#define PIECE 256 /* as blocks come at this rate */
#define CALLS 12  /* one each PERIOD_S ... */
#define PERIOD_S 6.0
#define FIRST_S 10.0
#define LENGTH_S 0.9
#define N ((uint32_t)((FIRST_S + CALLS * PERIOD_S) * RATE))

static struct catalogue *catalogue;

static int load(void **state)
{
    (void)state;
    catalogue = calloc(1, sizeof *catalogue);
    return test_load_catalogue(catalogue) ? 0 : -1;
}

static int unload(void **state)
{
    (void)state;
    free(catalogue);
    return 0;
}

struct heard {
    uint32_t n_upcalls, n_moans, n_all;
};

/* An upcall counts that lies where one is and begins no earlier. */
static void take(void *context, const struct found_call *found)
{
    struct heard *heard = context;
    const char *name = catalogue->classes[found->class_index].name;
    double start_s = found->start_frame / RATE - FIRST_S, end_s = found->end_frame / RATE - FIRST_S;
    double at_s = floor(start_s / PERIOD_S + 0.5) * PERIOD_S;
    double common_s = fmin(end_s, at_s + LENGTH_S) - fmax(start_s, at_s);
    heard->n_all++;
    heard->n_upcalls +=
        strcmp(name, "right whale upcall") == 0 && common_s > 0.5 * LENGTH_S && start_s > at_s - 0.15;
    heard->n_moans += strcmp(name, "baleen moan") == 0 || strcmp(name, "humpback song unit") == 0;
}

/* Noise of 1 Pa, and upcalls 10 dB over it in a cell of 0.128 s, or `amplitude` times as loud. */
static float *make_upcalls(double amplitude, uint64_t seed)
{
    float *samples = calloc(N, sizeof *samples);
    struct random random;
    random_reset(&random, seed);
    assert_non_null(samples);
    for (uint32_t i = 0; i < N; i++)
        samples[i] = (float)random_normal(&random);
    for (uint32_t c = 0; c < CALLS; c++) {
        double phase = 0;
        for (uint32_t i = 0; i < (uint32_t)(LENGTH_S * RATE); i++) {
            double x = (i + 0.5) / (LENGTH_S * RATE), edge = fmin(1, fmin(x, 1 - x) / 0.15);
            phase += 2 * M_PI * (95 + 25 * x + 75 * x * x * x) / RATE;
            samples[(uint32_t)((FIRST_S + c * PERIOD_S) * RATE) + i] +=
                (float)(0.3 * amplitude * edge * sin(phase));
        }
    }
    return samples;
}

static void add_tone(float *samples, double start_s, double seconds, double hz, double amplitude)
{
    for (uint32_t i = 0; i < (uint32_t)(seconds * RATE); i++) {
        uint32_t at = (uint32_t)(start_s * RATE) + i;
        double edge = fmin(1, fmin(i, seconds * RATE - i) / (0.05 * RATE));
        if (at < N)
            samples[at] += (float)(amplitude * edge * sin(2 * M_PI * hz * i / RATE));
    }
}

/* blows_s: told of as the gate tells, [n_blows]; each covers 0.3 s of 50 Hz to 1 kHz. */
static struct heard hear(const float *samples, const double *blows_s, uint32_t n_blows)
{
    struct heard heard = {0};
    struct found_sink sink = {take, &heard};
    struct tones *tones = NULL;
    assert_int_equal(tones_create(catalogue->classes, catalogue->n_classes, RATE, &tones), STATUS_OK);
    for (uint32_t at = 0; at < N; at += PIECE) {
        struct gate_tail tail = {.n = 1, .bands = {{.low_hz = 50, .high_hz = 1000, .ratio = 1}}};
        for (uint32_t b = 0; b < n_blows; b++)
            if (blows_s[b] * RATE < at + PIECE) {
                double end = (blows_s[b] + 0.3) * RATE;
                tail.bands[0].masked_from = blows_s[b] * RATE;
                tail.bands[0].masked_to = fmin(end, at + PIECE);
                tail.bands[0].masked = end > at + PIECE;
            }
        if (n_blows > 0)
            tones_hear_tail(tones, &tail);
        tones_push(tones, samples + at, at + PIECE < N ? PIECE : N - at, &sink);
    }
    tones_finish(tones, &sink);
    tones_destroy(tones);
    return heard;
}

/* A steady line in the middle of their course, 20 dB over the noise in their cells, hides no upcalls. */
static void calls_cross_a_steady_line(void **state)
{
    (void)state;
    for (uint64_t seed = 1; seed <= 3; seed++) {
        float *samples = make_upcalls(1.5, seed);
        struct heard without = hear(samples, NULL, 0);
        add_tone(samples, 0, N / (double)RATE, 150, 0.7);
        struct heard with = hear(samples, NULL, 0);
        printf("# figure upcalls across a line of 150 Hz, seed %d: %u of %d, without it %u\n", (int)seed,
               with.n_upcalls, CALLS, without.n_upcalls);
        assert_true(without.n_upcalls >= CALLS - 2);
        assert_true(with.n_upcalls + 3 >= without.n_upcalls);
        free(samples);
    }
}

/* A blow 60 dB over the noise that rings at 110 and 188 Hz comes 0.25 s before each upcall, and others
 * between: where the gate tells of it, the calls are found as they are, and no call is made of the blows;
 * where not, a blow and a call become one. */
static void calls_go_on_behind_a_blow_that_is_told(void **state)
{
    (void)state;
    uint32_t told = 0, untold = 0, beside = 0;
    for (uint64_t seed = 11; seed <= 13; seed++) {
        float *samples = make_upcalls(1.5, seed);
        double blows_s[3 * CALLS];
        struct random random;
        random_reset(&random, seed);
        for (uint32_t b = 0; b < 3 * CALLS; b++) {
            blows_s[b] = FIRST_S - 0.25 + b * PERIOD_S / 3;
            for (uint32_t i = 0; i < 4000; i++) {
                double t = i / (double)RATE;
                samples[(uint32_t)(blows_s[b] * RATE) + i] +=
                    (float)(300 * exp(-t / 0.035) * (sin(2 * M_PI * 110 * t) + sin(2 * M_PI * 188 * t)) +
                            100 * exp(-t / 0.01) * random_normal(&random));
            }
        }
        struct heard with = hear(samples, blows_s, 3 * CALLS), without = hear(samples, NULL, 0);
        told += with.n_upcalls;
        untold += without.n_upcalls;
        beside += with.n_all - with.n_upcalls;
        free(samples);
    }
    printf("# figure upcalls with a blow of 60 dB before each: %u of %d where it is told, %u where not; %u "
           "others\n",
           told, 3 * CALLS, untold, beside);
    assert_true(told >= 2 * CALLS && told >= untold + CALLS / 2);
    assert_true(beside <= 3 * CALLS / 2);
}

/* A steady moan of 340 Hz lasts before and after each upcall: two calls, not one. */
static void a_sweep_beside_a_moan_is_another_call(void **state)
{
    (void)state;
    float *samples = make_upcalls(1.5, 21);
    for (uint32_t c = 0; c < CALLS; c++)
        add_tone(samples, FIRST_S + c * PERIOD_S - 0.7, 2.4, 340, 0.5);
    struct heard heard = hear(samples, NULL, 0);
    printf("# figure upcalls within a moan of 340 Hz: %u of %d, moans %u\n", heard.n_upcalls, CALLS,
           heard.n_moans);
    assert_true(heard.n_upcalls >= CALLS / 2);
    assert_true(heard.n_moans >= CALLS - 1);
    free(samples);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(calls_cross_a_steady_line),
        cmocka_unit_test(calls_go_on_behind_a_blow_that_is_told),
        cmocka_unit_test(a_sweep_beside_a_moan_is_another_call),
    };
    return cmocka_run_group_tests_name("tones beside", tests, load, unload);
}
