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
            assert_in_range(scene->n_masked, 3, 4); /* each band that 48 kHz carries, once */
            for (uint32_t m = 0; m < scene->n_masked; m++) {
                double start_s = scene->masked[m].start_frame / RATE,
                       end_s = scene->masked[m].end_frame / RATE;
                if (scene->masked[m].low_hz <
                    50) { /* a band of 40 Hz: its look of 125 ms has five dB of chance */
                    assert_true(start_s > onset - 0.02 && start_s < onset + 0.15);
                    assert_true(end_s < onset + wanted_s + 0.5 + decays_s[d]);
                    continue;
                }
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

/* Ghost cavitation: a burst above 5 kHz 10 ms after the main peak. */
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

/* Onsets of shots each 10 s (a few ms off) from 2 s on. */
static int add_shots(struct scene *scene, double *onsets_s, double tail_s)
{
    int n = 0;
    for (double at = 2; at < (double)scene->n / RATE - 1; at += 10) {
        onsets_s[n] = at + random_between(&scene->random, -0.004, 0.004);
        add_burst(scene, onsets_s[n], 300, 0.03, 0);
        if (tail_s > 0)
            add_burst(scene, onsets_s[n] + 0.05, 20, tail_s, 300);
        n++;
    }
    return n;
}

/* From the fifth shot on the gate is open within 25 ms of the arrival, though the impulse is told 1.2 s
 * later; before it, and where a shot fails, it is shut. What it masks is what it masks without expecting. */
static void expected_shots_open_the_gate_as_they_arrive(void **state)
{
    (void)state;
    double onsets_s[8];
    struct gate *gate;
    assert_int_equal(gate_create(RATE, 3, &gate), STATUS_OK);
    struct scene *scene = scene_create(70, 11);
    int n_onsets = add_shots(scene, onsets_s, 0);
    struct gate_masked_sink sink = {take, scene};
    int told = 0, n_at_once = 0;
    const size_t step = 240;
    for (size_t at = 0; at + step <= scene->n; at += step) {
        if (told < n_onsets && (double)at / RATE > onsets_s[told] + 1.2)
            gate_push_impulse(gate, onsets_s[told++] * RATE, 0.05, &sink);
        gate_push(gate, scene->x + at, (uint32_t)step, &sink);
        for (int i = 0; i < n_onsets; i++) {
            double since_s = (double)(at + step) / RATE - onsets_s[i];
            if (since_s < 0.025 || since_s >= 0.030)
                continue;
            bool hides = gate_hides(gate, onsets_s[i] * RATE, (double)(at + step), 6000, 12000);
            assert_int_equal(hides, i >= 4);
            n_at_once += hides;
            assert_false(
                gate_hides(gate, (onsets_s[i] - 0.1) * RATE, (onsets_s[i] - 0.02) * RATE, 6000, 12000));
        }
    }
    assert_int_equal(n_at_once, n_onsets - 4);
    double masked_s = 0;
    for (uint32_t m = 0; m < scene->n_masked; m++)
        if (scene->masked[m].low_hz >= 5000)
            masked_s += (scene->masked[m].end_frame - scene->masked[m].start_frame) / RATE;
    assert_near(masked_s / n_onsets, 0.03 * log(300), 0.035);
    scene_destroy(scene);
    gate_destroy(gate);
}

/* An animal's pulse at the expected time, 15 dB weaker than shots are there, opens nothing; nor does one as
 * loud beside the beat. */
static void what_is_not_the_expected_shot_opens_nothing(void **state)
{
    (void)state;
    static const struct {
        double amplitude, late_s;
    } pulses[] = {{300 * 0.17, 0}, {300, 1.5}};
    for (int p = 0; p < 2; p++) {
        double onsets_s[8];
        struct gate *gate;
        assert_int_equal(gate_create(RATE, 3, &gate), STATUS_OK);
        struct scene *scene = scene_create(55, 12);
        int n_onsets = add_shots(scene, onsets_s, 0);
        for (size_t k = (size_t)(51 * RATE); k < scene->n; k++) /* the last shot is none */
            scene->x[k] = (float)random_normal(&scene->random);
        add_burst(scene, 52 + pulses[p].late_s, pulses[p].amplitude, 0.03, 0);
        struct gate_masked_sink sink = {take, scene};
        int told = 0;
        for (size_t at = 0; at + 240 <= scene->n; at += 240) {
            if (told < n_onsets - 1 && (double)at / RATE > onsets_s[told] + 1.2)
                gate_push_impulse(gate, onsets_s[told++] * RATE, 0.05, &sink);
            gate_push(gate, scene->x + at, 240, &sink);
        }
        assert_false(
            gate_hides(gate, (52 + pulses[p].late_s) * RATE, (52.1 + pulses[p].late_s) * RATE, 100, 800));
        assert_false(
            gate_hides(gate, (52 + pulses[p].late_s) * RATE, (52.1 + pulses[p].late_s) * RATE, 6000, 9000));
        scene_destroy(scene);
        gate_destroy(gate);
    }
}

/* A tail of exp(-t / tau), 300 Hz wide at most, is known per time since the shot after three shots: its power
 * over the noise's falls by 8.7 dB a tau, and it adds nothing in the higher bands. */
static void the_floor_between_shots_is_that_of_its_time(void **state)
{
    (void)state;
    double onsets_s[8];
    struct gate *gate;
    assert_int_equal(gate_create(RATE, 3, &gate), STATUS_OK);
    struct scene *scene = scene_create(70, 13);
    const double tau_s = 0.8;
    int n_onsets = add_shots(scene, onsets_s, tau_s), told = 0;
    double at_1_s = 0, at_2_s = 0, at_8_s = 0;
    for (size_t at = 0; at + 240 <= scene->n; at += 240) {
        if (told < n_onsets && (double)at / RATE > onsets_s[told] + 1.2)
            gate_push_impulse(gate, onsets_s[told++] * RATE, 0.05, NULL);
        gate_push(gate, scene->x + at, 240, NULL);
        double since_s = (double)at / RATE - onsets_s[n_onsets - 1];
        struct gate_tail tail;
        gate_get_tail(gate, &tail);
        assert_true(tail.n == 4 && tail.bands[1].low_hz == 50 && tail.bands[1].high_hz == 1000);
        if (since_s > 1.1 && since_s < 1.11)
            at_1_s = tail.bands[1].ratio;
        if (since_s > 2.1 && since_s < 2.11)
            at_2_s = tail.bands[1].ratio;
        if (since_s > 7.1 && since_s < 7.11)
            at_8_s = tail.bands[1].ratio;
        if (told < 3)
            assert_true(tail.bands[1].ratio == 1);
        if (since_s > 1)
            assert_true(tail.bands[3].ratio < 1.3F);
    }
    printf("# figure tail of tau 0.8 s over the noise, 50 Hz to 1 kHz: %.1f dB 1.1 s after a shot, %.1f dB "
           "at 2.1 s, "
           "%.1f dB at 7.1 s\n",
           10 * log10(at_1_s), 10 * log10(at_2_s), 10 * log10(at_8_s));
    assert_near(10 * log10(at_1_s / at_2_s), 8.686 / tau_s, 3);
    assert_true(at_8_s < 1.3);
    scene_destroy(scene);
    gate_destroy(gate);
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
        cmocka_unit_test(expected_shots_open_the_gate_as_they_arrive),
        cmocka_unit_test(what_is_not_the_expected_shot_opens_nothing),
        cmocka_unit_test(the_floor_between_shots_is_that_of_its_time),
        cmocka_unit_test(no_mask_is_longer_than_it_may_be),
    };
    return cmocka_run_group_tests_name("gate", tests, NULL, NULL);
}
