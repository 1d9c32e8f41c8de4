/* lib/call gate: what the own source covers, and no more. Sounds are made here, so the truth is closed form.
 */
#include "support/test.h"

#include "base/random.h"
#include "call/gate.h"
#include "support/clicks.h"
#include <math.h>
#include <stdlib.h>

#define MAX_MASKED 256
#define RATE 48000.0

struct scene {
    size_t n;
    float *x;
    struct random random;
    uint32_t n_masked;
    struct gate_masked masked[MAX_MASKED];
};

static void take(void *context, const struct gate_masked *masked)
{
    struct scene *scene = context;
    assert_true(scene->n_masked < MAX_MASKED);
    assert_true(masked->end_frame > masked->start_frame);
    scene->masked[scene->n_masked++] = *masked;
}

static struct scene *scene_create(double seconds, uint64_t seed)
{
    struct scene *scene = calloc(1, sizeof *scene);
    assert_non_null(scene);
    scene->n = (size_t)(seconds * RATE);
    scene->x = calloc(scene->n, sizeof(float));
    assert_non_null(scene->x);
    random_reset(&scene->random, seed);
    clicks_add_noise(scene->x, scene->n, 1, &scene->random);
    return scene;
}

static void scene_destroy(struct scene *scene)
{
    free(scene->x);
    free(scene);
}

/* A burst of white noise below cutoff_hz (one pole) or of all frequencies (0) that starts at `amplitude`
 * times the noise and falls as exp(-t / decay_s). */
static void add_burst(struct scene *scene, double at_s, double amplitude, double decay_s, double cutoff_hz)
{
    double low[3] = {0}, a = cutoff_hz > 0 ? 1 - exp(-2 * M_PI * cutoff_hz / RATE) : 1;
    for (size_t k = (size_t)(at_s * RATE); k < scene->n; k++) {
        double t = (double)k / RATE - at_s;
        if (t > 20 * decay_s)
            break;
        low[0] += a * (random_normal(&scene->random) - low[0]);
        for (int s = 1; s < 3; s++)
            low[s] += a * (low[s - 1] - low[s]);
        scene->x[k] += (float)(amplitude * exp(-t / decay_s) * low[2] / sqrt(a));
    }
}

/* Pushes all, tells of an impulse late_s after each onset. */
static void run(struct scene *scene, struct gate *gate, const double *onsets_s, int n_onsets, double late_s,
                uint32_t chunk)
{
    struct gate_masked_sink sink = {take, scene};
    gate_reset(gate, 0);
    int next = 0;
    for (size_t at = 0; at < scene->n;) {
        size_t n = chunk < scene->n - at ? chunk : scene->n - at;
        if (next < n_onsets) { /* an impulse is told exactly after its known frame, as listen does */
            size_t known = (size_t)((onsets_s[next] + late_s) * RATE);
            if (at == known) {
                gate_push_impulse(gate, onsets_s[next++] * RATE, 0.05, &sink);
                continue;
            }
            n = known > at && known - at < n ? known - at : n;
        }
        gate_push(gate, scene->x + at, (uint32_t)n, &sink);
        at += n;
    }
}

/* A decay of exp(-t / tau) in amplitude meets its background plus 3 dB (twice the power, so power equal to
 * the background's own) at t = tau ln(amplitude) for white noise in both. */
static void the_mask_ends_where_the_sound_does(void **state)
{
    (void)state;
    static const double decays_s[] = {0.02, 0.1, 0.3};
    for (int d = 0; d < 3; d++)
        for (uint64_t seed = 0; seed < 5; seed++) {
            struct gate *gate;
            assert_int_equal(gate_create(RATE, 2, &gate), STATUS_OK);
            struct scene *scene = scene_create(8, seed);
            double onset = 3, amplitude = 100, wanted_s = decays_s[d] * log(amplitude);
            add_burst(scene, onset, amplitude, decays_s[d], 0);
            run(scene, gate, &onset, 1, 1.2, 2048);
            assert_int_equal(scene->n_masked, 3); /* each band that 48 kHz carries, once */
            for (uint32_t m = 0; m < scene->n_masked; m++) {
                double start_s = scene->masked[m].start_frame / RATE,
                       end_s = scene->masked[m].end_frame / RATE;
                assert_true(start_s <= onset && start_s > onset - 0.02);
                /* 20 ms steps of chance: in the lowest band a step's power has a deviation of 1.4 dB, a tenth
                   of a decay time each dB */
                assert_near(end_s - onset, wanted_s, 0.02 + 0.5 * decays_s[d]);
            }
            assert_true(gate_hides(gate, 3 * RATE, (3 + wanted_s) * RATE, 100, 500));
            assert_true(gate_hides(gate, 3.01 * RATE, 3.02 * RATE, 6000, 12000));
            assert_false(gate_hides(gate, 2 * RATE, 2.9 * RATE, 100, 500));
            assert_false(
                gate_hides(gate, (3.1 + 1.5 * wanted_s) * RATE, (3.2 + 1.5 * wanted_s) * RATE, 6000, 12000));
            /* a call that lasts more than twice as long as the mask is not hidden */
            assert_false(gate_hides(gate, 2.5 * RATE, (3.5 + 2 * wanted_s) * RATE, 6000, 12000));
            scene_destroy(scene);
            gate_destroy(gate);
        }
}

static void a_band_without_the_impulse_stays_open(void **state)
{
    (void)state;
    struct gate *gate;
    assert_int_equal(gate_create(RATE, 2, &gate), STATUS_OK);
    struct scene *scene = scene_create(8, 3);
    double onset = 3;
    add_burst(scene, onset, 30, 0.05, 300); /* three poles at 300 Hz: more than 50 dB down at 5 kHz */
    run(scene, gate, &onset, 1, 0.5, 2048);
    bool low = false;
    for (uint32_t m = 0; m < scene->n_masked; m++) {
        low = low || scene->masked[m].low_hz < 1000;
        assert_true(scene->masked[m].low_hz < 5000);
    }
    assert_true(low);
    assert_true(gate_hides(gate, 3 * RATE, 3.1 * RATE, 100, 400));
    assert_false(gate_hides(gate, 3 * RATE, 3.1 * RATE, 6000, 15000));
    scene_destroy(scene);
    gate_destroy(gate);
}

/* Ghost cavitation: a burst above 5 kHz 10 ms after the main peak. */
/* A whistle 40 dB over the noise that sounds on through and after a blow must not be hidden by it. */
static void an_animal_after_the_blow_is_not_hidden(void **state)
{
    (void)state;
    for (uint64_t seed = 0; seed < 5; seed++) {
        struct gate *gate;
        assert_int_equal(gate_create(RATE, 2, &gate), STATUS_OK);
        struct scene *scene = scene_create(8, 40 + seed);
        double onset = 3, from_s = 2.9 + 0.05 * (double)seed, to_s = from_s + 0.8;
        add_burst(scene, onset, 1000, 0.03, 0);
        for (size_t k = (size_t)(from_s * RATE); k < (size_t)(to_s * RATE); k++)
            scene->x[k] += (float)(100 * sin(2 * M_PI * 9000 * (double)k / RATE));
        run(scene, gate, &onset, 1, 1.2, 2048);
        assert_false(gate_hides(gate, from_s * RATE, to_s * RATE, 8500, 9500));
        assert_true(gate_hides(gate, onset * RATE, (onset + 0.06) * RATE, 8500, 9500));
        scene_destroy(scene);
        gate_destroy(gate);
    }
}

static void a_late_burst_is_taken_along(void **state)
{
    (void)state;
    struct gate *gate;
    assert_int_equal(gate_create(RATE, 2, &gate), STATUS_OK);
    struct scene *scene = scene_create(8, 4);
    double onset = 3;
    add_burst(scene, onset, 30, 0.05, 300);
    add_burst(scene, onset + 0.010, 30, 0.003, 0);
    run(scene, gate, &onset, 1, 0.5, 2048);
    assert_true(gate_hides(gate, 3.010 * RATE, 3.016 * RATE, 6000, 15000));
    assert_false(gate_hides(gate, 3.050 * RATE, 3.1 * RATE, 6000, 15000));
    scene_destroy(scene);
    gate_destroy(gate);
}

/* A reverberation that outlasts the impulse finder's delay: the stretch is given when it ends; blows that
 * follow inside it are one stretch with it; chunks do not matter. */
static void long_sounds_and_chunks(void **state)
{
    (void)state;
    static const uint32_t chunks[] = {4096, 77};
    struct scene *scenes[2];
    for (int c = 0; c < 2; c++) {
        struct gate *gate;
        assert_int_equal(gate_create(RATE, 2, &gate), STATUS_OK);
        scenes[c] = scene_create(12, 5);
        static const double onsets[] = {3, 3.8, 4.6};
        for (int k = 0; k < 3; k++)
            add_burst(scenes[c], onsets[k], 100, 0.4, 0);
        run(scenes[c], gate, onsets, 3, 0.5, chunks[c]);
        gate_destroy(gate);
    }
    assert_int_equal(scenes[0]->n_masked, scenes[1]->n_masked);
    assert_memory_equal(scenes[0]->masked, scenes[1]->masked,
                        scenes[0]->n_masked * sizeof scenes[0]->masked[0]);
    /* A blow that comes while the one before still sounds ends that one's stretch, and begins its own when it
     * is known: what counts is that no band is left open for long. */
    static const double lows_hz[] = {50, 1000, 5000};
    double end_s = 4.6 + 0.4 * log(100);
    for (int b = 0; b < 3; b++) {
        double covered_s = 0, last_s = 0;
        for (uint32_t m = 0; m < scenes[0]->n_masked; m++)
            if (scenes[0]->masked[m].low_hz == lows_hz[b]) {
                assert_true(scenes[0]->masked[m].start_frame / RATE > 2.98);
                covered_s += (scenes[0]->masked[m].end_frame - scenes[0]->masked[m].start_frame) / RATE;
                last_s = scenes[0]->masked[m].end_frame / RATE;
            }
        assert_near(last_s, end_s, 0.25);
        assert_true(covered_s > 0.85 * (end_s - 3) && covered_s <= last_s - 2.98);
    }
    scene_destroy(scenes[0]);
    scene_destroy(scenes[1]);
}

static void no_mask_is_longer_than_it_may_be(void **state)
{
    (void)state;
    struct gate *gate;
    assert_int_equal(gate_create(RATE, 2, &gate), STATUS_OK);
    struct scene *scene = scene_create(15, 6);
    for (size_t k = (size_t)(3 * RATE); k < scene->n;
         k++) /* the noise rises by 20 dB at the blow and stays */
        scene->x[k] *= 10;
    double onset = 3;
    run(scene, gate, &onset, 1, 0.5, 2048);
    for (uint32_t m = 0; m < scene->n_masked; m++)
        assert_true(scene->masked[m].end_frame - scene->masked[m].start_frame <=
                    (GATE_LONGEST_S + 0.02) * RATE);
    /* an impulse out of memory, or in the future, masks nothing */
    uint32_t before = scene->n_masked;
    struct gate_masked_sink sink = {take, scene};
    gate_push_impulse(gate, 16 * RATE, 0.05, &sink);
    assert_int_equal(scene->n_masked, before);
    scene_destroy(scene);
    gate_destroy(gate);
    assert_int_equal(gate_create(4000, 2, &gate), STATUS_BAD_ARGUMENT);
    assert_int_equal(gate_create(RATE, 100, &gate), STATUS_BAD_ARGUMENT);
    gate_destroy(NULL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_mask_ends_where_the_sound_does),
        cmocka_unit_test(a_band_without_the_impulse_stays_open),
        cmocka_unit_test(an_animal_after_the_blow_is_not_hidden),
        cmocka_unit_test(a_late_burst_is_taken_along),
        cmocka_unit_test(long_sounds_and_chunks),
        cmocka_unit_test(no_mask_is_longer_than_it_may_be),
    };
    return cmocka_run_group_tests_name("gate", tests, NULL, NULL);
}
