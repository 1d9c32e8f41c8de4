/* lib/level/exposure and lib/level/strikes against closed forms and sums in double precision worked out here.
 */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "level/exposure.h"
#include "level/strikes.h"
#include <malloc.h>
#include <math.h>
#include <stdlib.h>

#define SECOND TIME_NS_PER_S
#define DAY (86400 * SECOND)
#define MAX_SPREADS 1.6448536 /* two-sided 90 % of a normal distribution */

static struct criterion base(enum criterion_metric metric, enum criterion_sound sound, double value)
{
    struct criterion c = {.name = "test",
                          .effect = EFFECT_INJURY,
                          .sound = sound,
                          .metric = metric,
                          .window = metric == METRIC_SEL_CUMULATIVE ? ACCUMULATE_JOB : ACCUMULATE_NOTHING,
                          .average = metric == METRIC_SPL ? AVERAGE_T90 : AVERAGE_NOTHING,
                          .value = value,
                          .quiet_db = NAN,
                          .limit_range_m = NAN,
                          .basis = {MARK_READ, "a test"}};
    return c;
}

static struct criterion cumulative(const char *weighting, enum criterion_window window, double value)
{
    struct criterion c = base(METRIC_SEL_CUMULATIVE, SOUND_IMPULSIVE, value);
    c.window = window;
    if (*weighting)
        assert_int_equal(weighting_from_name(weighting, &c.weighting), STATUS_OK);
    return c;
}

static struct exposure_setup setup_of(const struct criterion *criteria, uint32_t n)
{
    return (struct exposure_setup){.n_criteria = n,
                                   .criteria = criteria,
                                   .sound = SOUND_IMPULSIVE,
                                   .reference_m = 750,
                                   .loss = {.n_db = 15}};
}

static struct exposure *make(const struct exposure_setup *setup)
{
    struct exposure *exposure = NULL;
    assert_int_equal(exposure_create(setup, &exposure), STATUS_OK);
    return exposure;
}

static struct exposure_sound blow(int64_t time_ns, double range_m, double sel_db)
{
    return (struct exposure_sound){.time_ns = time_ns,
                                   .seconds = 0.08,
                                   .range_m = range_m,
                                   .sel_db = sel_db,
                                   .spl_db = sel_db + 10.5,
                                   .peak_db = sel_db + 22,
                                   .peak_to_peak_db = sel_db + 27,
                                   .positive_impulse_pa_s = NAN};
}

static void push(struct exposure *exposure, const struct exposure_sound *sound)
{
    assert_int_equal(exposure_push(exposure, sound), STATUS_OK);
}

static struct exposure_state state_of(struct exposure *exposure, uint32_t i, int64_t now_ns)
{
    struct exposure_state out;
    assert_int_equal(exposure_get(exposure, i, now_ns, &out), STATUS_OK);
    return out;
}

static struct exposure_level at(struct exposure *exposure, uint32_t i, double range_m, double flee_m_s)
{
    struct exposure_level out;
    assert_int_equal(exposure_get_at(exposure, i, range_m, flee_m_s, 0, &out), STATUS_OK);
    return out;
}

static struct exposure_distance distance(struct exposure *exposure, uint32_t i, double flee_m_s)
{
    struct exposure_distance out;
    assert_int_equal(exposure_get_distance(exposure, i, flee_m_s, 0, &out), STATUS_OK);
    return out;
}

static struct exposure_left left(struct exposure *exposure, uint32_t i, double range_m, double flee_m_s)
{
    struct exposure_left out;
    assert_int_equal(exposure_get_left(exposure, i, range_m, flee_m_s, 0, &out), STATUS_OK);
    return out;
}

/* N equal strikes add 10 lg N (ISO 18406). 960 strikes: 187 -> 217, 180 -> 210 dB (Casper et al., PLOS ONE 7,
 * e39593, 2012, rounded); 100 strikes of 186 -> 206 dB (Bolle et al., PLOS ONE 7, e33052, 2012). */
static void many_strikes(void **state)
{
    (void)state;
    static const double counts[] = {1, 2, 10, 100, 500, 960, 1000, 3500, 10000, 86400};
    static const double added_db[] = {0, 3.0103, 10, 20, 26.9897, 29.8227, 30, 35.4407, 40, 49.3651};
    for (int i = 0; i < 10; i++)
        assert_near(strikes_cumulative_db(0, counts[i]), added_db[i], 5e-5);
    assert_near(strikes_cumulative_db(187, 960), 217, 0.2);
    assert_near(strikes_cumulative_db(180, 960), 210, 0.2);
    assert_near(strikes_cumulative_db(186, 100), 206, 1e-9);
    assert_near(strikes_possible(186, 206), 99, 0); /* the hundredth reaches it */
    assert_near(strikes_possible(186, 206.1), 102, 0);
    assert_near(strikes_possible(210, 206), 0, 0);
    assert_near(strikes_possible(206, 206), 0, 0);
    /* Closed forms. */
    static const double three[] = {150, 153, 147};
    assert_near(strikes_sum_db(three, 3), 155.4363, 5e-5);
    assert_near(strikes_mean_db(three, 3), 150.6651, 5e-5);
    assert_true(strikes_sum_db(three, 0) == -INFINITY);
    static const double over_db[] = {3, 4, 5, 6, 8, 10, 15, 20};
    static const double correction_db[] = {-3.0206, -2.2048, -1.6509, -1.2563,
                                           -0.7494, -0.4576, -0.1396, -0.0436};
    for (int i = 0; i < 8; i++)
        assert_near(strikes_less_background_db(140 + over_db[i], 140), 140 + over_db[i] + correction_db[i],
                    5e-5);
    assert_true(isnan(strikes_less_background_db(142.9, 140)));
    /* Strike SEL from a long equivalent level (German practice, from memory). */
    assert_near(strikes_sel_from_mean_db(165, 130, 20, 30), 166.7595, 5e-5);
    assert_near(strikes_sel_from_mean_db(165, 160, 20, 30), 165.1100, 5e-5);
    assert_near(strikes_sel_from_mean_db(150, 140, 45, 30), 147.7815, 5e-5);
    assert_near(strikes_sel_from_mean_db(170, 100, 1, 1), 170, 5e-5);
    assert_true(isnan(strikes_sel_from_mean_db(165, 130, 0, 30)));
}

/* 24 h of 120 dB in blocks of 1 s: 120 + 10 lg 86400 = 169.3651 dB. */
static void a_day_of_continuous_sound(void **state)
{
    (void)state;
    struct criterion c[2];
    c[0] = base(METRIC_SEL_CUMULATIVE, SOUND_CONTINUOUS, 199);
    c[0].window = ACCUMULATE_24_H;
    c[1] = base(METRIC_SPL, SOUND_CONTINUOUS, 120);
    c[1].average = AVERAGE_1_S;
    struct exposure_setup setup = setup_of(c, 2);
    setup.sound = SOUND_CONTINUOUS;
    struct exposure *exposure = make(&setup);
    struct level level = {.seconds = 1, .spl_db = 120, .peak_db = 132};
    struct exposure_sound sound;
    for (int64_t s = 0; s < 86400; s++) {
        level.start_ns = s * SECOND;
        exposure_of_level(&level, 750, &sound);
        push(exposure, &sound);
    }
    struct exposure_state now = state_of(exposure, 0, 86399 * SECOND);
    assert_near(now.level_db, 169.3651, 1e-4);
    assert_near(now.at_reference_db, 169.3651, 1e-4);
    assert_int_equal(now.n, 86400);
    assert_false(now.reached);
    printf("# figure 86400 blocks of 120 dB: %.4f dB\n", now.level_db);
    now = state_of(exposure, 1, 86399 * SECOND);
    assert_near(now.level_db, 120, 1e-9);
    assert_true(now.reached);
    /* Another second at the same level for each dB that is left: (10^19.9 - 10^16.93651) / 10^12, more than
     * counted. */
    assert_int_equal(left(exposure, 0, 750, 0).left, EXPOSURE_MOST_LEFT);
    assert_near(
        left(exposure, 0, 10, 0).left,
        floor((pow(10, 19.9) - 86400 * pow(10, 12 + 1.5 * log10(75))) / pow(10, 12 + 1.5 * log10(75))), 1);
    /* Twelve hours later half of it has left, give or take a bucket of 60 s. */
    assert_near(state_of(exposure, 0, 86399 * SECOND + DAY / 2).level_db, 169.3651 - 3.0103, 0.01);
    assert_true(state_of(exposure, 0, 3 * DAY).level_db == -INFINITY);
    exposure_destroy(exposure);
}

#define N_BANDS 34 /* 10 Hz to 20 kHz */

/* A pile's spectrum: 30 dB a decade up to 100 Hz, from 200 Hz 20 dB a decade down, summing to sel_db. */
static void give_bands(struct exposure_sound *sound, double tilt_db)
{
    double sum = 0;
    sound->n_bands = N_BANDS;
    for (int b = 0; b < N_BANDS; b++) {
        double lg_hz = 3 + (LEVEL_FIRST_BAND + b) / 10.0;
        double db = lg_hz < 2 ? 30 * (lg_hz - 2) : lg_hz > 2.3 ? -20 * (lg_hz - 2.3) : 0;
        sound->band_sel_db[b] = db + tilt_db * (lg_hz - 2.2);
        sum += pow(10, sound->band_sel_db[b] / 10);
    }
    for (int b = 0; b < N_BANDS; b++)
        sound->band_sel_db[b] += sound->sel_db - 10 * log10(sum);
}

/* W of NMFS 2018, equation 1, and the constants of NMFS 2024, table 5, VHF. */
static double vhf_db(double hz)
{
    double x1 = hz / 5930, x2 = hz / 186000;
    return 0.91 + 10 * log10(pow(x1, 2 * 2.23) / (pow(1 + x1 * x1, 2.23) * pow(1 + x2 * x2, 5)));
}

/* 15,000 blows in ten hours, 14 dB up and down, heard from 400 to 1500 m: sums as in extended precision,
 * memory flat, and the same again from the same sounds. */
static void a_ten_hour_day(void **state)
{
    (void)state;
    struct criterion c[4];
    c[0] = cumulative("", ACCUMULATE_JOB, 210);
    c[1] = cumulative("", ACCUMULATE_DAY, 210);
    c[2] = cumulative("NMFS 2024 VHF", ACCUMULATE_24_H, 159);
    c[3] = cumulative("NMFS 2024 VHF", ACCUMULATE_JOB, 159);
    struct exposure_setup setup = setup_of(c, 4);
    struct exposure *exposure = make(&setup), *again = make(&setup);
    struct random random;
    const uint64_t seed = 20240501;
    random_reset(&random, seed);
    struct exposure_sound *sounds = calloc(15000, sizeof *sounds);
    assert_non_null(sounds);
    long double sum = 0, placed = 0, weighted = 0, weighted_placed = 0;
    int64_t now_ns = 0;
    for (int i = 0; i < 15000; i++) {
        now_ns = (int64_t)(i * 2.4e9);
        double range_m = 950 + 550 * sin(i * 2 * M_PI / 4000);
        sounds[i] = blow(now_ns, range_m, 165 + 7 * sin(i * 0.001) + random_normal(&random));
        give_bands(&sounds[i], 3 * sin(i * 0.01));
        long double gain = powl(range_m / 750, 1.5L);
        sum += powl(10, sounds[i].sel_db / 10);
        placed += powl(10, sounds[i].sel_db / 10) * gain;
        for (int b = 0; b < N_BANDS; b++) {
            long double e =
                powl(10, (sounds[i].band_sel_db[b] + vhf_db(1000 * pow(10, (b - 20) / 10.0))) / 10);
            weighted += e;
            weighted_placed += e * gain;
        }
    }
    struct mallinfo2 before = mallinfo2();
    for (int i = 0; i < 15000; i++)
        push(exposure, &sounds[i]);
    struct exposure_state got[4];
    for (uint32_t i = 0; i < 4; i++)
        got[i] = state_of(exposure, i, now_ns);
    assert_int_equal(mallinfo2().uordblks, before.uordblks);
    double worst = 0;
    for (int i = 0; i < 4; i++) {
        double received = 10 * log10((double)(i < 2 ? sum : weighted));
        double at_reference = 10 * log10((double)(i < 2 ? placed : weighted_placed));
        assert_near(got[i].level_db, received, 0.001);
        assert_near(got[i].at_reference_db, at_reference, 0.001);
        worst =
            fmax(worst, fmax(fabs(got[i].level_db - received), fabs(got[i].at_reference_db - at_reference)));
        assert_int_equal(got[i].n, 15000);
        assert_int_equal(got[i].first_ns, 0);
        assert_int_equal(got[i].top_band, 13);
    }
    printf("# figure 15000 blows, seed %llu: cumulative SEL off by at most %.1e dB\n",
           (unsigned long long)seed, worst);
    for (int i = 0; i < 15000; i++)
        push(again, &sounds[i]);
    for (uint32_t i = 0; i < 4; i++) {
        struct exposure_state same = state_of(again, i, now_ns);
        assert_true(same.level_db == got[i].level_db && same.at_reference_db == got[i].at_reference_db);
        struct exposure_distance a = distance(exposure, i, 0), b = distance(again, i, 0);
        assert_true(a.distance_m == b.distance_m && a.low_m == b.low_m && a.high_m == b.high_m);
    }
    exposure_destroy(exposure);
    exposure_destroy(again);
    free(sounds);
}

/* A blow of 160 dB each hour: how many count, by window. */
static void windows_begin_and_end(void **state)
{
    (void)state;
    struct criterion c[3];
    c[0] = cumulative("", ACCUMULATE_JOB, 210);
    c[1] = cumulative("", ACCUMULATE_DAY, 210);
    c[2] = cumulative("", ACCUMULATE_24_H, 210);
    struct exposure_setup setup = setup_of(c, 3);
    setup.day_start_ns = -5 * 3600 * SECOND; /* midnight 5 h before the run, and so each 24 h */
    struct exposure *exposure = make(&setup);
    for (int hour = 0; hour < 60; hour++) {
        if (hour == 50)
            exposure_begin_job(exposure);
        int64_t now_ns = hour * 3600 * SECOND;
        struct exposure_sound sound = blow(now_ns, 750, 160);
        push(exposure, &sound);
        int want[3] = {hour < 50 ? hour + 1 : hour - 49, (hour + 5) % 24 + 1, hour < 24 ? hour + 1 : 25};
        if (hour < 19)
            want[1] = hour + 1; /* the first day began at midnight, the sound 5 h later */
        for (uint32_t i = 0; i < 3; i++) {
            struct exposure_state s = state_of(exposure, i, now_ns);
            assert_int_equal(s.n, want[i]);
            assert_near(s.level_db, 160 + 10 * log10(want[i]), 1e-9);
            assert_near(s.at_reference_db, 160 + 10 * log10(want[i]), 1e-9);
        }
        assert_int_equal(state_of(exposure, 1, now_ns).resets_ns,
                         (19 + 24 * ((hour + 5) / 24)) * 3600 * SECOND);
        /* A minute later the one of 24 h ago has left. */
        assert_int_equal(state_of(exposure, 2, now_ns + 60 * SECOND).n, hour < 24 ? hour + 1 : 24);
        int64_t resets_ns = state_of(exposure, 2, now_ns + 60 * SECOND).resets_ns;
        uint64_t n = state_of(exposure, 2, now_ns + 60 * SECOND).n;
        assert_int_equal(state_of(exposure, 2, resets_ns - SECOND).n, n);
        assert_int_equal(state_of(exposure, 2, resets_ns).n, n - 1);
    }
    assert_int_equal(state_of(exposure, 0, 0).resets_ns, -1);
    assert_int_equal(state_of(exposure, 0, 0).first_ns, 50 * 3600 * SECOND);
    exposure_reset(exposure);
    assert_true(state_of(exposure, 0, 0).level_db == -INFINITY && state_of(exposure, 0, 0).first_ns == -1);
    exposure_destroy(exposure);
}

/* FHWG 2008: strikes below 150 dB SEL are not accumulated. At a range the isopleth ends where a strike is
 * quiet. */
static void effective_quiet(void **state)
{
    (void)state;
    struct criterion c[2];
    c[0] = cumulative("", ACCUMULATE_DAY, 187);
    c[1] = c[0];
    c[1].quiet_db = 150;
    c[1].quiet_basis = c[1].basis;
    struct exposure_setup setup = setup_of(c, 2);
    struct exposure *exposure = make(&setup);
    struct exposure_sound sound;
    for (int i = 0; i < 1000; i++) {
        sound = blow(i * 30 * SECOND, 750, i % 2 ? 149.9 : 150.1);
        push(exposure, &sound);
    }
    double loud_db = 150.1 + 10 * log10(500), all_db = 10 * log10(500 * (pow(10, 15.01) + pow(10, 14.99)));
    assert_near(state_of(exposure, 0, 0).level_db, all_db, 1e-6);
    assert_near(state_of(exposure, 1, 0).level_db, loud_db, 1e-6);
    assert_near(state_of(exposure, 1, 0).at_reference_db, loud_db, 1e-6);
    assert_int_equal(state_of(exposure, 1, 0).n_quiet, 500);
    assert_near(at(exposure, 1, 700, 0).level_db, all_db + 15 * log10(750.0 / 700), 1e-6);
    assert_true(at(exposure, 1, 800, 0).level_db == -INFINITY);
    exposure_reset(exposure);
    for (int i = 0; i < 10000; i++) { /* 170 + 40 = 210 dB at 750 m: 187 dB would lie at 25.6 km */
        sound = blow(i * 2 * SECOND, 750, 170);
        push(exposure, &sound);
    }
    assert_near(distance(exposure, 0, 0).distance_m, 750 * pow(10, 23.0 / 15), 1);
    assert_near(distance(exposure, 1, 0).distance_m, 750 * pow(10, 20.0 / 15), 0.5); /* 170 -> 150 dB */
    assert_int_equal(left(exposure, 1, 20000, 0).left, EXPOSURE_MOST_LEFT); /* quiet there: never reached */
    exposure_destroy(exposure);
}

/* R = R0 10^((L - T) / n): closed form; the cumulative SEL stands for L. A threshold above the level lies
 * nearer. */
static void distances_of_spreading_laws(void **state)
{
    (void)state;
    static const struct {
        double at_m, level_db, threshold_db, n_db, want_m;
    } rows[] = {{10, 180, 160, 15, 215.4435}, {10, 180, 160, 20, 100},        {10, 165, 120, 15, 10000},
                {10, 190, 160, 15, 1000},     {750, 170, 160, 15, 3481.1916}, {750, 163, 160, 15, 1188.6699},
                {10, 200, 183, 15, 135.9356}, {750, 160, 170, 15, 161.5826},  {750, 100, 183, 15, 0},
                {750, 220, 120, 15, INFINITY}};
    for (unsigned i = 0; i < sizeof rows / sizeof rows[0]; i++)
        for (int k = 0; k < 2; k++) { /* one blow by its SEL; ten blows that sum to it */
            struct criterion c = k ? cumulative("", ACCUMULATE_JOB, rows[i].threshold_db)
                                   : base(METRIC_SEL_SINGLE, SOUND_IMPULSIVE, rows[i].threshold_db);
            struct exposure_setup setup = setup_of(&c, 1);
            setup.loss.n_db = rows[i].n_db;
            struct exposure *exposure = make(&setup);
            for (int j = 0; j < (k ? 10 : 1); j++) {
                struct exposure_sound sound = blow(j * SECOND, rows[i].at_m, rows[i].level_db - (k ? 10 : 0));
                push(exposure, &sound);
            }
            struct exposure_distance d = distance(exposure, 0, 0);
            if (isinf(rows[i].want_m) || rows[i].want_m == 0)
                assert_true(d.distance_m == rows[i].want_m);
            else
                assert_near(d.distance_m, rows[i].want_m, 1e-5 * rows[i].want_m);
            exposure_destroy(exposure);
        }
}

/* With spreads s of the level and u of N: L - n x + 1.645 sqrt(s^2 + (u x)^2) = T at x = lg(r / R). */
static void the_interval_of_a_distance(void **state)
{
    (void)state;
    struct criterion c = cumulative("", ACCUMULATE_JOB, 190);
    struct exposure_setup setup = setup_of(&c, 1);
    setup.reference_m = 100; /* the interval grows from where the sound was heard, not from here */
    setup.level_spread_db = 1.5;
    setup.loss.n_spread_db = 2;
    struct exposure *exposure = make(&setup);
    struct exposure_sound sound = blow(0, 750, 200);
    push(exposure, &sound);
    struct exposure_distance d = distance(exposure, 0, 0);
    double *const bounds[] = {&d.low_m, &d.high_m};
    for (int k = 0; k < 2; k++) {
        double x = log10(*bounds[k] / 750), sign = k ? 1 : -1;
        assert_near(200 - 15 * x + sign * MAX_SPREADS * hypot(1.5, 2 * x), 190, 1e-3);
    }
    assert_true(d.low_m < d.distance_m && d.distance_m < d.high_m);
    struct exposure_level level = at(exposure, 0, 7500, 0);
    assert_near(level.level_db, 185, 1e-6);
    assert_near(level.high_db - level.level_db, MAX_SPREADS * 2.5, 1e-5);
    assert_near(level.level_db - level.low_db, MAX_SPREADS * 2.5, 1e-5);
    exposure_destroy(exposure);
}

/* 186 dB a strike, 206.05 dB allowed: 101 of them stay below (100 strikes: 206.00, 101: 206.04, 102: 206.09).
 */
static void what_is_left(void **state)
{
    (void)state;
    struct criterion c = cumulative("", ACCUMULATE_JOB, 206.05);
    struct exposure_setup setup = setup_of(&c, 1);
    setup.level_spread_db = 1;
    struct exposure *exposure = make(&setup);
    struct exposure_left out;
    assert_int_equal(exposure_get_left(exposure, 0, 750, 0, 0, &out), STATUS_NOT_FOUND);
    for (int i = 1; i <= 110; i++) {
        struct exposure_sound sound = blow(i * 2 * SECOND, 750, 186);
        push(exposure, &sound);
        out = left(exposure, 0, 750, 0);
        assert_int_equal(out.left, i < 101 ? 101 - i : 0);
        /* One standard deviation of 1 dB: 1.645 dB more or less allowed. */
        assert_int_equal(out.high, (int)floor(pow(10, 2.005 + 0.16448536)) - i);
        assert_int_equal(out.low, i < 69 ? (int)floor(pow(10, 2.005 - 0.16448536)) - i : 0);
        assert_int_equal(state_of(exposure, 0, 0).reached, i > 101);
    }
    /* Twice as far: 15 lg 2 = 4.515 dB less each, 286 of them. */
    assert_int_equal(left(exposure, 0, 1500, 0).left, (int)floor(pow(10, 2.005 + 1.5 * log10(2))) - 110);
    exposure_destroy(exposure);
}

/* Fleeing at v from r0 with a strike every dt: each strike i is heard at r0 + v i dt. */
static void a_receiver_that_flees(void **state)
{
    (void)state;
    struct criterion c = cumulative("", ACCUMULATE_24_H, 186);
    struct exposure_setup setup = setup_of(&c, 1);
    struct exposure *exposure = make(&setup);
    for (int i = 0; i < 4000; i++) {
        struct exposure_sound sound = blow(7777 * SECOND + i * 2 * SECOND, 750, 170);
        push(exposure, &sound);
    }
    static const double starts_m[] = {50, 100, 500, 2000, 20000};
    double worst = 0;
    for (int k = 0; k < 5; k++) {
        double sum = 0;
        for (int i = 0; i < 4000; i++)
            sum += pow(10, 17 - 1.5 * log10((starts_m[k] + 1.5 * 2 * i) / 750));
        double got_db = at(exposure, 0, starts_m[k], 1.5).level_db;
        assert_near(got_db, 10 * log10(sum), 0.02);
        worst = fmax(worst, fabs(got_db - 10 * log10(sum)));
    }
    printf("# figure a receiver that flees from 50 m to 20 km: off by at most %.4f dB\n", worst);
    double start_m = distance(exposure, 0, 1.5).distance_m, sum = 0;
    for (int i = 0; i < 4000; i++)
        sum += pow(10, 17 - 1.5 * log10((start_m + 3.0 * i) / 750));
    assert_near(10 * log10(sum), 186, 0.02);
    double stay_m = distance(exposure, 0, 0).distance_m; /* it swims 12 km meanwhile */
    assert_true(start_m < stay_m && stay_m < start_m + 12000);
    /* What is left for one that started where it had 185.5 dB by now: count on. */
    double at_m = start_m;
    while (at(exposure, 0, at_m, 1.5).level_db > 185.5)
        at_m *= 1.001;
    double got = pow(10, at(exposure, 0, at_m, 1.5).level_db / 10), n = 0;
    for (; n < 100000; n++) {
        got += pow(10, 17 - 1.5 * log10((at_m + 3.0 * (4000 + n)) / 750));
        if (got >= pow(10, 18.6))
            break;
    }
    assert_near(left(exposure, 0, at_m, 1.5).left, n, 2 + 0.01 * n);
    exposure_destroy(exposure);
}

/* N lg r and 0.5 dB/km per 100 Hz, known better at low frequencies. */
static void steep(void *context, double hz, double from_m, double to_m, double *out_db, double *out_spread_db)
{
    (void)context;
    *out_db = 15 * log10(to_m / from_m) + 0.5 * hz / 100 * (to_m - from_m) / 1000;
    *out_spread_db = (hz > 1000 ? 6 : 1) * fabs(log10(to_m / from_m));
}

/* Each band by its own loss; what is weighted away does not matter. */
static void losses_by_frequency(void **state)
{
    (void)state;
    struct criterion c[4];
    c[0] = cumulative("", ACCUMULATE_JOB, 170);
    c[1] = cumulative("NMFS 2024 VHF", ACCUMULATE_JOB, 130);
    c[2] = base(METRIC_SEL_SINGLE, SOUND_IMPULSIVE, 160);
    c[3] = base(METRIC_SPL, SOUND_IMPULSIVE, 103);
    c[3].weighting = c[1].weighting;
    c[3].average = AVERAGE_125_MS;
    struct exposure_setup setup = setup_of(c, 4);
    setup.loss = (struct exposure_loss){.between = steep};
    struct exposure *exposure = make(&setup);
    struct exposure_sound sound = blow(0, 1200, 175);
    give_bands(&sound, 0);
    push(exposure, &sound);
    double plain = 0, weighted = 0, weighted_here = 0;
    for (int b = 0; b < N_BANDS; b++) {
        double hz = 1000 * pow(10, (b - 20) / 10.0), db, spread_db;
        steep(NULL, hz, 1200, 3000, &db, &spread_db);
        plain += pow(10, (sound.band_sel_db[b] - db) / 10);
        weighted += pow(10, (sound.band_sel_db[b] - db + vhf_db(hz)) / 10);
        weighted_here += pow(10, (sound.band_sel_db[b] + vhf_db(hz)) / 10);
    }
    assert_near(at(exposure, 0, 3000, 0).level_db, 10 * log10(plain), 1e-6);
    assert_near(at(exposure, 1, 3000, 0).level_db, 10 * log10(weighted), 1e-6);
    assert_near(at(exposure, 2, 3000, 0).level_db, 10 * log10(plain), 1e-6);
    /* 125 ms: SEL + 9.031 dB for an impulse of 80 ms (DCE 2015 takes rms over 125 ms). */
    assert_near(at(exposure, 3, 3000, 0).level_db, 10 * log10(weighted) - 10 * log10(0.125), 1e-6);
    assert_near(state_of(exposure, 3, 0).level_db, 10 * log10(weighted_here / 0.125), 1e-6);
    assert_near(at(exposure, 1, 1200, 0).level_db, 10 * log10(weighted_here), 1e-6);
    /* Every level at its own distance is the criterion. */
    for (uint32_t i = 0; i < 4; i++)
        assert_near(at(exposure, i, distance(exposure, i, 0).distance_m, 0).level_db, c[i].value, 1e-3);
    /* The weighted level hangs on frequencies that are known worse. */
    struct exposure_level low = at(exposure, 0, 2400, 0), high = at(exposure, 1, 2400, 0);
    assert_near(low.high_db - low.level_db, MAX_SPREADS * log10(2), 0.02);
    assert_true(high.high_db - high.level_db > 1.3 * (low.high_db - low.level_db));
    /* A receiver that flees very slowly has the level of one that stays. */
    assert_near(at(exposure, 1, 3000, 0.01).level_db, 10 * log10(weighted), 0.005);
    exposure_destroy(exposure);
}

/* The loudest of the job, by metric; a charge's positive impulse as received. */
static void single_impulses(void **state)
{
    (void)state;
    struct criterion c[5];
    c[0] = base(METRIC_PEAK, SOUND_IMPULSIVE, 202);
    c[1] = base(METRIC_PEAK_TO_PEAK, SOUND_IMPULSIVE, 190);
    c[2] = base(METRIC_SEL_SINGLE, SOUND_IMPULSIVE, 160);
    c[3] = base(METRIC_SPL, SOUND_IMPULSIVE, 160);
    c[4] = base(METRIC_POSITIVE_IMPULSE, SOUND_IMPULSIVE, 30);
    struct exposure_setup setup = setup_of(c, 5);
    struct exposure *exposure = make(&setup);
    static const double sels_db[] = {160, 172, 165};
    static const double ranges_m[] = {750, 1500, NAN};
    for (int i = 0; i < 3; i++) {
        struct exposure_sound sound = blow(i * SECOND, ranges_m[i], sels_db[i]);
        sound.positive_impulse_pa_s = i == 1 ? 33.5 : NAN;
        push(exposure, &sound);
    }
    static const double over_sel_db[] = {22, 27, 0, 10.5};
    for (uint32_t i = 0; i < 4; i++) {
        struct exposure_state s = state_of(exposure, i, 0);
        assert_near(s.level_db, 172 + over_sel_db[i], 1e-9);
        assert_near(s.latest_db, 165 + over_sel_db[i], 1e-9);
        assert_near(s.at_reference_db, 172 + over_sel_db[i] + 15 * log10(2), 1e-9);
        assert_int_equal(s.reached, 172 + over_sel_db[i] >= c[i].value);
        assert_int_equal(s.n_without_range, 1);
        double want_m = 1500 * pow(10, (172 + over_sel_db[i] - c[i].value) / 15);
        assert_near(distance(exposure, i, 0).distance_m, want_m, 1e-5 * want_m);
    }
    struct exposure_state s = state_of(exposure, 4, 0);
    assert_near(s.level_db, 33.5, 0);
    assert_true(s.reached && isnan(s.latest_db) && isnan(s.at_reference_db));
    struct exposure_distance d;
    assert_int_equal(exposure_get_distance(exposure, 4, 0, 0, &d), STATUS_NOT_FOUND);
    exposure_begin_job(exposure);
    assert_true(state_of(exposure, 0, 0).level_db == -INFINITY);
    assert_near(state_of(exposure, 4, 0).level_db, 0, 0);
    exposure_destroy(exposure);
}

/* Range unknown: received levels only. No bands: no weighted level. Uncalibrated: nothing. */
static void what_is_not_known_is_not_said(void **state)
{
    (void)state;
    struct criterion c[4];
    c[0] = cumulative("", ACCUMULATE_JOB, 187);
    c[1] = cumulative("NMFS 2024 LF", ACCUMULATE_24_H, 183);
    c[2] = base(METRIC_SPL, SOUND_CONTINUOUS, 120);
    c[2].average = AVERAGE_1_S;
    c[3] = base(METRIC_PEAK, SOUND_IMPULSIVE, 202);
    struct exposure_setup setup = setup_of(c, 4);
    struct exposure *exposure = make(&setup);
    struct exposure_level level;
    struct exposure_state s;
    struct exposure_sound sound = blow(SECOND, NAN, 190);
    push(exposure, &sound);
    sound.range_m = 0;
    push(exposure, &sound);
    assert_near(state_of(exposure, 0, 0).level_db, 193.0103, 1e-4);
    assert_true(state_of(exposure, 0, 0).at_reference_db == -INFINITY);
    assert_int_equal(state_of(exposure, 0, 0).n_without_range, 2);
    for (uint32_t i = 0; i < 4; i++)
        assert_int_equal(exposure_get_at(exposure, i, 500, 0, 0, &level), STATUS_NOT_FOUND);
    assert_int_equal(exposure_get(exposure, 2, 0, &s), STATUS_NOT_FOUND); /* of continuous sound */
    sound.range_m = 750;
    push(exposure, &sound); /* without bands */
    assert_true(state_of(exposure, 1, 0).level_db == -INFINITY);
    assert_int_equal(state_of(exposure, 1, 0).n_unweighted, 3);
    assert_int_equal(exposure_get_at(exposure, 1, 500, 0, 0, &level), STATUS_NOT_FOUND);
    assert_int_equal(exposure_get_at(exposure, 0, 500, 0, 0, &level), STATUS_OK);

    struct exposure_sound bad[] = {sound, sound, sound, sound, sound};
    bad[0].relative = true;
    bad[1].sel_db = NAN;
    bad[2].range_m = -1;
    bad[3].n_bands = LEVEL_MAX_BANDS + 1;
    bad[4].sel_db = -INFINITY;
    for (int i = 0; i < 5; i++)
        assert_int_equal(exposure_push(exposure, &bad[i]), STATUS_OUT_OF_RANGE);
    assert_int_equal(state_of(exposure, 0, 0).n, 3);
    assert_int_equal(exposure_get_at(exposure, 0, 0.5, 0, 0, &level), STATUS_BAD_ARGUMENT);
    assert_int_equal(exposure_get_at(exposure, 0, 500, -1, 0, &level), STATUS_BAD_ARGUMENT);
    assert_int_equal(exposure_get_at(exposure, 9, 500, 0, 0, &level), STATUS_BAD_ARGUMENT);
    exposure_destroy(exposure);
}

/* An impulse and a level say the same as the sound made from them; one that was refused is not summed. */
static void sounds_of_entries(void **state)
{
    (void)state;
    struct criterion c = cumulative("NMFS 2024 VHF", ACCUMULATE_JOB, 159);
    struct exposure_setup setup = setup_of(&c, 1);
    struct exposure *exposure = make(&setup);
    struct exposure_sound sound = blow(SECOND, 750, 171), of_impulse, of_level;
    give_bands(&sound, 0);
    struct impulse impulse = {.time_ns = SECOND,
                              .sel_db = 171,
                              .peak_db = 193,
                              .peak_to_peak_db = 198,
                              .rms90_db = 181.5,
                              .t90_s = 0.08,
                              .positive_impulse_pa_s = 2,
                              .n_bands = N_BANDS};
    memcpy(impulse.band_sel_db, sound.band_sel_db, sizeof impulse.band_sel_db);
    exposure_of_impulse(&impulse, impulse.n_bands, impulse.band_sel_db, 750, &of_impulse);
    sound.positive_impulse_pa_s = 2;
    assert_memory_equal(&of_impulse, &sound, offsetof(struct exposure_sound, relative));
    impulse.sel_db = NAN;
    exposure_of_impulse(&impulse, impulse.n_bands, impulse.band_sel_db, 750, &of_impulse);
    assert_int_equal(exposure_push(exposure, &of_impulse), STATUS_OUT_OF_RANGE);
    /* Half a second at 174.0103 dB has the SEL of 171 dB. */
    struct level level = {.start_ns = SECOND, .seconds = 0.5, .spl_db = 174.0103, .n_bands = N_BANDS};
    for (int b = 0; b < N_BANDS; b++)
        level.band_db[b] = sound.band_sel_db[b] + 3.0103;
    exposure_of_level(&level, 750, &of_level);
    assert_near(of_level.sel_db, 171, 1e-4);
    push(exposure, &of_level);
    double of_level_db = state_of(exposure, 0, 0).level_db;
    exposure_reset(exposure);
    push(exposure, &sound);
    assert_near(of_level_db, state_of(exposure, 0, 0).level_db, 1e-4);
    exposure_destroy(exposure);
}

static void a_setup_that_makes_no_sense_is_refused(void **state)
{
    (void)state;
    struct criterion c[EXPOSURE_MAX_QUIET + 1];
    for (unsigned i = 0; i <= EXPOSURE_MAX_QUIET; i++) {
        c[i] = cumulative("", ACCUMULATE_DAY, 187);
        c[i].quiet_db = 150;
        c[i].quiet_basis = c[i].basis;
    }
    struct exposure *none = NULL;
#define REFUSED(change)                                                                                      \
    do {                                                                                                     \
        struct exposure_setup setup = setup_of(c, EXPOSURE_MAX_QUIET);                                       \
        change;                                                                                              \
        assert_int_equal(exposure_create(&setup, &none), STATUS_BAD_ARGUMENT);                               \
        assert_null(none);                                                                                   \
    } while (0)
    REFUSED(setup.n_criteria = EXPOSURE_MAX_QUIET + 1);
    REFUSED(setup.n_criteria = 0);
    REFUSED(setup.criteria = NULL);
    REFUSED(setup.sound = SOUND_ANY);
    REFUSED(setup.reference_m = 0);
    REFUSED(setup.level_spread_db = NAN);
    REFUSED(setup.loss.n_db = 0);
    REFUSED(setup.loss.n_spread_db = -1);
    REFUSED(c[0].basis.source[0] = 0); /* and so from here on */
    exposure_destroy(NULL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(many_strikes),
        cmocka_unit_test(a_day_of_continuous_sound),
        cmocka_unit_test(a_ten_hour_day),
        cmocka_unit_test(windows_begin_and_end),
        cmocka_unit_test(effective_quiet),
        cmocka_unit_test(distances_of_spreading_laws),
        cmocka_unit_test(the_interval_of_a_distance),
        cmocka_unit_test(what_is_left),
        cmocka_unit_test(a_receiver_that_flees),
        cmocka_unit_test(losses_by_frequency),
        cmocka_unit_test(single_impulses),
        cmocka_unit_test(what_is_not_known_is_not_said),
        cmocka_unit_test(sounds_of_entries),
        cmocka_unit_test(a_setup_that_makes_no_sense_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
