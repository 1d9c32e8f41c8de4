/* What is an impulse and what is none, in the simulated sea (lib/scene) with its wind, ships and surface:
 * guns from a shot each 2.5 s to one in 5 min, single charges with their bubble pulses, blows at 1 to 120 a
 * minute, each 10 dB above the noise; and every animal that the simulator knows, loud. */
#include "support/test.h"

#include "level/impulses.h"
#include "scene/render.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SEED 407
#define PIECE 4096
#define MAX_FOUND 2048

struct found {
    uint32_t n;
    struct found_impulse impulse[MAX_FOUND];
    struct impulse_rejections rejections;
};

static struct scene scene;
static struct found found;

static void keep(void *context, const struct found_impulse *impulse)
{
    (void)context;
    assert_true(found.n < MAX_FOUND);
    found.impulse[found.n++] = *impulse;
}

/* One hydrophone, 12 m down at the origin. */
static void make_sea(double rate_hz, double seconds)
{
    scene_reset(&scene);
    scene.seed = SEED;
    scene.rate_hz = rate_hz;
    scene.duration_s = seconds;
    scene.sea.ambient = true;
    scene.sea.wind_m_s = 6;
    scene.sea.shipping = 0.5;
    scene.sea.surface_reflection = 0.9;
    scene.n_hydrophones = 1;
    scene.hydrophones[0].place.z_m = 12;
    scene.hydrophones[0].calibration =
        (struct calibration){.known = true, .sensitivity_db = -200, .full_scale_v = 1, .self_noise_db = NAN};
}

/* Renders the scene and listens; `add`, where given, is added in pascals from a frame on. */
static void listen(const float *add, uint64_t add_at, uint32_t n_add)
{
    struct render *render;
    struct impulse_finder *finder;
    static float frames[PIECE];
    const double scale = calibration_pa_per_unit(&scene.hydrophones[0].calibration);
    const struct impulse_sink sink = {.take = keep};
    assert_int_equal(render_create(&scene, &render), STATUS_OK);
    assert_int_equal(impulse_finder_create(scene.rate_hz, scale, false, &finder), STATUS_OK);
    found.n = 0;
    for (uint64_t at = 0; at + PIECE <= (uint64_t)(scene.duration_s * scene.rate_hz); at += PIECE) {
        render_get(render, at, frames, PIECE);
        for (uint32_t i = 0; i < PIECE; i++) {
            frames[i] = (float)(frames[i] * scale);
            if (at + i >= add_at && at + i < add_at + n_add)
                frames[i] += add[at + i - add_at];
        }
        impulse_finder_push(finder, frames, PIECE, &sink);
    }
    impulse_finder_get_rejections(finder, &found.rejections);
    impulse_finder_destroy(finder);
    render_destroy(render);
}

/* rms over T90 above the background, dB: least of all. */
static double least_ratio_db(void)
{
    double least = INFINITY;
    for (uint32_t i = 0; i < found.n; i++)
        least = fmin(least, found.impulse[i].rms90_db - found.impulse[i].background_db);
    return least;
}

/* Hears the scene twice: its source at *level_db, then so much weaker that the impulses are about 11.5 dB
 * above the noise. wanted: how many there are. */
static void check_faint(const char *what, double *level_db, uint32_t wanted)
{
    listen(NULL, 0, 0);
    uint32_t loud = found.n;
    double over_db = least_ratio_db() - 11.5;
    *level_db -= over_db;
    listen(NULL, 0, 0);
    printf("# figure %s: %u of %u found loud, %u at %.1f dB above the noise (the least of them), %.1f dB "
           "weaker, seed %d\n",
           what, loud, wanted, found.n, least_ratio_db(), over_db, SEED);
    assert_int_equal(loud, wanted);
    assert_int_equal(found.n, wanted);
    assert_true(least_ratio_db() < 13);
}

/* Intervals of guns are common practice, no source. */
static void shots_are_found(void **state)
{
    (void)state;
    static const double interval_s[] = {2.5, 5, 10, 60, 300};
    for (int i = 0; i < 5; i++) {
        if (test_length() == TEST_SHORT && i > 2)
            break;
        char what[80];
        snprintf(what, sizeof what, "a shot each %.1f s", interval_s[i]);
        double seconds = fmax(60, 3.5 * interval_s[i]);
        make_sea(24000, seconds);
        scene.n_airguns = 1;
        scene.airguns[0] = (struct scene_airguns){.track = {.at_start = {900, 0, 6}},
                                                  .start_s = 3,
                                                  .end_s = seconds - 2,
                                                  .shot_interval_s = interval_s[i],
                                                  .source_energy_level_db = 210};
        check_faint(what, &scene.airguns[0].source_energy_level_db,
                    (uint32_t)ceil((seconds - 5) / interval_s[i]));
    }
}

static void blows_are_found(void **state)
{
    (void)state;
    static const double interval_s[] = {0.5, 1, 2, 6, 60, 1e4};
    for (int i = 0; i < 6; i++) {
        char what[80];
        snprintf(what, sizeof what, i < 5 ? "a blow each %.1f s" : "one blow", interval_s[i]);
        double seconds = i == 4 ? 200 : 60;
        make_sea(24000, seconds);
        scene.n_hammers = 1;
        scene.hammers[0] = scene_hammer_of();
        scene.hammers[0].track.at_start = (struct scene_place){750, 0, 10};
        scene.hammers[0].start_s = 3;
        scene.hammers[0].n_steps = 1;
        scene.hammers[0].interval_spread = 0;
        scene.hammers[0].level_spread_db = 0;
        scene.hammers[0].steps[0] = (struct scene_step){seconds - 5, interval_s[i], 190};
        check_faint(what, &scene.hammers[0].steps[0].source_energy_level_db,
                    (uint32_t)ceil((seconds - 5) / interval_s[i]));
    }
}

/* A charge: a shock that falls by e in 0.5 ms, and bubble pulses (Cole, "Underwater explosions", 1948, from
 * memory: the first after 2.11 W^(1/3) / (depth + 10)^(5/6) s, longer than the shock, about a fifth of its
 * peak; the second after 0.7 of that time more, half of the first). Up to 0.3 s, which is 12 kg at 20 m, the
 * first is part of the charge; of a larger one each bubble pulse that is nearly as strong in 24 ms is an
 * impulse of its own, so that its energy counts. */
static void a_charge_is_one_impulse(void **state)
{
    (void)state;
    static const double period_s[] = {0.05, 0.1, 0.2, 0.27, 0.4, 0.55, 0.8};
    enum { RATE = 48000, N = 2 * RATE };
    static float wave[N];
    for (int k = 0; k < 7; k++) {
        for (int i = 0; i < N; i++) {
            double t = (i + 0.5) / RATE - 0.01, first = fabs(t - period_s[k]),
                   second = fabs(t - 1.7 * period_s[k]);
            wave[i] = (float)((t > 0 ? 100 * exp(-t / 0.0005) : 0) + 20 * exp(-first / 0.003) +
                              10 * exp(-second / 0.004));
        }
        make_sea(RATE, 20);
        listen(wave, 10 * RATE, N);
        printf("# figure a charge with a bubble pulse after %.2f s: %u impulses, the first SEL %.1f dB\n",
               period_s[k], found.n, found.n ? found.impulse[0].sel_db : (double)NAN);
        assert_in_range(found.n, 1, period_s[k] < 0.3 ? 1 : 3);
        /* 100^2 Pa2 x 0.25 ms + 20^2 x 3 ms [+ 10^2 x 4 ms, of the second: not in it where it comes after 0.3
         * s and 60 ms of quiet]: 126.13 or 125.68 dB re 1 uPa2 s */
        if (period_s[k] < 0.3)
            assert_near(found.impulse[0].sel_db, period_s[k] < 0.25 ? 126.13 : 125.68, 0.15);
        assert_near(found.impulse[0].onset_frame / RATE, 10.01, 0.001);
        assert_near(found.impulse[0].peak_db, 160, 0.3); /* 100 Pa, less what falls between two samples */
    }
}

static void animals_are_no_impulses(void **state)
{
    (void)state;
    uint64_t opened = 0;
    static const char *const voices[] = {"humpback song",      "fin whale pulse",     "blue whale moan",
                                         "right whale upcall", "delphinid whistle",   "delphinid clicks",
                                         "sperm whale clicks", "beaked whale clicks", "porpoise clicks"};
    for (size_t voice = 0; voice < sizeof voices / sizeof voices[0]; voice++)
        for (int far = 0; far < 2; far++) {
            bool clicks = strstr(voices[voice], "clicks") != NULL;
            make_sea(clicks ? 384000 : 24000, clicks ? 15 : test_length() == TEST_SHORT ? 60 : 300);
            scene.n_animals = 1;
            scene.animals[0] = scene_emitter_of(voices[voice]);
            scene.animals[0].track.at_start = (struct scene_place){far ? 1500 : 150, 0, 20};
            scene.animals[0].start_s = 1;
            scene.animals[0].end_s = scene.duration_s - 1;
            listen(NULL, 0, 0);
            const struct impulse_rejections *r = &found.rejections;
            assert_int_equal(found.n, 0);
            opened += r->too_weak + r->high + r->slow + r->call + r->echo;
            printf("# figure %s at %s m, %.0f s, seed %d: %u impulses; windows that opened and were none: %u "
                   "too weak, %u high, "
                   "%u not sudden, %u like a call, %u echoes\n",
                   voices[voice], far ? "1500" : "150", scene.duration_s, SEED, found.n,
                   (unsigned)r->too_weak, (unsigned)r->high, (unsigned)r->slow, (unsigned)r->call,
                   (unsigned)r->echo);
        }
    assert_in_range(opened, 20, 100000); /* they were loud enough to be looked at */
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(shots_are_found),
        cmocka_unit_test(blows_are_found),
        cmocka_unit_test(a_charge_is_one_impulse),
        cmocka_unit_test(animals_are_no_impulses),
    };
    return cmocka_run_group_tests_name("sounds that are impulses", tests, NULL, NULL);
}
