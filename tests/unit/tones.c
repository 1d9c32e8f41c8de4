/* lib/call/tones: what is one call, what is none, and that chunks, rates and bad samples change nothing.
 * Sounds are invented: sweeps, stacks, lines and tails in Gaussian noise. */
#include "support/test.h"

#include "base/random.h"
#include "call/tones.h"
#include "support/catalogue.h"
#include <math.h>
#include <stdlib.h>

#define MAX_CALLS 200
static const double pi = 3.14159265358979323846;

struct calls {
    uint32_t n;
    struct found_call calls[MAX_CALLS];
};

static struct catalogue *catalogue; /* shipped; loaded once */

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

static uint32_t class_of(const char *name)
{
    uint32_t i = 0;
    while (i < catalogue->n_classes && strcmp(catalogue->classes[i].name, name) != 0)
        i++;
    assert_true(i < catalogue->n_classes);
    return i;
}

static void keep(void *context, const struct found_call *found)
{
    struct calls *calls = context;
    assert_true(calls->n < MAX_CALLS);
    assert_true(isfinite(found->start_frame) && isfinite(found->end_frame) && isfinite(found->snr_db));
    assert_true(isfinite(found->low_hz) && isfinite(found->high_hz) && isfinite(found->mean_square_pa2));
    assert_true(found->start_frame < found->end_frame && found->low_hz <= found->high_hz);
    if (calls->n > 0)
        assert_true(found->known_frame >= calls->calls[calls->n - 1].known_frame);
    calls->calls[calls->n++] = *found;
}

/* A stretch of sound that the tests fill. */
struct sound {
    double rate_hz;
    uint32_t n;
    float *samples;
};

static struct sound make_noise(double rate_hz, double seconds, double rms, uint64_t seed)
{
    struct random random;
    random_reset(&random, seed);
    struct sound sound = {rate_hz, (uint32_t)(rate_hz * seconds), NULL};
    sound.samples = malloc(sound.n * sizeof *sound.samples);
    for (uint32_t i = 0; i < sound.n; i++)
        sound.samples[i] = (float)(rms * random_normal(&random));
    return sound;
}

/* Adds a sweep of harmonics (amplitudes amplitude / h) that begins and ends over 5 % of its time and decays
 * by fall_db over it; faster in the middle, as no machine sweeps. */
static void add_sweep(struct sound *sound, double start_s, double seconds, double from_hz, double to_hz,
                      double amplitude, uint32_t n_harmonics, double fall_db)
{
    uint32_t n = (uint32_t)(seconds * sound->rate_hz), at = (uint32_t)(start_s * sound->rate_hz);
    double phase = 0;
    for (uint32_t i = 0; i < n && at + i < sound->n; i++) {
        double x = (i + 0.5) / n, edge = fmin(1, fmin(x, 1 - x) / 0.05), sum = 0;
        phase += 2 * pi * (from_hz + (to_hz - from_hz) * (x - 0.08 * sin(2 * pi * x))) / sound->rate_hz;
        for (uint32_t h = 1; h <= n_harmonics; h++)
            sum += sin(h * phase + h) / h;
        sound->samples[at + i] += (float)(amplitude * edge * pow(10, -fall_db * x / 20) * sum);
    }
}

static struct calls *trace(const struct sound *sound, uint32_t piece, uint64_t rejections[][REJECT_COUNT])
{
    struct calls *calls = calloc(1, sizeof *calls);
    struct found_sink sink = {keep, calls};
    struct random random;
    random_reset(&random, piece);
    struct tones *tones = NULL;
    assert_int_equal(tones_create(catalogue->classes, catalogue->n_classes, sound->rate_hz, &tones),
                     STATUS_OK);
    for (uint32_t at = 0; at < sound->n;) {
        uint32_t n = piece ? 1 + (uint32_t)random_between(&random, 0, piece) : 2048;
        n = n < sound->n - at ? n : sound->n - at;
        tones_push(tones, sound->samples + at, n, &sink);
        at += n;
    }
    tones_finish(tones, &sink);
    if (rejections)
        tones_get_rejections(tones, rejections);
    tones_destroy(tones);
    return calls;
}

static uint32_t count_class(const struct calls *calls, const char *name)
{
    uint32_t n = 0, wanted = class_of(name);
    for (uint32_t i = 0; i < calls->n; i++)
        n += calls->calls[i].class_index == wanted;
    return n;
}

static uint32_t count_animals(const struct calls *calls)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < calls->n; i++)
        n += catalogue->classes[calls->calls[i].class_index].animal;
    return n;
}

static void pieces_change_nothing(void **state)
{
    (void)state;
    struct sound sound = make_noise(48000, 12, 1, 1);
    add_sweep(&sound, 3, 0.9, 95, 195, 0.3, 1, 0);
    add_sweep(&sound, 5, 1.5, 300, 500, 0.4, 4, 0);
    add_sweep(&sound, 8, 0.6, 8000, 12000, 0.5, 1, 0);
    struct calls *whole = trace(&sound, 0, NULL);
    assert_int_equal(count_class(whole, "right whale upcall"), 1);
    assert_int_equal(count_class(whole, "delphinid whistle"), 1);
    static const uint32_t pieces[] = {3, 100, 479, 481, 5000, 100000};
    for (size_t i = 0; i < sizeof pieces / sizeof pieces[0]; i++) {
        struct calls *parts = trace(&sound, pieces[i], NULL);
        assert_int_equal(parts->n, whole->n);
        assert_memory_equal(parts->calls, whole->calls, whole->n * sizeof whole->calls[0]);
        free(parts);
    }
    free(whole);
    free(sound.samples);
}

/* Start, end, band and level of a clean sweep against what was put in: 0.5 A^2 for a sine of amplitude A. */
static void measures_are_those_of_the_call(void **state)
{
    (void)state;
    struct sound sound = make_noise(48000, 10, 0.01, 2);
    add_sweep(&sound, 4, 1.0, 100, 190, 0.2, 1, 0);
    struct calls *calls = trace(&sound, 0, NULL);
    assert_int_equal(calls->n, 1);
    const struct found_call *call = &calls->calls[0];
    assert_int_equal(call->class_index, class_of("right whale upcall"));
    assert_near(call->start_frame / 48000, 4, 0.1);
    assert_near(call->end_frame / 48000, 5, 0.1);
    assert_near(call->low_hz, 100, 12);
    assert_near(call->high_hz, 190, 12);
    assert_near(10 * log10(call->mean_square_pa2 / 0.02), 0, 1.5);
    assert_true(call->snr_db > 20);
    double late = ((double)call->known_frame - call->end_frame) / 48000;
    assert_true(late > 0 && late <= catalogue->classes[call->class_index].natural_delay_s + 0.1);
    free(calls);
    free(sound.samples);
}

static void every_rate_finds_what_it_carries(void **state)
{
    (void)state;
    static const double rates[] = {8000, 22050, 44100, 48000, 96000, 192000, 384000};
    for (size_t i = 0; i < sizeof rates / sizeof rates[0]; i++) {
        double rms = sqrt(rates[i] / 48000); /* the same density at every rate */
        struct sound sound = make_noise(rates[i], 9, rms, 3);
        add_sweep(&sound, 2.5, 0.9, 95, 195, 0.35, 1, 0);
        add_sweep(&sound, 4.5, 1.5, 600, 900, 0.5, 1, 0);
        bool whistles = rates[i] > 30000;
        if (whistles)
            add_sweep(&sound, 7, 0.5, 7000, 12000, 0.6, 1, 0);
        struct calls *calls = trace(&sound, 0, NULL);
        assert_int_equal(count_class(calls, "right whale upcall"), 1);
        assert_int_equal(count_class(calls, "humpback song unit"), 1);
        assert_int_equal(count_class(calls, "delphinid whistle"), whistles);
        assert_int_equal(calls->n, 2 + whistles);
        free(calls);
        free(sound.samples);
        struct tones *tones = NULL;
        assert_int_equal(tones_create(catalogue->classes, catalogue->n_classes, rates[i], &tones), STATUS_OK);
        assert_int_equal(tones_can_hear(tones, class_of("delphinid whistle")), whistles);
        assert_true(tones_can_hear(tones, class_of("humpback song unit")));
        for (uint32_t c = 0; c < catalogue->n_classes; c++)
            if (catalogue->classes[c].form == CALL_TRAIN)
                assert_false(tones_can_hear(tones, c));
        assert_false(tones_can_hear(tones, catalogue->n_classes));
        tones_destroy(tones);
    }
}

/* Eight harmonics of one moving fundamental are one call. */
static void a_stack_of_harmonics_is_one_call(void **state)
{
    (void)state;
    struct sound sound = make_noise(44100, 10, 0.02, 4);
    add_sweep(&sound, 3, 1.8, 240, 330, 0.1, 8, 0);
    add_sweep(&sound, 7, 1.0, 300, 1600, 0.1, 4, 0);
    struct calls *calls = trace(&sound, 0, NULL);
    assert_int_equal(calls->n, 2);
    assert_near(calls->calls[0].start_frame / 44100, 3, 0.15);
    assert_near(calls->calls[0].end_frame / 44100, 4.8, 0.15);
    free(calls);
    free(sound.samples);
}

/* A unit at 950 Hz, then a tail at its last frequency that begins 15 dB lower and falls by 8 dB a second. */
static void a_reverberation_tail_is_no_call(void **state)
{
    (void)state;
    struct sound sound = make_noise(44100, 14, 0.02, 5);
    add_sweep(&sound, 3, 1.5, 1150, 950, 0.3, 1, 0);
    add_sweep(&sound, 4.4, 4, 950, 950, 0.3 * pow(10, -15 / 20.0), 1, 32);
    struct calls *calls = trace(&sound, 0, NULL);
    assert_int_equal(calls->n, 1);
    assert_near(calls->calls[0].start_frame / 44100, 3, 0.15);
    assert_true(calls->calls[0].end_frame / 44100 < 5.2);
    free(calls);
    free(sound.samples);
}

/* A ship's lines that are there all the time, and one that is switched on: no calls once learned, and what
 * the switching makes is counted by name. */
static void steady_lines_are_no_calls(void **state)
{
    (void)state;
    struct sound sound = make_noise(48000, 90, 1, 6);
    add_sweep(&sound, 0, 90, 120, 120, 0.5, 6, 0);
    add_sweep(&sound, 20, 70, 700, 700, 0.7, 1, 0);
    uint64_t rejections[CATALOGUE_MAX_CLASSES][REJECT_COUNT];
    struct calls *calls = trace(&sound, 0, rejections);
    assert_true(calls->n <= 1);
    assert_true(rejections[class_of("humpback song unit")][REJECT_STEADY_LINE] > 0);
    free(calls);
    free(sound.samples);
}

/* A line that is switched on and stays: its start is no call, at nearly any level (at one of seven a moan of
 * 12 s is still given). */
static void a_line_that_begins_is_no_call(void **state)
{
    (void)state;
    uint32_t n = 0;
    for (double amplitude = 0.1; amplitude < 2; amplitude *= 1.6) {
        struct sound sound = make_noise(8000, 60, 0.4, 10);
        add_sweep(&sound, 10, 50, 300, 300, amplitude, 1, 0);
        struct calls *calls = trace(&sound, 0, NULL);
        for (uint32_t i = 0; i < calls->n; i++)
            printf("# amplitude %.2f: %s, %.1f to %.1f s\n", amplitude,
                   catalogue->classes[calls->calls[i].class_index].name, calls->calls[i].start_frame / 8000,
                   calls->calls[i].end_frame / 8000);
        n += count_animals(calls);
        free(calls);
        free(sound.samples);
    }
    printf("# figure a line of 300 Hz begins, 8 kHz, 7 levels: %u calls\n", n);
    assert_true(n <= 1);
}

/* A whistle of its own course within a moan that is 20 dB stronger, and two whistles that cross: each is a
 * call. */
static void calls_at_the_same_time_are_told_apart(void **state)
{
    (void)state;
    struct sound sound = make_noise(48000, 14, 0.1, 11);
    add_sweep(&sound, 3, 3, 180, 240, 1, 2, 0);
    add_sweep(&sound, 3.8, 0.8, 9000, 13000, 0.1, 1, 0);
    add_sweep(&sound, 9, 0.9, 6000, 11000, 0.1, 1, 0);
    add_sweep(&sound, 9.1, 0.9, 12000, 7000, 0.1, 1, 0);
    struct calls *calls = trace(&sound, 0, NULL);
    assert_int_equal(count_class(calls, "delphinid whistle"), 3);
    assert_int_equal(calls->n, 4);
    free(calls);
    free(sound.samples);
}

/* Blows: decaying sines of 200 Hz with a broadband front, every 2 s, 30 dB over the noise's rms. */
static void hammer_blows_are_no_calls(void **state)
{
    (void)state;
    struct sound sound = make_noise(48000, 60, 0.1, 7);
    for (double start = 2; start < 59; start += 2)
        for (uint32_t i = 0; i < 24000; i++) {
            double t = i / 48000.0;
            sound.samples[(uint32_t)(start * 48000) + i] +=
                (float)(3 * exp(-t / 0.03) *
                        (sin(2 * pi * 200 * t) + 0.5 * sin(2 * pi * 1130 * t) * exp(-t / 0.005)));
        }
    struct calls *calls = trace(&sound, 0, NULL);
    printf("# figure blows alone, 29 in 58 s: %u calls\n", calls->n);
    assert_true(calls->n <= 1);
    free(calls);
    free(sound.samples);
}

/* A shot 60 dB over the noise while a call sounds: it is broadband, so the call's cells hold no more than
 * before over their background, nothing after it is the call's tail, and most long calls go on through it. */
static void a_shot_makes_no_tail_of_what_follows(void **state)
{
    (void)state;
    int n_through = 0;
    for (uint64_t seed = 0; seed < 5; seed++) {
        struct sound sound = make_noise(8000, 24, 1, 50 + seed);
        struct random random;
        random_reset(&random, 70 + seed);
        add_sweep(&sound, 5.1, 0.9, 95, 195, 0.5, 1, 0);
        add_sweep(&sound, 9, 0.9, 95, 195, 0.5, 1, 0);
        add_sweep(&sound, 14, 3, 250, 300, 0.5, 1, 0);
        static const double shots_s[] = {5.8, 15.5};
        for (int i = 0; i < 2; i++)
            for (uint32_t k = 0; k < 4000; k++)
                sound.samples[(uint32_t)(8000 * shots_s[i]) + k] +=
                    (float)(1000 * exp(-(double)k / 240) * random_normal(&random));
        struct calls *calls = trace(&sound, 0, NULL);
        bool second = false, third = false;
        for (uint32_t i = 0; i < calls->n; i++) {
            double start_s = calls->calls[i].start_frame / 8000, end_s = calls->calls[i].end_frame / 8000;
            second = second || (fabs(start_s - 9) < 0.3 && fabs(end_s - 9.9) < 0.5);
            third = third || (start_s < 14.6 && end_s > 16.6);
        }
        assert_true(second);
        n_through += third;
        free(calls);
        free(sound.samples);
    }
    printf("# figure calls of 3 s with a shot of 60 dB in them that are one call: %d of 5\n", n_through);
    assert_true(n_through >= 2);
}

/* NaN and infinite samples count as 0: calls are still found, and no number is bad (checked in keep). */
static void bad_samples_do_no_harm(void **state)
{
    (void)state;
    struct sound sound = make_noise(48000, 12, 1, 8);
    for (uint32_t i = 48000; i < 48500; i++)
        sound.samples[i] = i % 2 ? NAN : INFINITY;
    sound.samples[100] = -INFINITY;
    sound.samples[200000] = 1e30F;
    for (uint32_t i = 300000; i < 310000; i++)
        sound.samples[i] = 1e-40F;
    add_sweep(&sound, 8, 0.9, 95, 195, 0.35, 1, 0);
    struct calls *calls = trace(&sound, 0, NULL);
    assert_int_equal(count_class(calls, "right whale upcall"), 1);
    free(calls);
    memset(sound.samples, 0, sound.n * sizeof *sound.samples);
    calls = trace(&sound, 0, NULL);
    assert_int_equal(calls->n, 0);
    free(calls);
    free(sound.samples);
}

/* A gap in the middle of a long unit: what came before it is given at the next push, with known_frame before
 * the gap; frames count on over the gap. */
static void a_gap_ends_what_is_open(void **state)
{
    (void)state;
    struct sound sound = make_noise(48000, 12, 0.1, 9);
    add_sweep(&sound, 5, 2, 600, 800, 0.2, 1, 0);
    struct calls *calls = calloc(1, sizeof *calls);
    struct found_sink sink = {keep, calls};
    struct tones *tones = NULL;
    assert_int_equal(tones_create(catalogue->classes, catalogue->n_classes, 48000, &tones), STATUS_OK);
    tones_push(tones, sound.samples, 6 * 48000, &sink);
    assert_int_equal(calls->n, 0);
    tones_reset(tones, 20 * 48000);
    tones_push(tones, sound.samples, 1, &sink);
    assert_int_equal(calls->n, 1);
    assert_near(calls->calls[0].start_frame / 48000, 5, 0.1);
    assert_near(calls->calls[0].end_frame / 48000, 6, 0.15);
    assert_int_equal(calls->calls[0].known_frame, 6 * 48000 - 1);
    tones_push(tones, sound.samples + 1, sound.n - 1, &sink);
    tones_finish(tones, &sink);
    assert_int_equal(calls->n, 2);
    assert_near(calls->calls[1].start_frame / 48000, 25, 0.1);
    tones_destroy(tones);
    free(calls);
    free(sound.samples);
}

static void bad_arguments_are_refused(void **state)
{
    (void)state;
    struct tones *tones = NULL;
    assert_int_equal(tones_create(catalogue->classes, CATALOGUE_MAX_CLASSES + 1, 48000, &tones),
                     STATUS_BAD_ARGUMENT);
    assert_int_equal(tones_create(catalogue->classes, catalogue->n_classes, 10, &tones), STATUS_BAD_ARGUMENT);
    assert_int_equal(tones_create(catalogue->classes, catalogue->n_classes, NAN, &tones),
                     STATUS_BAD_ARGUMENT);
    struct call_class impatient = catalogue->classes[class_of("right whale upcall")];
    impatient.natural_delay_s = 0.01; /* shorter than its window */
    assert_int_equal(tones_create(&impatient, 1, 48000, &tones), STATUS_BAD_ARGUMENT);
    assert_null(tones);
    assert_int_equal(tones_create(NULL, 0, 48000, &tones), STATUS_OK);
    float silence[100] = {0};
    struct calls calls = {0};
    struct found_sink sink = {keep, &calls};
    tones_push(tones, silence, 100, &sink);
    tones_finish(tones, &sink);
    tones_destroy(tones);
    tones_destroy(NULL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(pieces_change_nothing),
        cmocka_unit_test(measures_are_those_of_the_call),
        cmocka_unit_test(every_rate_finds_what_it_carries),
        cmocka_unit_test(a_stack_of_harmonics_is_one_call),
        cmocka_unit_test(a_reverberation_tail_is_no_call),
        cmocka_unit_test(steady_lines_are_no_calls),
        cmocka_unit_test(a_line_that_begins_is_no_call),
        cmocka_unit_test(calls_at_the_same_time_are_told_apart),
        cmocka_unit_test(hammer_blows_are_no_calls),
        cmocka_unit_test(a_shot_makes_no_tail_of_what_follows),
        cmocka_unit_test(bad_samples_do_no_harm),
        cmocka_unit_test(a_gap_ends_what_is_open),
        cmocka_unit_test(bad_arguments_are_refused),
    };
    return cmocka_run_group_tests_name("tones", tests, load, unload);
}
