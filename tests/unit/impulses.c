/* lib/level/impulses and impulse_measure: closed forms of ISO 18405:2017 and ISO 18406:2017 quantities, blows
 * found in noise, nothing found in noise, animal sounds and a single blow's echoes. */
#include "support/test.h"

#include "base/random.h"
#include "base/units.h"
#include "dsp/filter.h"
#include "level/decidecades.h"
#include "level/impulse_bands.h"
#include "level/impulse_measure.h"
#include "level/impulses.h"
#include <math.h>
#include <stdlib.h>

#define MAX_FOUND 4096
#define FULL_SCALE_PA 2000.0

struct found {
    uint32_t n;
    struct found_impulse impulse[MAX_FOUND];
};

static void keep(void *context, const struct found_impulse *impulse)
{
    struct found *found = context;
    assert_true(found->n < MAX_FOUND);
    found->impulse[found->n++] = *impulse;
}

/* ---- closed forms */

enum wave { RECTANGLE, EXPONENTIAL, DAMPED_SINE };

/* Amplitude 1000 Pa: a rectangle of 10 ms; exp(-t / 10 ms); exp(-t / 20 ms) sin(2 pi 200 Hz t). */
static double wave_value(enum wave wave, double t)
{
    if (t < 0)
        return 0;
    if (wave == RECTANGLE)
        return t < 0.01 ? 1000 : 0;
    if (wave == EXPONENTIAL)
        return 1000 * exp(-t / 0.01);
    return 1000 * exp(-t / 0.02) * sin(2 * M_PI * 200 * t);
}

/* SEL, peak, rms90 in dB, T90 in ms. E of a rectangle is A^2 T, of the exponential A^2 tau / 2, of the damped
 * sine A^2 tau / 4 w^2 tau^2 / (1 + w^2 tau^2); T90 of the exponential is tau / 2 ln(19), of the damped sine
 * numerical. */
static const double wanted[3][4] = {{160.0000, 180.0, 180.0, 9.0},
                                    {156.9897, 180.0, 174.8524, 14.7222},
                                    {156.9828, 179.4640, 171.9322, 28.7940}};

static void check_measures(const char *how, enum wave wave, double sel, double peak, double rms90,
                           double t90_s)
{
    static const char *const names[] = {"rectangle", "exponential", "damped sine"};
    printf(
        "# figure %s, %s: SEL %+.4f, peak %+.4f, rms90 %+.4f dB from the closed form, T90 %.4f ms for %.4f\n",
        how, names[wave], sel - wanted[wave][0], peak - wanted[wave][1], rms90 - wanted[wave][2], t90_s * 1e3,
        wanted[wave][3]);
    assert_near(sel, wanted[wave][0], 0.05);
    assert_near(peak, wanted[wave][1], 0.05);
    assert_near(rms90, wanted[wave][2], 0.05);
    assert_near(t90_s * 1e3, wanted[wave][3], 0.01 * wanted[wave][3]);
}

/* (int p^2)^2 / int p^4: the rectangle's length, the exponential's tau, 13.3966 ms. */
static const double wanted_effective_ms[3] = {10, 10, 13.3966};

/* In 1 s, about the mean: (1 - 3d + 3d^2) / (d - d^2) with d = 0.01 (Bernoulli), 98.6937 (from the raw
 * moments A^k tau / (k T)), 1 s / 13.3966 ms (the mean of the damped sine hardly counts). */
static const double wanted_kurtosis[3] = {98.0101, 98.6937, 74.6460};

/* A T, A tau, and of the first half wave A w / (a^2 + w^2) (1 + exp(-pi a / w)), a = 1 / tau. */
static double positive_impulse(int wave)
{
    const double a = 1 / 0.02, w = 2 * M_PI * 200;
    return wave < 2 ? 10 : 1000 * w / (a * a + w * w) * (1 + exp(-M_PI * a / w));
}

static void measures_are_the_closed_forms(void **state)
{
    (void)state;
    enum { RATE = 500000, N = RATE };
    static float x[N];
    for (int wave = 0; wave < 3; wave++) {
        for (int i = 0; i < N; i++) /* half a sample late: each sample is the middle of its time */
            x[i] = (float)wave_value((enum wave)wave, (i + 0.5) / RATE - 0.1);
        struct impulse_window window = {x, N, RATE, 0, 0, INFINITY};
        struct impulse_measures m;
        assert_int_equal(impulse_measure(&window, &m), STATUS_OK);
        check_measures("measured", (enum wave)wave, m.sel_db, m.peak_db, m.rms90_db, m.t90_s);
        assert_false(m.clipped);
        assert_near(m.effective_s * 1e3, wanted_effective_ms[wave], 0.005 * wanted_effective_ms[wave]);
        assert_near(m.window_s, 1, 1e-9);
        assert_near(m.kurtosis, wanted_kurtosis[wave], 0.001 * wanted_kurtosis[wave]);
        assert_near(m.positive_impulse_pa_s, positive_impulse(wave), 0.002 * positive_impulse(wave));
        if (wave ==
            EXPONENTIAL) /* t5 = -tau / 2 ln 0.95 = 0.2565 ms after the onset; sample i is at i + 1/2 */
            assert_near((m.t5_frame + 0.5) / RATE - 0.1, 0.2565e-3, 1e-6);
        if (wave == EXPONENTIAL) /* and t95 = -tau / 2 ln 0.05 = 14.9787 ms */
            assert_near((m.t95_frame + 0.5) / RATE - 0.1, 14.9787e-3, 1e-6);
        if (wave == RECTANGLE)
            assert_near(m.peak_to_peak_db, 180, 1e-6);
        /* 10 lg(E / T90) has all of the energy: -10 lg 0.9 = 0.4576 dB more. */
        assert_near(m.sel_db - 10 * log10(m.t90_s) - m.rms90_db, 0.4576, 5e-5);
    }
    /* A sine of 1 Pa for 1 s: SEL = SPL = 116.9897, peak 120, peak to peak 126.0206 dB; T90 of a steady sound
     * is 0.9 of it. */
    for (int i = 0; i < N; i++)
        x[i] = (float)sin(2 * M_PI * 1000 * i / RATE);
    struct impulse_window sine = {x, N, RATE, 0, 0, INFINITY};
    struct impulse_measures of_sine;
    assert_int_equal(impulse_measure(&sine, &of_sine), STATUS_OK);
    assert_near(of_sine.sel_db, 116.9897, 5e-4);
    assert_near(of_sine.rms90_db, 116.9897, 5e-3);
    assert_near(of_sine.peak_db, 120, 5e-4);
    assert_near(of_sine.peak_to_peak_db, 126.0206, 5e-4);
    assert_near(of_sine.t90_s, 0.9, 5e-4);
    memset(x, 0, sizeof x);
    struct impulse_window window = {x, N, RATE, 0, 1, INFINITY};
    struct impulse_measures m;
    assert_int_equal(impulse_measure(&window, &m), STATUS_NOT_FOUND);
}

/* The exponential (T90 14.7222 ms, SEL 156.9897 dB) in Gaussian noise 20 dB below its mean square over T90,
 * in a window of 0.4 s, in which the noise alone has a quarter of its energy: the means over 200 windows are
 * those of the wave. */
static void the_background_is_taken_off(void **state)
{
    (void)state;
    enum { RATE = 48000, N = RATE * 2 / 5, RUNS = 200 };
    static float x[N];
    const double noise_pa = units_power_ratio((174.8524 - 120 - 20) / 2);
    struct random random;
    random_reset(&random, 44);
    double sel = 0, t90 = 0, rms90 = 0;
    for (int run = 0; run < RUNS; run++) {
        for (int i = 0; i < N; i++)
            x[i] =
                (float)(wave_value(EXPONENTIAL, (i + 0.5) / RATE - 0.1) + noise_pa * random_normal(&random));
        struct impulse_window window = {x, N, RATE, 0, noise_pa * noise_pa, INFINITY};
        struct impulse_measures m;
        assert_int_equal(impulse_measure(&window, &m), STATUS_OK);
        sel += m.sel_db / RUNS;
        t90 += m.t90_s / RUNS;
        rms90 += m.rms90_db / RUNS;
    }
    printf("# figure in noise 20 dB below, 200 windows, seed 44: SEL %+.4f, rms90 %+.4f dB, T90 %.4f ms for "
           "14.7222\n",
           sel - wanted[EXPONENTIAL][0], rms90 - wanted[EXPONENTIAL][2], t90 * 1e3);
    assert_near(sel, wanted[EXPONENTIAL][0], 0.05);
    assert_near(rms90, wanted[EXPONENTIAL][2], 0.05);
    assert_near(t90 * 1e3, wanted[EXPONENTIAL][3], 0.01 * wanted[EXPONENTIAL][3]);
}

/* The energy spectrum of A exp(-t / tau) sin(w0 t) is 2 A^2 w0^2 / ((a^2 + w0^2 - w^2)^2 + (2 a w)^2) over f
 * > 0 (Fourier transform of a damped sine, any table), and that of A exp(-t / tau) is 2 A^2 / (a^2 + w^2). */
static double energy_density(enum wave wave, double f)
{
    const double a = wave == EXPONENTIAL ? 100 : 50, w0 = 2 * M_PI * 200, w = 2 * M_PI * f;
    double d = a * a + w0 * w0 - w * w;
    return wave == EXPONENTIAL ? 2e6 / (a * a + w * w) : 2e6 * w0 * w0 / (d * d + 4 * a * a * w * w);
}

static double band_exposure(enum wave wave, int n)
{
    const double low = decidecades_low_hz(n), high = decidecades_high_hz(n);
    const int steps = 2000;
    double sum = 0;
    for (int i = 0; i < steps; i++)
        sum += energy_density(wave, low + (i + 0.5) / steps * (high - low)) * (high - low) / steps;
    return sum;
}

static void bands_are_the_closed_forms(void **state)
{
    (void)state;
    static const double rates[] = {48000, 192000, 500000};
    for (int r = 0; r < 3; r++)
        for (int wave = EXPONENTIAL; wave <= DAMPED_SINE; wave++) {
            const double rate = rates[r];
            uint32_t n = (uint32_t)(0.4 * rate), most = (uint32_t)(1.3 * rate);
            float *x = calloc(n, sizeof *x);
            struct impulse_bands *bands;
            double got[LEVEL_MAX_BANDS], worst = 0;
            assert_int_equal(impulse_bands_create(rate, most, &bands), STATUS_OK);
            impulse_bands_measure(bands, x, n, 0, got);
            assert_true(isnan(got[20])); /* no background is known yet */
            impulse_bands_learn(bands, x, n, 0);
            for (uint32_t i = 0; i < n; i++)
                x[i] = (float)wave_value((enum wave)wave, (i + 0.5) / rate - 0.05);
            impulse_bands_measure(bands, x, n, 0, got);
            double highest = -INFINITY;
            for (uint32_t b = 0; b < impulse_bands_count(bands); b++)
                highest = fmax(highest, got[b]);
            /* Up to 1/25 of the rate: above, the samples of a wave with a step no longer have its spectrum
             * (x / sin x, x = pi f / rate). */
            for (int band = LEVEL_FIRST_BAND; decidecades_high_hz(band) < rate / 25; band++) {
                double level = 10 * log10(band_exposure((enum wave)wave, band) / 1e-12);
                if (level > highest - 50)
                    worst = fmax(worst, fabs(got[band - LEVEL_FIRST_BAND] - level));
            }
            printf("# figure decidecade SEL of %s at %.0f Hz: within %.4f dB of the closed form, from "
                   "10 Hz up\n",
                   wave == EXPONENTIAL ? "an exponential" : "a damped sine", rate, worst);
            assert_true(worst < 0.05);
            impulse_bands_destroy(bands);
            free(x);
        }
}

/* ---- the finder */

struct sound {
    double rate;
    size_t n;
    float *x;
};

static struct sound make_sound(double rate, double seconds, double noise_pa, uint64_t seed)
{
    struct sound sound = {rate, (size_t)(rate * seconds), NULL};
    sound.x = malloc(sound.n * sizeof *sound.x);
    struct random random;
    random_reset(&random, seed);
    for (size_t i = 0; i < sound.n; i++)
        sound.x[i] = (float)(noise_pa * random_normal(&random));
    return sound;
}

static struct impulse_finder *finder_of(double rate)
{
    struct impulse_finder *finder;
    assert_int_equal(impulse_finder_create(rate, FULL_SCALE_PA, true, &finder), STATUS_OK);
    return finder;
}

static void find(const struct sound *sound, uint32_t chunk, struct found *found,
                 struct impulse_rejections *rejections)
{
    struct impulse_finder *finder = finder_of(sound->rate);
    struct impulse_sink sink = {.take = keep, .context = found};
    found->n = 0;
    for (size_t done = 0; done < sound->n;) {
        size_t take = chunk < sound->n - done ? chunk : sound->n - done;
        impulse_finder_push(finder, sound->x + done, (uint32_t)take, &sink);
        done += take;
    }
    impulse_finder_finish(finder, &sink);
    if (rejections)
        impulse_finder_get_rejections(finder, rejections);
    impulse_finder_destroy(finder);
}

static struct found found;

static void found_impulses_have_the_closed_forms(void **state)
{
    (void)state;
    static const double rates[] = {10000, 44100, 48000, 192000, 500000, 1000000};
    for (int r = 0; r < 6; r++)
        for (int wave = 0; wave < 3; wave++) {
            struct sound sound = make_sound(rates[r], 3, 0.5, 41);
            for (size_t i = 0; i < sound.n; i++)
                sound.x[i] += 0.2f + (float)wave_value((enum wave)wave, ((double)i + 0.5) / rates[r] - 1.5);
            find(&sound, 4096, &found, NULL);
            assert_int_equal(found.n, 1);
            const struct found_impulse *f = &found.impulse[0];
            char how[40];
            snprintf(how, sizeof how, "found at %.0f Hz", rates[r]);
            check_measures(how, (enum wave)wave, f->sel_db, f->peak_db, f->rms90_db, f->t90_s);
            assert_near(f->background_db, 20 * log10(0.5e6), 0.2);
            assert_false(f->clipped || f->overlapped || f->weak);
            assert_near(f->effective_s * 1e3, wanted_effective_ms[wave], 0.02 * wanted_effective_ms[wave]);
            assert_near(f->positive_impulse_pa_s, positive_impulse(wave), 0.02 * positive_impulse(wave));
            /* The window's kurtosis is its length over the effective duration. */
            assert_near(f->kurtosis, f->window_s / f->effective_s, 0.08 * f->kurtosis);
            for (int band = -13; band <= 3 && r > 0; band++) { /* 50 Hz to 2 kHz */
                double level =
                           wave == RECTANGLE ? NAN : 10 * log10(band_exposure((enum wave)wave, band) / 1e-12),
                       got = f->band_sel_db[band - LEVEL_FIRST_BAND];
                if (!isnan(level) && level > f->sel_db - 30)
                    assert_near(got, level, 0.05);
            }
            free(sound.x);
        }
}

/* A blow as a damped noise-like wave: sines of 60 to 700 Hz with random phases, rising in 3 ms, decaying with
 * tau_s; scaled to a given SEL. Returns nothing but the sum in place. */
static void add_blow(struct sound *sound, double at_s, double exposure_pa2_s, double tau_s,
                     struct random *random)
{
    enum { TONES = 24 };
    double f[TONES], phase[TONES];
    for (int k = 0; k < TONES; k++) {
        f[k] = 60 * pow(700.0 / 60, random_uniform(random));
        phase[k] = 2 * M_PI * random_uniform(random);
    }
    size_t from = (size_t)(at_s * sound->rate), n = (size_t)(10 * tau_s * sound->rate);
    n = from + n < sound->n ? n : sound->n - from;
    double *wave = malloc(n * sizeof *wave), energy = 0;
    for (size_t i = 0; i < n; i++) {
        double t = (double)i / sound->rate, sum = 0;
        for (int k = 0; k < TONES; k++)
            sum += sin(2 * M_PI * f[k] * t + phase[k]);
        wave[i] = sum * exp(-t / tau_s) * (1 - exp(-t / 0.001));
        energy += wave[i] * wave[i] / sound->rate;
    }
    for (size_t i = 0; i < n; i++)
        sound->x[from + i] += (float)(wave[i] * sqrt(exposure_pa2_s / energy));
    free(wave);
}

static int by_size(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return x < y ? -1 : x > y;
}

/* Blows every interval_s, rms over T90 snr_db above white noise of 1 Pa; all found and no other, the median
 * error of SEL. T90 of exp(-2 t / tau) energy is tau / 2 ln 19. */
static void check_blows(double rate, double interval_s, double seconds, double snr_db, double tau_s,
                        double bias_db)
{
    struct sound sound = make_sound(rate, seconds, 1, 42);
    struct random random;
    random_reset(&random, 43);
    static double at[MAX_FOUND], error[MAX_FOUND], late[MAX_FOUND];
    uint32_t n = 0, hits = 0;
    const double t90_s = tau_s / 2 * log(19), exposure = t90_s / 0.9 * pow(10, snr_db / 10);
    for (double t = 1; t < seconds - 2; t += interval_s) {
        at[n++] = t + 0.02 * random_uniform(&random);
        add_blow(&sound, at[n - 1], exposure, tau_s, &random);
    }
    find(&sound, 4096, &found, NULL);
    for (uint32_t b = 0, f = 0; b < n; b++) {
        while (f < found.n && found.impulse[f].onset_frame < (at[b] - 0.01) * rate)
            f++;
        if (f == found.n || found.impulse[f].onset_frame > (at[b] + 0.05) * rate)
            continue;
        double tail_s = at[b] + t90_s; /* about the 95 % point */
        late[hits] = (double)found.impulse[f].known_frame / rate - tail_s;
        error[hits++] = found.impulse[f].sel_db - 10 * log10(exposure * 1e12);
    }
    free(sound.x);
    qsort(error, hits, sizeof *error, by_size);
    qsort(late, hits, sizeof *late, by_size);
    double median = hits ? error[hits / 2] : NAN,
           spread = hits ? error[hits * 9 / 10] - error[hits / 10] : NAN;
    printf("# figure %.0f Hz, blows every %.2f s, %.0f dB above the noise, tau %.0f ms: %u of %u found, %u "
           "extra, SEL error "
           "median %+.3f dB, 10 to 90 %% within %.2f dB, known %.2f s after the 95 %% point (median)\n",
           rate, interval_s, snr_db, tau_s * 1e3, hits, n, found.n - hits, median, spread,
           hits ? late[hits / 2] : NAN);
    assert_int_equal(hits, n);
    assert_int_equal(found.n, n);
    assert_near(median, 0, bias_db);
}

static void blows_in_noise_are_found(void **state)
{
    (void)state;
    double length = test_length() == TEST_SHORT ? 60 : 300;
    check_blows(48000, 2, length, 20, 0.05, 0.1);
    check_blows(48000, 2, length / 2, 10, 0.05, 0.3);
    check_blows(48000, 2, length / 2, 10, 0.02, 0.3);
    check_blows(48000, 0.5, length / 2, 30, 0.03, 0.05); /* 120 a minute */
    check_blows(192000, 2, length / 5, 10, 0.05, 0.3);
    check_blows(8000, 3, length, 10, 0.1, 0.3);
    check_blows(48000, 60, length, 40, 0.15, 0.05); /* one a minute */
}

/* Noise whose spectrum falls: white noise through filters, as ships and waves make it. */
static void colour(struct sound *sound, int kind)
{
    struct filter low, lower, high;
    filter_high_pass(1, 5, sound->rate, &high);
    filter_low_pass(1, 100, sound->rate, &low);
    filter_low_pass(2, 40, sound->rate, &lower);
    for (size_t i = 0; i < sound->n; i++) {
        double x = sound->x[i];
        sound->x[i] = (float)(kind == 1   ? filter_step(&low, x)
                              : kind == 2 ? filter_step(&high, filter_step(&lower, x)) * 10 + 0.01 * x
                                          : x);
    }
}

/* The stated rate is far less than one in a day; 10 minutes of each kind of noise must hold none. */
static void noise_holds_no_impulse(void **state)
{
    (void)state;
    static const char *const kinds[] = {"white", "falling 20 dB a decade above 100 Hz", "mostly 5 to 40 Hz"};
    double seconds = test_length() == TEST_SHORT ? 60 : test_length() == TEST_LONG ? 7200 : 600;
    for (int kind = 0; kind < 3; kind++) {
        struct sound sound = make_sound(8000, seconds, 1, 50 + (uint64_t)kind);
        colour(&sound, kind);
        struct impulse_rejections r;
        find(&sound, 4096, &found, &r);
        printf("# figure noise (%s), %.0f s, seed %d: %u impulses; windows that opened %u\n", kinds[kind],
               seconds, 50 + kind, found.n, (unsigned)(r.too_weak + r.high + r.slow + r.call + r.echo));
        assert_int_equal(found.n, 0);
        free(sound.x);
    }
}

/* A tone burst with raised-cosine ramps. */
static void add_burst(struct sound *sound, double at_s, double length_s, double ramp_s, double from_hz,
                      double to_hz, double amplitude)
{
    size_t from = (size_t)(at_s * sound->rate), n = (size_t)(length_s * sound->rate);
    double phase = 0;
    for (size_t i = 0; i < n && from + i < sound->n; i++) {
        double t = (double)i / sound->rate, edge = fmin(t, length_s - t);
        double ramp = edge < ramp_s ? 0.5 - 0.5 * cos(M_PI * edge / ramp_s) : 1;
        phase += 2 * M_PI * (from_hz + (to_hz - from_hz) * t / length_s) / sound->rate;
        sound->x[from + i] += (float)(amplitude * ramp * sin(phase));
    }
}

/* What animals and sonars make, 20 to 40 dB above the noise, is no impulse: right whale upcall, fin whale
 * pulse (20 Hz, 1 s), humpback-like moan, whistle, sperm whale and porpoise clicks (common descriptions;
 * waves invented). A step of the noise's level is none either. */
static void other_sounds_are_no_impulses(void **state)
{
    (void)state;
    const double rate = 192000;
    struct sound sound = make_sound(rate, 40, 1, 61);
    add_burst(&sound, 2, 1.0, 0.1, 90, 190, 60);
    add_burst(&sound, 5, 1.0, 0.3, 23, 18, 100);
    add_burst(&sound, 8, 1.5, 0.15, 300, 450, 100);
    add_burst(&sound, 11, 0.7, 0.05, 6000, 14000, 100);
    add_burst(&sound, 13, 0.5, 0.02, 1500, 1500, 60); /* a sonar's ping */
    for (int k = 0; k < 20; k++) {
        add_burst(&sound, 15 + 0.4 * k, 0.0003, 0.0001, 11000, 11000, 1000); /* sperm whale */
        add_burst(&sound, 15.2 + 0.4 * k, 0.0001, 0.00005, 80000, 80000,
                  3000); /* porpoises: 130 kHz in life */
    }
    for (size_t i = (size_t)(30 * rate); i < sound.n; i++)
        sound.x[i] *= 4;
    struct impulse_rejections r;
    find(&sound, 4096, &found, &r);
    for (uint32_t i = 0; i < found.n; i++)
        print_message("# found at %.3f s, T90 %.3f s\n", found.impulse[i].onset_frame / rate,
                      found.impulse[i].t90_s);
    printf("# figure other sounds: %u impulses; rejected: %u high, %u slow, %u calls, %u echoes\n", found.n,
           (unsigned)r.high, (unsigned)r.slow, (unsigned)r.call, (unsigned)r.echo);
    assert_int_equal(found.n, 0);
    free(sound.x);
}

/* A second arrival or bubble pulse within half a second is part of its impulse, or nothing. */
static void an_echo_is_no_second_impulse(void **state)
{
    (void)state;
    static const double delays[] = {0.05, 0.15, 0.3, 0.45};
    for (int d = 0; d < 4; d++) {
        struct sound sound = make_sound(48000, 40, 1, 71);
        struct random random;
        random_reset(&random, 72);
        uint32_t n = 0;
        for (double t = 2; t < 37; t += 3, n++) {
            add_blow(&sound, t, 100, 0.02, &random);
            add_blow(&sound, t + delays[d], 10, 0.02, &random);
        }
        find(&sound, 4096, &found, NULL);
        assert_int_equal(found.n, n);
        free(sound.x);
    }
}

/* Two exponentials of 1000 Pa and 700 Pa with tau 10 ms (SEL 156.9897 dB and 20 lg 0.7 = 3.098 dB less) in
 * noise 66 dB below (46 where the weaker comes first): with 60 ms of quiet between them or without, one
 * impulse with the energy of both, 10 lg(1 + 0.49) = 1.7319 dB more, the peak of the greater, known within
 * 0.31 s of the first or 0.25 s of the second's end. T90 begins where the first has 5 % of the sum and ends
 * where the second lacks 5 % of it, since each has more than that: t5 = -tau / 2 ln(1 - 0.05 x 1.49), t95 =
 * delay - tau / 2 ln(0.05 x 1.49 / 0.49). Weaker first, and quiet between them: the same. */
static void an_echo_is_measured_with_its_impulse(void **state)
{
    (void)state;
    static const double delays[] = {0.03, 0.1, 0.15, 0.2, 0.25, 0.28};
    const double rate = 48000, tau = 0.01;
    for (int order = 0; order < 2; order++)
        for (int d = order ? 4 : 0; d < 6; d++) {
            const double first = order ? 0.7 : 1, second = order ? 1 : 0.7, sum = 1.49;
            struct sound sound = make_sound(rate, 4, order ? 5 : 0.5, 46);
            for (size_t i = 0; i < sound.n; i++) {
                double t = ((double)i + 0.5) / rate - 2;
                sound.x[i] += (float)(first * wave_value(EXPONENTIAL, t) +
                                      second * wave_value(EXPONENTIAL, t - delays[d]));
            }
            find(&sound, 4096, &found, NULL);
            assert_int_equal(found.n, 1);
            const struct found_impulse *f = &found.impulse[0];
            double t5 = -tau / 2 * log(1 - 0.05 * sum / (first * first)),
                   t95 = delays[d] - tau / 2 * log(0.05 * sum / (second * second));
            /* waves that still sound when the second begins: 2 exp(-delay / tau) of the product */
            double both = sum + 2 * first * second * exp(-delays[d] / tau);
            double late_s = (double)f->known_frame / rate - 2;
            printf("# figure %.0f %% and after %.2f s %.0f %%: SEL %+.4f dB from the closed form, T90 %.1f "
                   "ms for "
                   "%.1f, known after %.3f s\n",
                   100 * first, delays[d], 100 * second,
                   f->sel_db - wanted[EXPONENTIAL][0] - 10 * log10(both), f->t90_s * 1e3, (t95 - t5) * 1e3,
                   late_s);
            assert_near(f->sel_db, wanted[EXPONENTIAL][0] + 10 * log10(both), 0.05);
            assert_near(f->peak_db, 180 + (order ? 20 * log10(1 + 0.7 * exp(-delays[d] / tau)) : 0), 0.05);
            if (d > 0)
                assert_near(f->t90_s, t95 - t5, 0.5e-3);
            assert_near(f->onset_frame / rate, 2 + t5, 1.5e-3);
            assert_true(late_s <= fmax(0.31, delays[d] + 0.25));
            free(sound.x);
        }
}

/* A blow is what it is without them where clicks of a sperm whale or a dolphin, a whistle, a fin whale's
 * pulse or a much louder blow come 0.2 s after it (waves invented). */
static void what_follows_and_is_no_echo_is_not_measured(void **state)
{
    (void)state;
    const double rate = 192000;
    double alone_db = NAN;
    for (int kind = 0; kind < 6; kind++) {
        struct sound sound = make_sound(rate, 4, 1, 47);
        for (size_t i = 0; i < sound.n; i++)
            sound.x[i] += 0.05F * (float)wave_value(DAMPED_SINE, ((double)i + 0.5) / rate - 2);
        for (int k = 0; k < 8 && kind == 1; k++)
            add_burst(&sound, 2.2 + 0.012 * k, 0.0003, 0.0001, 11000, 11000, 100);
        for (int k = 0; k < 8 && kind == 2; k++)
            add_burst(&sound, 2.2 + 0.012 * k, 0.0001, 0.00005, 80000, 80000, 1000);
        if (kind == 3)
            add_burst(&sound, 2.2, 0.4, 0.02, 6000, 14000, 100);
        if (kind == 4)
            add_burst(&sound, 2.26, 1.0, 0.1, 23, 18, 20);
        for (size_t i = 0; i < sound.n && kind == 5; i++)
            sound.x[i] += (float)wave_value(DAMPED_SINE, ((double)i + 0.5) / rate - 2.2);
        struct impulse_rejections r;
        find(&sound, 4096, &found, &r);
        printf("# figure a blow, and what is no echo (%d): %u found, SEL %.3f dB; rejected: %u high, %u not "
               "sudden, %u like a call\n",
               kind, found.n, found.n > 0 ? found.impulse[0].sel_db : NAN, (unsigned)r.high, (unsigned)r.slow,
               (unsigned)r.call);
        assert_int_equal(found.n, kind == 5 ? 2 : 1);
        if (kind == 0)
            alone_db = found.impulse[0].sel_db;
        assert_near(found.impulse[0].sel_db, alone_db, 0.001);
        free(sound.x);
    }
}

/* Blows every 0.5 s, each with an echo 6 dB weaker 0.2 or 0.28 s later: each is found, and none is taken for
 * an echo. */
static void echoes_do_not_join_blows(void **state)
{
    (void)state;
    for (int d = 0; d < 2; d++) {
        struct sound sound = make_sound(48000, 14, 1, 48);
        struct random random;
        random_reset(&random, 49);
        uint32_t n = 0;
        for (double t = 2; t < 12; t += 0.5, n++) {
            add_blow(&sound, t, 100, 0.02, &random);
            add_blow(&sound, t + (d ? 0.28 : 0.2), 25, 0.02, &random);
        }
        find(&sound, 4096, &found, NULL);
        assert_int_equal(found.n, n);
        for (uint32_t i = 0; i < n; i++)
            assert_near(found.impulse[i].sel_db, 10 * log10(125e12), 0.2);
        free(sound.x);
    }
}

/* What comes just before a blow (a first arrival through the sea floor, another sound) does not hide it. */
static void a_weak_arrival_before_does_not_hide_a_blow(void **state)
{
    (void)state;
    static const double delays[] = {0.03, 0.1, 0.2, 0.29};
    for (int d = 0; d < 4; d++) {
        struct sound sound = make_sound(48000, 40, 1, 75);
        struct random random;
        random_reset(&random, 76);
        for (double t = 2; t < 37; t += 3) {
            add_blow(&sound, t - delays[d], 0.3, 0.01, &random);
            add_blow(&sound, t, 1000, 0.03, &random);
        }
        find(&sound, 4096, &found, NULL);
        uint32_t n = 0;
        for (uint32_t i = 0; i < found.n; i++)
            n += fabs(found.impulse[i].sel_db - 150) < 0.1;
        assert_int_equal(n, 12);
        free(sound.x);
    }
}

static void clipped_and_overlapped_are_said(void **state)
{
    (void)state;
    struct sound sound = make_sound(48000, 10, 1, 81);
    struct random random;
    random_reset(&random, 82);
    add_blow(&sound, 2, 1e6, 0.05, &random);
    add_blow(&sound, 5, 1000, 0.3, &random);
    add_blow(&sound, 5.5, 1000, 0.05, &random);
    for (size_t i = 0; i < sound.n; i++)
        sound.x[i] = fmaxf(-FULL_SCALE_PA, fminf(FULL_SCALE_PA * 32767 / 32768, sound.x[i]));
    find(&sound, 4096, &found, NULL);
    assert_int_equal(found.n, 3);
    assert_true(found.impulse[0].clipped);
    assert_false(found.impulse[1].clipped);
    assert_true(found.impulse[1].overlapped);
    assert_false(found.impulse[2].overlapped);
    assert_near(found.impulse[2].onset_frame / 48000, 5.5, 0.04);
    free(sound.x);
}

/* The same for every chunking, and in frame numbers from where the reset says. */
static void chunks_do_not_matter(void **state)
{
    (void)state;
    struct sound sound = make_sound(48000, 20, 1, 91);
    struct random random;
    random_reset(&random, 92);
    for (double t = 1; t < 18; t += 1.3)
        add_blow(&sound, t, 3, 0.05, &random);
    static struct found first;
    find(&sound, 4096, &first, NULL);
    assert_true(first.n >= 13);
    static const uint32_t chunks[] = {1, 7, 48, 1000, 960000};
    for (int c = 0; c < 5; c++) {
        find(&sound, chunks[c], &found, NULL);
        assert_int_equal(found.n, first.n);
        for (uint32_t i = 0; i < first.n; i++) {
            assert_true(found.impulse[i].onset_frame == first.impulse[i].onset_frame);
            assert_true(found.impulse[i].sel_db == first.impulse[i].sel_db);
            assert_true(found.impulse[i].known_frame == first.impulse[i].known_frame);
        }
    }
    struct impulse_finder *finder = finder_of(48000);
    struct impulse_sink sink = {.take = keep, .context = &found};
    found.n = 0;
    impulse_finder_reset(finder, 1000000);
    impulse_finder_push(finder, sound.x, (uint32_t)sound.n, &sink);
    assert_int_equal(found.n, first.n);
    assert_near(found.impulse[0].onset_frame, first.impulse[0].onset_frame + 1e6, 1e-6);
    impulse_finder_destroy(finder);
    finder = NULL;
    assert_int_equal(impulse_finder_create(1000, 1, false, &finder), STATUS_BAD_ARGUMENT);
    assert_int_equal(impulse_finder_create(48000, 0, false, &finder), STATUS_BAD_ARGUMENT);
    assert_null(finder);
    impulse_finder_destroy(NULL);
    free(sound.x);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(measures_are_the_closed_forms),
        cmocka_unit_test(the_background_is_taken_off),
        cmocka_unit_test(bands_are_the_closed_forms),
        cmocka_unit_test(found_impulses_have_the_closed_forms),
        cmocka_unit_test(blows_in_noise_are_found),
        cmocka_unit_test(noise_holds_no_impulse),
        cmocka_unit_test(other_sounds_are_no_impulses),
        cmocka_unit_test(an_echo_is_no_second_impulse),
        cmocka_unit_test(an_echo_is_measured_with_its_impulse),
        cmocka_unit_test(what_follows_and_is_no_echo_is_not_measured),
        cmocka_unit_test(echoes_do_not_join_blows),
        cmocka_unit_test(a_weak_arrival_before_does_not_hide_a_blow),
        cmocka_unit_test(clipped_and_overlapped_are_said),
        cmocka_unit_test(chunks_do_not_matter),
    };
    return cmocka_run_group_tests_name("impulses", tests, NULL, NULL);
}
