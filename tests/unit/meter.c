/* lib/level/meter and decidecades: closed forms of ISO 18405:2017, the class 1 mask of IEC 61260-1:2014,
 * noise within its statistical spread, independence of chunking, seconds beside a gap. */
#include "support/test.h"

#include "base/random.h"
#include "level/decidecades.h"
#include "level/meter.h"
#include <math.h>
#include <stdlib.h>

#define MAX_LEVELS 64

struct levels {
    uint32_t n;
    struct found_level level[MAX_LEVELS];
};

static void keep(void *context, const struct found_level *level)
{
    struct levels *levels = context;
    if (levels->n < MAX_LEVELS)
        levels->level[levels->n++] = *level;
}

/* Pushes n samples, in chunks of the given length or of random ones where it is 0. */
static void measure(struct meter *meter, const float *x, size_t n, uint32_t chunk, struct levels *out)
{
    struct level_sink sink = {keep, out};
    struct random random;
    random_reset(&random, 5);
    for (size_t done = 0; done < n;) {
        size_t take = chunk ? chunk : 1 + random_bits(&random) % 9000;
        take = take < n - done ? take : n - done;
        meter_push(meter, x + done, (uint32_t)take, &sink);
        done += take;
    }
}

static struct levels measure_once(double rate, const float *x, size_t n)
{
    struct levels levels = {0};
    struct meter *meter;
    assert_int_equal(meter_create(rate, false, &meter), STATUS_OK);
    meter_reset(meter, 0);
    measure(meter, x, n, 4096, &levels);
    meter_destroy(meter);
    return levels;
}

static float *tone(double rate, double f, double seconds)
{
    size_t n = (size_t)(rate * seconds);
    float *x = malloc(n * sizeof *x);
    for (size_t i = 0; i < n; i++)
        x[i] = (float)sin(2 * M_PI * fmod(f * (double)i / rate, 1.0));
    return x;
}

/* A sine of amplitude 1 Pa: SPL 116.9897, peak 120.0000 dB re 1 uPa (ISO 18405, closed form). */
static void a_sine_has_its_level(void **state)
{
    (void)state;
    static const double rates[] = {8000, 44100, 48000, 96000, 192000, 384000, 1000000};
    for (size_t r = 0; r < sizeof rates / sizeof rates[0]; r++) {
        double f = 1000;
        float *x = tone(rates[r], f, 3.5);
        struct levels levels = measure_once(rates[r], x, (size_t)(rates[r] * 3.5));
        assert_int_equal(levels.n, 3);
        for (uint32_t i = 0; i < 3; i++) {
            const struct found_level *level = &levels.level[i];
            assert_int_equal(level->start_frame, i * (uint64_t)rates[r]);
            assert_int_equal(level->frames, (uint64_t)rates[r]);
            assert_near(level->spl_db, 116.9897, 0.001);
            assert_near(level->peak_db, 120.0, rates[r] > 8000 ? 0.03 : 0.7);
            if (i > 0)
                assert_near(level->band_db[20], 116.9897, 0.01);
            double wait = (double)(level->known_frame - (i + 1) * (uint64_t)rates[r]) / rates[r];
            assert_true(wait >= -1 && wait < 0.4);
            if (i == 1)
                printf("# figure %.0f Hz: %u bands, levels known %.3f s after their second\n", rates[r],
                       level->n_bands, wait);
        }
        free(x);
    }
}

/* Attenuation of a band for a steady tone: tone level less band level, at the second second after the start.
 */
static double attenuation(double rate, int n, double f)
{
    double seconds = n < -10 ? 5.5 : 3.5;
    float *x = tone(rate, f, seconds);
    struct levels levels = measure_once(rate, x, (size_t)(rate * seconds));
    const struct found_level *level = &levels.level[levels.n - 1];
    double band = level->band_db[n - LEVEL_FIRST_BAND];
    free(x);
    return 116.9897 - band;
}

/* IEC 61260-1:2014 Table 1, class 1, at the breakpoints of a third of an octave (f / fm, least and greatest
 * attenuation in dB). At the band edge itself both sides' limits hold. */
struct breakpoint {
    double ratio, least, greatest;
};
static const struct breakpoint class1[] = {
    {1.00000, -0.4, 0.4},      {1.02667, -0.4, 0.5},    {1.05575, -0.4, 0.7},
    {1.08746, -0.4, 1.4},      {1.12202, 1.2, 5.3},     {1.29437, 16.6, INFINITY},
    {1.88173, 40.5, INFINITY}, {3.05365, 60, INFINITY}, {5.39195, 70.0, INFINITY},
};

static void check_mask(double rate, int n)
{
    const double centre = 1000 * pow(10, n / 10.0);
    double flat = 0, margin = INFINITY, far_least = INFINITY;
    uint32_t outside = 0;
    for (size_t b = 0; b < sizeof class1 / sizeof class1[0]; b++)
        for (int side = 0; side < 2; side++) {
            double f = side ? centre / class1[b].ratio : centre * class1[b].ratio;
            if (f > 0.47 * rate || f < 1 || (side && b == 0))
                continue;
            double a = attenuation(rate, n, f);
            double room = fmin(a - class1[b].least, class1[b].greatest - a);
            if (b < 4)
                flat = fmax(flat, fabs(a));
            if (b >= 7)
                far_least = fmin(far_least, a);
            margin = fmin(margin, room);
            if (!(room >= 0)) {
                outside++;
                print_message(
                    "# rate %.0f band %d at %.5f fm: attenuation %.2f dB, class 1 wants %.1f to %.1f\n", rate,
                    n, f / centre, a, class1[b].least, class1[b].greatest);
            }
        }
    printf("# figure rate %.0f Hz, band n = %d (%.4g Hz): class 1 %s, least margin %.2f dB, within %.2f dB "
           "up to G^0.375, "
           "at least %.1f dB from G^3 on\n",
           rate, n, centre, outside ? "NOT met" : "met", margin, flat, far_least);
    assert_int_equal(outside, 0);
}

static void bands_keep_the_class_1_mask(void **state)
{
    (void)state;
    static const double rates[] = {48000, 96000, 384000};
    for (int r = 0; r < 3; r++) {
        if (test_length() == TEST_SHORT && r)
            break;
        check_mask(rates[r], -20);
        check_mask(rates[r], -10);
        check_mask(rates[r], -5); /* on either side of the filters' end */
        check_mask(rates[r], -4);
        check_mask(rates[r], 0);
        check_mask(rates[r], 8);
        check_mask(rates[r], LEVEL_FIRST_BAND + (int)decidecades_count(rates[r]) - 1);
    }
    static const double more[] = {8000, 16000, 22050, 32000, 44100, 192000, 500000, 1000000};
    for (int r = 0; test_length() == TEST_LONG && r < 8; r++)
        for (uint32_t b = 0; b < decidecades_count(more[r]); b++)
            check_mask(more[r], LEVEL_FIRST_BAND + (int)b);
}

/* White noise of variance 1 Pa2: a band holds bandwidth / (rate / 2) of it. The spread of each second's level
 * is that of chi-square with 2 B T degrees of freedom (closed form); the mean energy over T seconds has a
 * relative deviation of 1 / sqrt(B T). */
static void noise_bands_keep_their_spread(void **state)
{
    (void)state;
    const double rate = 48000;
    enum { SECONDS = 60 };
    struct random random;
    random_reset(&random, 21);
    printf("# seed 21\n");
    struct levels levels = {0};
    struct meter *meter;
    assert_int_equal(meter_create(rate, false, &meter), STATUS_OK);
    meter_reset(meter, 0);
    static float x[48000];
    for (int s = 0; s < SECONDS; s++) {
        for (int i = 0; i < 48000; i++)
            x[i] = (float)random_normal(&random);
        measure(meter, x, 48000, 4096, &levels);
    }
    meter_destroy(meter);
    assert_int_equal(levels.n, SECONDS - 1);
    double worst_mean = 0, worst_spread = 0;
    for (uint32_t b = 0; b < decidecades_count(rate); b++) {
        int n = LEVEL_FIRST_BAND + (int)b;
        double width = decidecades_high_hz(n) - decidecades_low_hz(n), wanted = width / (rate / 2);
        double sum = 0, sum2 = 0;
        int count = 0;
        for (uint32_t i = 1; i < levels.n; i++, count++) {
            double power = pow(10, levels.level[i].band_db[b] / 10) * 1e-12 / wanted;
            sum += power;
            sum2 += power * power;
        }
        double mean = sum / count, deviation = sqrt(sum2 / count - mean * mean);
        /* 4.5 standard deviations of the mean, and the deviation within a factor: sd of a sample deviation of
         * 58 values is 9 %; neighbouring seconds share a little. */
        double z = (mean - 1) * sqrt(width * count), ratio = deviation * sqrt(width);
        worst_mean = fmax(worst_mean, fabs(z));
        worst_spread = fmax(worst_spread, fabs(ratio - 1));
        if (fabs(z) > 4.5 || fabs(ratio - 1) > 0.45)
            print_message("# band %d: mean %.4f z %.2f, deviation over expected %.3f\n", n, mean, z, ratio);
        assert_true(fabs(z) < 4.5);
        assert_true(fabs(ratio - 1) < 0.45);
    }
    printf("# figure noise bands: mean energy within %.1f standard deviations, spread within %.0f %% of 1 / "
           "sqrt(B T)\n",
           worst_mean, 100 * worst_spread);
}

/* Centres 1000 x 10^(n/10) Hz and edges a twentieth of a decade away (IEC 61260-1:2014, 5.2 to 5.5, base ten,
 * b = 3), worked out apart to eight digits; and the last band whose upper edge is below 0.94 of the Nyquist
 * frequency: 20 kHz at 48 kHz, 40 kHz at 96 kHz. */
static void bands_have_their_edges(void **state)
{
    (void)state;
    static const struct {
        int n;
        double low_hz, high_hz, width_hz;
    } bands[] = {{-20, 8.912509, 11.220185, 2.307675},
                 {-13, 44.668359, 56.234133, 11.565773},
                 {-10, 89.125094, 112.201845, 23.076752},
                 {-1, 707.945784, 891.250938, 183.305154},
                 {0, 891.250938, 1122.018454, 230.767516},
                 {1, 1122.018454, 1412.537545, 290.519090},
                 {13, 17782.794100, 22387.211386, 4604.417285},
                 {16, 35481.338923, 44668.359215, 9187.020292},
                 {22, 141253.754462, 177827.941004, 36574.186542}};
    for (size_t i = 0; i < sizeof bands / sizeof bands[0]; i++) {
        assert_near(decidecades_low_hz(bands[i].n) / bands[i].low_hz, 1, 1e-7);
        assert_near(decidecades_high_hz(bands[i].n) / bands[i].high_hz, 1, 1e-7);
        double width = decidecades_high_hz(bands[i].n) - decidecades_low_hz(bands[i].n);
        assert_near(width / bands[i].width_hz, 1, 3e-7);
    }
    static const int last[][2] = {{8000, 5},   {44100, 12},  {48000, 13},
                                  {96000, 16}, {192000, 19}, {384000, 22}};
    for (int i = 0; i < 6; i++)
        assert_int_equal(LEVEL_FIRST_BAND + (int)decidecades_count(last[i][0]) - 1, last[i][1]);
}

/* What a second's level of a band scatters by in Gaussian noise: 10 lg of chi-square with 2 B T degrees of
 * freedom (its logarithm's mean and variance are digamma and trigamma functions; worked out apart): standard
 * deviation, mean less the level of the mean energy, 2.5 and 97.5 % points, dB. The tolerance is four
 * standard errors of each figure over the seconds heard, and for the shares what binomial counts allow;
 * neighbouring seconds of the lowest bands share a little sound, and the skirts of their filters hold more of
 * it than the band does (up to 9 % less scatter). */
static void seconds_of_noise_scatter_as_chi_square(void **state)
{
    (void)state;
    static const struct {
        int n;
        double sd_db, bias_db, low_db, high_db;
    } want[] = {{-17, 2.1357, -0.4874, -5.1432, 3.2171},
                {-12, 1.1589, -0.1511, -2.5661, 1.9750},
                {-9, 0.8157, -0.0757, -1.7462, 1.4506},
                {0, 0.2862, -0.0094, -0.5793, 0.5426},
                {10, 0.0904, -0.0009, -0.1790, 0.1754}};
    enum { RATE = 48000, BANDS = 5 };
    const int seconds = test_length() == TEST_SHORT ? 60 : 400;
    static float x[RATE];
    double sum[BANDS] = {0}, sum2[BANDS] = {0};
    int inside[BANDS] = {0}, count = 0;
    struct random random;
    random_reset(&random, 22);
    struct meter *meter;
    assert_int_equal(meter_create(RATE, false, &meter), STATUS_OK);
    for (int s = 0; s < seconds; s++) {
        struct levels levels = {0};
        for (int i = 0; i < RATE; i++)
            x[i] = (float)random_normal(&random);
        measure(meter, x, RATE, 4096, &levels);
        for (uint32_t i = 0; s > 2 && i < levels.n; i++, count++)
            for (int b = 0; b < BANDS; b++) {
                double width = decidecades_high_hz(want[b].n) - decidecades_low_hz(want[b].n);
                double off = levels.level[i].band_db[want[b].n - LEVEL_FIRST_BAND] - 120 -
                             10 * log10(width / (RATE / 2));
                sum[b] += off;
                sum2[b] += off * off;
                inside[b] += off > want[b].low_db && off < want[b].high_db;
            }
    }
    meter_destroy(meter);
    for (int b = 0; b < BANDS; b++) {
        double mean = sum[b] / count, sd = sqrt(sum2[b] / count - mean * mean);
        printf(
            "# figure noise in band n = %d, %d s, seed 22: scatter %.4f dB for %.4f, bias %+.4f for %+.4f, "
            "%.1f %% within the 95 %% of chi-square\n",
            want[b].n, count, sd, want[b].sd_db, mean, want[b].bias_db, 100.0 * inside[b] / count);
        assert_near(mean, want[b].bias_db, 4 * want[b].sd_db / sqrt(count));
        assert_near(sd / want[b].sd_db, 1, 4 / sqrt(2.0 * count));
        assert_near(inside[b] / (double)count, 0.95, 4 * sqrt(0.05 * 0.95 / count));
    }
}

/* A click anywhere in a second counts alike: its energy in the FFT's bands, summed over the seconds, is the
 * same wherever it lies (closed form: a unit sample has energy 2 B / rate in a band of width B). */
static void a_click_counts_alike_anywhere(void **state)
{
    (void)state;
    enum { RATE = 48000, N = 4 * RATE };
    static float x[N];
    double worst = 0, worst_low = 0;
    for (int place = 0; place < 23; place++) {
        size_t at = RATE + (size_t)place * 2087 + 11;
        x[at] = 1000;
        struct levels levels = measure_once(RATE, x, N);
        for (uint32_t b = 10; b < levels.level[0].n_bands; b++) {
            int n = LEVEL_FIRST_BAND + (int)b;
            double energy = 0, width = decidecades_high_hz(n) - decidecades_low_hz(n);
            for (uint32_t i = 0; i < levels.n; i++)
                energy += pow(10, levels.level[i].band_db[b] / 10) * 1e-12 * RATE;
            double error = fabs(10 * log10(energy / (1e6 * 2 * width / RATE)));
            if (b < 16) /* the filters' energy of a click is that of the noise bandwidth */
                worst_low = fmax(worst_low, error);
            else
                worst = fmax(worst, error);
        }
        x[at] = 0;
    }
    printf(
        "# figure energy of a click in a band, 23 places in a second: within %.3f dB, %.3f dB below 400 Hz\n",
        worst, worst_low);
    assert_true(worst < 0.05);
    assert_true(worst_low < 0.05);
}

/* A converter's offset is no sound: the levels are those without it. */
static void an_offset_is_no_sound(void **state)
{
    (void)state;
    enum { RATE = 48000, N = RATE * 7 / 2 };
    float *x = tone(RATE, 1000, 3.5);
    for (int i = 0; i < N; i++)
        x[i] += 30;
    struct levels levels = measure_once(RATE, x, N);
    for (uint32_t i = 0; i < 3; i++) {
        assert_near(levels.level[i].spl_db, 116.9897, 0.01);
        assert_near(levels.level[i].peak_db, 120, 0.01);
        assert_true(levels.level[i].band_db[0] < 60);
    }
    free(x);
}

static void chunks_do_not_matter(void **state)
{
    (void)state;
    enum { N = 48000 * 3 };
    static float x[N];
    struct random random;
    random_reset(&random, 8);
    for (int i = 0; i < N; i++)
        x[i] = (float)random_normal(&random);
    static const uint32_t chunks[] = {1, 997, 2048, 4096, N, 0};
    struct levels first = {0};
    struct meter *meter;
    assert_int_equal(meter_create(48000, true, &meter), STATUS_OK);
    for (int c = 0; c < 6; c++) {
        struct levels levels = {0};
        struct level_sink sink = {keep, &levels};
        meter_reset(meter, 12345);
        measure(meter, x, N, chunks[c], &levels);
        meter_finish(meter, &sink);
        if (c == 0)
            first = levels;
        assert_int_equal(levels.n, 4);
        for (uint32_t i = 0; i < 4; i++) {
            assert_int_equal(levels.level[i].start_frame, first.level[i].start_frame);
            assert_int_equal(levels.level[i].known_frame, first.level[i].known_frame);
            assert_int_equal(levels.level[i].frames, first.level[i].frames);
            assert_true(levels.level[i].spl_db == first.level[i].spl_db);
            assert_true(levels.level[i].peak_db == first.level[i].peak_db);
            assert_memory_equal(levels.level[i].band_db, first.level[i].band_db,
                                sizeof levels.level[i].band_db);
        }
    }
    assert_int_equal(first.level[0].start_frame, 12345);
    assert_int_equal(first.level[0].frames, 48000 - 12345);
    assert_int_equal(first.level[3].frames, 12345);
    assert_true(first.level[0].relative);
    /* 12345 frames are 0.257 s, of which the bank counts what follows its settling: 10 Hz needs 0.43 s. */
    assert_true(isnan(first.level[3].band_db[0]) || first.level[3].frames > 20000);
    assert_true(isfinite(first.level[3].band_db[20]));
    meter_destroy(meter);
}

/* Less than 0.1 s gives nothing; silence is -infinity, not NAN. */
static void short_seconds_and_silence(void **state)
{
    (void)state;
    static float x[8000];
    struct levels levels = {0};
    struct level_sink sink = {keep, &levels};
    struct meter *meter;
    assert_int_equal(meter_create(8000, false, &meter), STATUS_OK);
    meter_reset(meter, 8000 - 799);
    meter_push(meter, x, 799, &sink);
    meter_finish(meter, &sink);
    assert_int_equal(levels.n, 0);
    meter_reset(meter, 16000 - 800);
    meter_push(meter, x, 800, &sink);
    meter_finish(meter, &sink);
    assert_int_equal(levels.n, 1);
    assert_true(isinf(levels.level[0].spl_db) && levels.level[0].spl_db < 0);
    meter_destroy(meter);
    meter = NULL;
    assert_int_equal(meter_create(7999, false, &meter), STATUS_BAD_ARGUMENT);
    assert_int_equal(meter_create(48000.5, false, &meter), STATUS_BAD_ARGUMENT);
    assert_int_equal(meter_create(NAN, false, &meter), STATUS_BAD_ARGUMENT);
    assert_null(meter);
    meter_destroy(NULL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_sine_has_its_level),
        cmocka_unit_test(bands_keep_the_class_1_mask),
        cmocka_unit_test(noise_bands_keep_their_spread),
        cmocka_unit_test(a_click_counts_alike_anywhere),
        cmocka_unit_test(an_offset_is_no_sound),
        cmocka_unit_test(chunks_do_not_matter),
        cmocka_unit_test(short_seconds_and_silence),
        cmocka_unit_test(bands_have_their_edges),
        cmocka_unit_test(seconds_of_noise_scatter_as_chi_square),
    };
    return cmocka_run_group_tests_name("meter", tests, NULL, NULL);
}
