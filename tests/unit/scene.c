/* lib/scene against closed forms: levels, delays, sameness, what is refused. */
#include "support/test.h"

#include "base/random.h"
#include "base/units.h"
#include "scene/kind.h"
#include "scene/path.h"
#include "scene/render.h"
#include "scene/schedule.h"
#include <math.h>
#include <stdlib.h>

static struct scene scene;

static int fresh(void **state)
{
    (void)state;
    scene_reset(&scene);
    scene.duration_s = 10;
    scene.sea.ambient = false;
    scene.n_hydrophones = 1;
    scene.hydrophones[0].place = (struct scene_place){0, 0, 15};
    /* 1 V/Pa and 10 V at full scale: 10 Pa, so that a level is easy to follow. */
    scene.hydrophones[0].calibration =
        (struct calibration){.known = true, .sensitivity_db = -120, .full_scale_v = 10};
    return 0;
}

static void listen_near(void)
{
    scene.hydrophones[0].calibration.full_scale_v = 1e6;
}

static void set(const char *key, double value)
{
    assert_int_equal(scene_emitter_set(&scene.animals[0], key, value), STATUS_OK);
}

static float *render_all(uint64_t first, uint32_t n)
{
    struct render *render;
    assert_int_equal(render_create(&scene, &render), STATUS_OK);
    float *out = malloc((size_t)n * scene.n_hydrophones * sizeof *out);
    assert_non_null(out);
    render_get(render, first, out, n);
    render_destroy(render);
    return out;
}

static double pa(void)
{
    return calibration_pa_per_unit(&scene.hydrophones[0].calibration);
}

/* Received level of a tone: source level - 20 lg(range) - absorption * range, Francois and Garrison (1982).
 * At 1 kHz, 10 degree Celsius, salinity 35, pH 8 the absorption is 0.0601261 dB/km, at 20 kHz 3.34971 dB/km.
 */
static void a_tone_has_the_level_of_the_sonar_equation(void **state)
{
    (void)state;
    static const struct {
        double hz, absorption_db_km;
    } tones[] = {{1000, 0.0601261}, {20000, 3.34971}};
    for (int t = 0; t < 2; t++)
        for (double range_m = 30; range_m < 4000; range_m *= 4) {
            fresh(NULL);
            scene.sea.salinity = 35;
            scene.sea.depth_m = 0;
            scene.n_animals = 1;
            scene.animals[0] = scene_emitter_of("tone");
            set("frequency_hz", tones[t].hz);
            set("length_s", 4);
            scene.animals[0].end_s = 1; /* one call */
            scene.animals[0].source_level_db = 150;
            scene.animals[0].track.at_start = (struct scene_place){range_m, 0, 15};
            float *out = render_all(0, 8 * 48000);
            double exposure = 0;
            for (int i = 0; i < 8 * 48000; i++)
                exposure += (double)out[i] * (double)out[i] * pa() * pa() / 48000;
            double want_db = 150 - 20 * log10(range_m) - tones[t].absorption_db_km * range_m / 1e3;
            assert_near(units_spl_db(exposure / 4), want_db, 0.01);
            free(out);
        }
}

/* Received SEL of a blow: source energy level - 20 lg(range); absorption of its highest part is under 0.1 dB.
 */
static void a_blow_has_its_energy(void **state)
{
    (void)state;
    for (double range_m = 50; range_m < 1000; range_m *= 3) {
        fresh(NULL);
        listen_near();
        scene.n_hammers = 1;
        scene.hammers[0] = scene_hammer_of();
        scene.hammers[0].level_spread_db = 0;
        scene.hammers[0].track.at_start = (struct scene_place){0, range_m, 15};
        scene.hammers[0].n_steps = 1;
        scene.hammers[0].steps[0] = (struct scene_step){1, 2, 205};
        float *out = render_all(0, 3 * 48000);
        double exposure = 0;
        for (int i = 0; i < 3 * 48000; i++)
            exposure += (double)out[i] * (double)out[i] * pa() * pa() / 48000;
        assert_near(units_sel_db(exposure), 205 - 20 * log10(range_m), 0.1);
        free(out);
    }
}

/* Zero-to-peak level of a pulse; sampled four times a cycle or more, the highest sample is within 0.4 dB. */
static void a_click_has_its_peak(void **state)
{
    (void)state;
    listen_near();
    scene.rate_hz = 768000;
    scene.n_animals = 1;
    scene.animals[0] = scene_emitter_of("porpoise clicks");
    scene.animals[0].source_level_db = 170;
    scene.animals[0].pulses = 9; /* the strongest in the middle */
    scene.animals[0].pulse_interval_s = 0.05;
    scene.animals[0].track.at_start = (struct scene_place){2, 0, 15};
    float *out = render_all(0, 768000);
    double peak = 0;
    for (int i = 0; i < 768000; i++)
        peak = fmax(peak, fabs((double)out[i]) * pa());
    assert_near(units_peak_db(peak), 170 - 20 * log10(2) - 0.08, 0.4);
    free(out);
}

/* Two hydrophones hear the same tone, one later by path / speed of sound: the phase says so to a thousandth
 * of a sample. */
static void delays_are_exact_to_a_fraction_of_a_sample(void **state)
{
    (void)state;
    scene.n_animals = 1;
    scene.animals[0] = scene_emitter_of("tone");
    set("frequency_hz", 1000);
    set("length_s", 6);
    scene.animals[0].track.at_start = (struct scene_place){300, 40, 12};
    scene.n_hydrophones = 2;
    scene.hydrophones[1] = scene.hydrophones[0];
    scene.hydrophones[1].place = (struct scene_place){-0.4, 0.1, 14};
    struct path_sea sea = path_sea_of(&scene);
    double range_m[2], phase[2];
    float *out = render_all(0, 4 * 48000);
    for (uint32_t c = 0; c < 2; c++) {
        range_m[c] = path_range_m(&sea, &scene.animals[0].track.at_start, c, false);
        double re = 0, im = 0;
        for (int i = 2 * 48000; i < 4 * 48000; i++) {
            double angle = 2 * M_PI * 1000 * i / 48000.0;
            re += (double)out[2 * i + (int)c] * cos(angle);
            im -= (double)out[2 * i + (int)c] * sin(angle);
        }
        phase[c] = atan2(im, re);
    }
    double delay_s = remainder(phase[0] - phase[1], 2 * M_PI) / (2 * M_PI * 1000);
    assert_near(delay_s * 48000, (range_m[1] - range_m[0]) / sea.speed_m_s * 48000, 1e-3);
    free(out);
}

/* A source that comes nearer at v sounds higher by v / (c - v), and is louder at the end. */
static void a_moving_source_has_doppler(void **state)
{
    (void)state;
    scene.n_animals = 1;
    scene.animals[0] = scene_emitter_of("tone");
    set("frequency_hz", 1000);
    set("length_s", 9);
    scene.animals[0].track =
        (struct scene_track){.at_start = {600, 0, 15}, .course_deg = 180, .speed_m_s = 8};
    struct path_sea sea = path_sea_of(&scene);
    float *out = render_all(0, 8 * 48000);
    double phase[2];
    for (int part = 0; part < 2; part++) { /* phase against 1 kHz in two windows 2 s apart */
        double re = 0, im = 0;
        int from = (3 + 2 * part) * 48000;
        for (int i = from; i < from + 4800; i++) {
            double angle = 2 * M_PI * 1000 * i / 48000.0;
            re += (double)out[i] * cos(angle);
            im -= (double)out[i] * sin(angle);
        }
        phase[part] = atan2(im, re);
    }
    double expected_cycles = 2.0 * 1000 * 8 / (sea.speed_m_s - 8);
    assert_near(remainder((phase[1] - phase[0]) / (2 * M_PI) - expected_cycles, 1.0), 0, 0.01);
    free(out);
}

/* With a mirror for a surface: p = e1/R1 - e2/R2 (Jensen et al., "Computational ocean acoustics", the Lloyd
 * mirror).
 */
static void the_surface_makes_a_lloyd_mirror(void **state)
{
    (void)state;
    scene.sea.surface_reflection = 1;
    scene.n_animals = 1;
    scene.animals[0] = scene_emitter_of("tone");
    set("frequency_hz", 500);
    set("length_s", 6);
    scene.animals[0].source_level_db = 160;
    scene.animals[0].track.at_start = (struct scene_place){200, 0, 7};
    struct path_sea sea = path_sea_of(&scene);
    double k = 2 * M_PI * 500 / sea.speed_m_s, r1 = hypot(200, 15 - 7), r2 = hypot(200, 15 + 7);
    double re = cos(k * r1) / r1 - cos(k * r2) / r2, im = sin(k * r1) / r1 - sin(k * r2) / r2;
    float *out = render_all(0, 4 * 48000);
    double sum = 0;
    for (int i = 2 * 48000; i < 4 * 48000; i++)
        sum += (double)out[i] * (double)out[i] * pa() * pa() / 96000;
    /* Mean square over the whole tapered length is the source level's; in the middle it is 1 / (1 - 5/8
     * taper). */
    double want_db = 160 + units_amplitude_db(hypot(re, im)) - units_power_db(1 - 0.625 * 0.1);
    assert_near(units_spl_db(sum), want_db, 0.02);
    free(out);
}

/* A steady line: level by the sonar equation, and one pure tone across the tiles that sound is made in: what
 * a fitted sine leaves is 80 dB below it. */
static void a_ships_line_is_pure(void **state)
{
    (void)state;
    scene.n_ships = 1;
    scene.ships[0] = (struct scene_ship){
        .track = {.at_start = {0, 250, 5}}, .n_lines = 1, .line_hz = {123.4}, .source_level_db = 150};
    const int n = 5 * 48000;
    float *out = render_all(48000, (uint32_t)n);
    double re = 0, im = 0, sum = 0, left = 0;
    for (int i = 0; i < n; i++) {
        double angle = 2 * M_PI * 123.4 * i / 48000.0; /* 617 whole cycles */
        re += 2 * (double)out[i] * cos(angle) / n;
        im += 2 * (double)out[i] * sin(angle) / n;
    }
    for (int i = 0; i < n; i++) {
        double angle = 2 * M_PI * 123.4 * i / 48000.0;
        double rest = (double)out[i] - re * cos(angle) - im * sin(angle);
        left += rest * rest;
        sum += (double)out[i] * (double)out[i];
    }
    assert_near(units_spl_db(sum / n * pa() * pa()), 150 - 20 * log10(hypot(250, 10)), 0.01);
    assert_true(left / sum < 1e-8);
    free(out);
}

/* Energy of a ping: source level + 10 lg(length) - loss; of a shot: source energy level - loss. Counts by
 * interval. */
static void pings_and_shots_have_their_energy(void **state)
{
    (void)state;
    listen_near();
    scene.sea.depth_m = 0;
    scene.sea.salinity = 35;
    scene.duration_s = 20;
    scene.n_echosounders = 1;
    scene.echosounders[0] = (struct scene_echosounder){.track = {.at_start = {100, 0, 15}},
                                                       .end_s = 9.9,
                                                       .frequency_hz = 20000,
                                                       .ping_s = 0.004,
                                                       .ping_interval_s = 0.5,
                                                       .source_level_db = 200};
    float *out = render_all(0, 20 * 48000);
    double exposure = 0;
    for (int i = 0; i < 20 * 48000; i++)
        exposure += (double)out[i] * (double)out[i] * pa() * pa() / 48000;
    free(out);
    /* 20 pings; 3.34971 dB/km at 20 kHz, 10 degree Celsius, salinity 35 (Francois and Garrison 1982). */
    assert_near(units_sel_db(exposure / 20), 200 + 10 * log10(0.004) - 40 - 0.335, 0.02);
    scene.n_echosounders = 0;
    scene.n_airguns = 1;
    scene.airguns[0] = (struct scene_airguns){.track = {.at_start = {1000, 0, 15}},
                                              .end_s = 16,
                                              .shot_interval_s = 8,
                                              .source_energy_level_db = 230};
    out = render_all(0, 20 * 48000);
    exposure = 0;
    for (int i = 0; i < 20 * 48000; i++)
        exposure += (double)out[i] * (double)out[i] * pa() * pa() / 48000;
    free(out);
    assert_near(units_sel_db(exposure / 2), 230 - 60, 0.05);
}

static void fill(void)
{
    scene.seed = 11;
    scene.duration_s = 40;
    scene.sea.ambient = true;
    scene.sea.surface_reflection = 0.6;
    listen_near();
    scene.n_hydrophones = 2;
    scene.hydrophones[1] = scene.hydrophones[0];
    scene.hydrophones[1].place.y_m = 30;
    scene.n_animals = 4;
    static const char *const voices[] = {"humpback song", "delphinid whistle", "sperm whale clicks",
                                         "fin whale pulse"};
    for (int i = 0; i < 4; i++) {
        scene.animals[i] = scene_emitter_of(voices[i]);
        scene.animals[i].track.speed_m_s = 2;
        scene.animals[i].members = i == 1 ? 3 : 1;
        scene.animals[i].start_s = i;
    }
    scene.n_hammers = 1;
    scene.hammers[0] = scene_hammer_of();
    scene.hammers[0].track.at_start.x_m = 700;
    scene.hammers[0].n_steps = 2;
    scene.hammers[0].steps[0] = (struct scene_step){10, 1.7, 190};
    scene.hammers[0].steps[1] = (struct scene_step){30, 1.1, 205};
    scene.n_ships = 1;
    scene.ships[0] =
        (struct scene_ship){.track = {.at_start = {900, 100, 5}, .course_deg = 90, .speed_m_s = 5},
                            .n_lines = 2,
                            .line_hz = {50, 121},
                            .source_level_db = 140};
    scene.n_echosounders = 1;
    scene.echosounders[0] = (struct scene_echosounder){.track = {.at_start = {50, 50, 3}},
                                                       .end_s = 1e9,
                                                       .frequency_hz = 18000,
                                                       .ping_s = 0.002,
                                                       .ping_interval_s = 0.7,
                                                       .source_level_db = 190};
    scene.shrimp.snaps_per_s = 5;
}

/* The same bits whole, in random pieces, after jumps forward and back, and from a second object. */
static void sameness_whatever_the_chunking(void **state)
{
    (void)state;
    fill();
    const uint32_t n = 30 * 48000;
    float *whole = render_all(0, n), *again = render_all(0, n), *piece = malloc(n * 2 * sizeof *piece);
    assert_memory_equal(whole, again, n * 2 * sizeof *whole);
    struct render *render;
    assert_int_equal(render_create(&scene, &render), STATUS_OK);
    struct random random;
    random_reset(&random, 5);
    for (uint32_t at = 0; at < n;) {
        uint32_t count = 1 + (uint32_t)(random_bits(&random) % 9001);
        count = count < n - at ? count : n - at;
        render_get(render, at, piece + 2 * (size_t)at, count);
        at += count;
    }
    assert_memory_equal(whole, piece, n * 2 * sizeof *whole);
    for (int jump = 0; jump < 40; jump++) {
        uint32_t count = 1 + (uint32_t)(random_bits(&random) % 5000);
        uint32_t at = (uint32_t)(random_bits(&random) % (n - count));
        render_get(render, at, piece, count);
        assert_memory_equal(whole + 2 * (size_t)at, piece, count * 2 * sizeof *whole);
    }
    render_destroy(render);
    free(whole);
    free(again);
    free(piece);
}

/* Another seed is another noise; one animal more leaves the calls of the others alone. */
static void seeds_and_neighbours(void **state)
{
    (void)state;
    fill();
    static struct schedule schedules[SCHEDULE_MAX];
    static struct emission before[10], after;
    schedule_list(&scene, schedules);
    for (int i = 0; i < 10; i++)
        assert_true(schedule_next(&schedules[0], &before[i]));
    scene.animals[3].members = 7;
    schedule_list(&scene, schedules);
    for (int i = 0; i < 10; i++) {
        assert_true(schedule_next(&schedules[0], &after));
        assert_true(after.start_s == before[i].start_s && after.sound.length_s == before[i].sound.length_s);
        assert_true(i == 0 || after.start_s > before[i - 1].start_s);
    }
    fresh(NULL);
    scene.sea.ambient = true;
    scene.n_hydrophones = 2;
    scene.hydrophones[1] = scene.hydrophones[0];
    float *one = render_all(0, 48000);
    scene.seed++;
    float *two = render_all(0, 48000);
    double seeds = 0, channels = 0, power = 0;
    for (int i = 0; i < 96000; i += 2) {
        seeds += (double)one[i] * (double)two[i];
        channels += (double)one[i] * (double)one[i + 1];
        power += (double)one[i] * (double)one[i];
    }
    /* Most of the power is below some 100 Hz: a few hundred independent values in a second. */
    assert_true(fabs(seeds / power) < 0.25 && fabs(channels / power) < 0.25);
    free(one);
    free(two);
}

static void a_converter_clips(void **state)
{
    (void)state;
    scene.n_hammers = 1;
    scene.hammers[0] = scene_hammer_of();
    scene.hammers[0].track.at_start.x_m = 20;
    scene.hammers[0].n_steps = 1;
    scene.hammers[0].steps[0] = (struct scene_step){5, 1, 215};
    float *out = render_all(0, 5 * 48000);
    float high = 0, low = 0;
    for (int i = 0; i < 5 * 48000; i++) {
        high = out[i] > high ? out[i] : high;
        low = out[i] < low ? out[i] : low;
    }
    assert_true(high == 1.0f && low == -1.0f);
    free(out);
}

/* Intervals of the published order, and jitter that is an animal's: 3 to 20 %, where a machine has under 1 %.
 */
static void rhythms(void **state)
{
    (void)state;
    scene.rate_hz = 384000;
    scene.duration_s = 600;
    static const struct {
        const char *voice;
        double low_s, high_s, jitter_low, jitter_high;
    } wants[] = {{"porpoise clicks", 0.03, 0.2, 0.01, 0.08},
                 {"delphinid clicks", 0.01, 0.2, 0.05, 0.3},
                 {"sperm whale clicks", 0.45, 1.0, 0.02, 0.08}};
    for (int v = 0; v < 3; v++) {
        scene.n_animals = 1;
        scene.animals[0] = scene_emitter_of(wants[v].voice);
        struct schedule schedule;
        static struct emission call;
        schedule_list(&scene, &schedule);
        double sum2 = 0;
        int n = 0;
        while (schedule_next(&schedule, &call)) {
            for (uint32_t i = 1; i + 1 < call.n_pulses; i++) {
                double before_s = call.pulse_s[i] - call.pulse_s[i - 1],
                       after_s = call.pulse_s[i + 1] - call.pulse_s[i];
                assert_true(before_s >= wants[v].low_s - 1e-9 && before_s <= wants[v].high_s + 1e-9);
                sum2 += log(after_s / before_s) * log(after_s / before_s);
                n++;
            }
        }
        double jitter = sqrt(sum2 / n);
        print_message("# figure %s: %d intervals, sd of ln(ratio) %.3f\n", wants[v].voice, n, jitter);
        assert_true(n > 100 && jitter > wants[v].jitter_low && jitter < wants[v].jitter_high);
    }
}

/* Every kind, in a scene of its own: it sounds, stays finite, is the same in pieces and after a jump back,
 * and keeps the bounds that memory is planned by. */
static void every_kind_is_the_same_in_pieces(void **state)
{
    (void)state;
    const struct scene_kind *kind;
    unsigned n_kinds = 0;
    for (; (kind = scene_kind_at(n_kinds)) != NULL; n_kinds++) {
        fresh(NULL);
        listen_near();
        scene.duration_s = 1000;
        scene.rate_hz = fmax(160000, kind->min_rate_hz); /* carries what each usually is */
        scene.n_hydrophones = 2;
        scene.hydrophones[1] = scene.hydrophones[0];
        scene.hydrophones[1].place.y_m = 20;
        struct scene_emitter emitter = scene_emitter_of(kind->name);
        emitter.track = (struct scene_track){.at_start = {90, 0, 12}, .course_deg = 90, .speed_m_s = 3};
        if (kind->is_animal)
            scene.animals[scene.n_animals++] = emitter;
        else
            scene.emitters[scene.n_emitters++] = emitter;
        const uint32_t n = (uint32_t)(0.7 * scene.rate_hz), middle = n / 3 + 17;
        float *whole = render_all(0, n), *piece = malloc((size_t)n * 2 * sizeof *piece);
        double sum = 0;
        for (uint32_t i = 0; i < 2 * n; i++)
            sum += fabs((double)whole[i]);
        if (!(isfinite(sum) && sum > 0))
            print_message("%s: sum %g\n", kind->name, sum);
        assert_true(isfinite(sum) && sum > 0);
        struct render *render;
        assert_int_equal(render_create(&scene, &render), STATUS_OK);
        render_get(render, middle, piece + 2 * (size_t)middle, n - middle);
        render_get(render, 0, piece, middle);
        render_destroy(render);
        assert_memory_equal(whole, piece, (size_t)n * 2 * sizeof *whole);
        free(whole);
        free(piece);
        struct schedule schedule;
        static struct emission sound;
        schedule_list(&scene, &schedule);
        double before_s = -INFINITY;
        for (int i = 0; i < 100 && schedule_next(&schedule, &sound); i++) {
            if (emission_length_s(&sound) > schedule_max_length_s(&schedule) + 1e-9 ||
                sound.start_s - before_s < schedule_min_spacing_s(&schedule) - 1e-9)
                print_message("%s: %.3f s long, %.3f s after the one before\n", kind->name,
                              emission_length_s(&sound), sound.start_s - before_s);
            assert_true(emission_length_s(&sound) <= schedule_max_length_s(&schedule) + 1e-9);
            assert_true(sound.start_s - before_s >= schedule_min_spacing_s(&schedule) - 1e-9);
            before_s = sound.start_s;
        }
    }
    print_message("# figure %u kinds\n", n_kinds);
    assert_true(n_kinds > 40);
}

static void impossible_scenes_are_refused(void **state)
{
    (void)state;
    char problem[SCENE_TEXT_SIZE];
    struct render *render = NULL;
    fill();
    assert_int_equal(scene_check(&scene, 0, problem), STATUS_OK);
    scene.n_animals = 5;
    scene.animals[4] = scene_emitter_of("porpoise clicks"); /* not at 48 kHz */
    scene.animals[0].track =
        (struct scene_track){.at_start = {100, 0, 15}, .course_deg = 180, .speed_m_s = 5};
    scene.hydrophones[1].calibration.known = false;
    static const char *const words[] = {"calibration", "nearer", "sampling rate"};
    for (uint32_t i = 0; i < 3; i++) {
        assert_int_equal(scene_check(&scene, i, problem), STATUS_OUT_OF_RANGE);
        assert_non_null(strstr(problem, words[i]));
    }
    assert_int_equal(scene_check(&scene, 3, problem), STATUS_OK);
    assert_int_equal(render_create(&scene, &render), STATUS_BAD_ARGUMENT);
    fresh(NULL);
    scene.n_animals = 1; /* 20 clicks a second from 100 km away: more than 512 on their way */
    scene.animals[0] = scene_emitter_of("tone");
    scene.animals[0].interval_s = 0.05;
    scene.animals[0].track.at_start.x_m = 100000;
    assert_int_equal(render_create(&scene, &render), STATUS_BAD_ARGUMENT);
    assert_null(render);
    render_destroy(NULL);
    fresh(NULL);
    scene.n_emitters = 4;
    scene.emitters[0] = scene_emitter_of("naval sonar");
    assert_int_equal(scene_emitter_set(&scene.emitters[0], "length_s", 5), STATUS_OUT_OF_RANGE);
    assert_int_equal(scene_emitter_set(&scene.emitters[0], "length_hz", 1), STATUS_NOT_FOUND);
    assert_int_equal(scene_emitter_set(&scene.emitters[0], "frequency_hz", 2000), STATUS_OK);
    assert_int_equal(scene_emitter_set(&scene.emitters[0], "sweep_hz", -1950), STATUS_OK);
    scene.emitters[1] = scene_emitter_of("hopping modem");
    assert_int_equal(scene_emitter_set(&scene.emitters[1], "chip_s", 0.002), STATUS_OK); /* 600 chips */
    scene.emitters[2] = scene_emitter_of("rain");
    scene.emitters[2].interval_s = 3;
    scene.emitters[3] = scene_emitter_of("a kraken");
    static const char *const more[] = {"frequency_hz + sweep_hz", "256 chip_s", "lasts", "of no kind"};
    for (uint32_t i = 0; i < 4; i++) {
        assert_int_equal(scene_check(&scene, i, problem), STATUS_OUT_OF_RANGE);
        assert_non_null(strstr(problem, more[i]));
    }
    assert_int_equal(scene_check(&scene, 4, problem), STATUS_OK);
    print_message("# figure a scene takes %zu bytes, an emission %zu\n", sizeof scene,
                  sizeof(struct emission));
}

/* Level of a sound's spectrum at a frequency, sampled at a rate. */
static double spectrum_db(const struct sound *sound, double rate_hz, double hz)
{
    enum { N = 1024 };
    double gain[SOUND_MAX_PARTS], re = 0, im = 0;
    float samples[N] = {0};
    for (uint32_t k = 0; k < SOUND_MAX_PARTS; k++)
        gain[k] = 1;
    sound_add(sound, 0, gain, 1, 1, 0, 1 / rate_hz, N, samples);
    for (uint32_t i = 0; i < N; i++) {
        re += (double)samples[i] * cos(6.283185307179586 * hz * i / rate_hz) / rate_hz;
        im += (double)samples[i] * sin(6.283185307179586 * hz * i / rate_hz) / rate_hz;
    }
    return units_power_db(re * re + im * im);
}

/* A dolphin's click (Au 1993: lobes at 45 and 105 kHz) through a recorder of 96 kHz, beside the same sampled
 * at 3 MHz, where nothing is limited or folded: as it was to 0.36 of the rate. */
static void a_front_end_is_flat(void **state)
{
    (void)state;
    struct sound whole = {.shape = SOUND_GAUSS,
                          .n_parts = 2,
                          .parts = {{.amplitude = 0.7, .frequency_hz = 45000, .width_s = 9e-6},
                                    {.amplitude = 1, .frequency_hz = 105000, .width_s = 6e-6}}};
    sound_measure_length(&whole);
    struct sound heard = whole;
    sound_limit_band(&heard, 96000);
    double worst_db = 0;
    for (double hz = 8000; hz <= 0.36 * 96000; hz += 1000)
        worst_db = fmax(worst_db, fabs(spectrum_db(&heard, 96000, hz) - spectrum_db(&whole, 3e6, hz)));
    double half_db = spectrum_db(&heard, 3e6, 48000) - spectrum_db(&whole, 3e6, 48000);
    double folded_db = spectrum_db(&heard, 3e6, 60000) - spectrum_db(&whole, 3e6, 60000);
    print_message(
        "# figure a front end of 96 kHz: %.2f dB off up to 34.5 kHz, %.1f dB at 48 kHz, %.1f dB at 60 kHz\n",
        worst_db, half_db, folded_db);
    assert_true(worst_db < 1.2);
    assert_true(half_db < -20);
    assert_true(folded_db < -40);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup(a_tone_has_the_level_of_the_sonar_equation, fresh),
        cmocka_unit_test_setup(a_blow_has_its_energy, fresh),
        cmocka_unit_test_setup(a_click_has_its_peak, fresh),
        cmocka_unit_test_setup(delays_are_exact_to_a_fraction_of_a_sample, fresh),
        cmocka_unit_test_setup(a_moving_source_has_doppler, fresh),
        cmocka_unit_test_setup(the_surface_makes_a_lloyd_mirror, fresh),
        cmocka_unit_test_setup(a_ships_line_is_pure, fresh),
        cmocka_unit_test_setup(pings_and_shots_have_their_energy, fresh),
        cmocka_unit_test_setup(sameness_whatever_the_chunking, fresh),
        cmocka_unit_test_setup(seeds_and_neighbours, fresh),
        cmocka_unit_test_setup(a_converter_clips, fresh),
        cmocka_unit_test_setup(rhythms, fresh),
        cmocka_unit_test(a_front_end_is_flat),
        cmocka_unit_test_setup(every_kind_is_the_same_in_pieces, fresh),
        cmocka_unit_test_setup(impossible_scenes_are_refused, fresh),
    };
    return cmocka_run_group_tests_name("scene", tests, NULL, NULL);
}
