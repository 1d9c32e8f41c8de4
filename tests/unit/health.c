/* lib/level/health: each fault is found where it is, ends where it ends, and sound has none. */
#include "support/test.h"

#include "base/random.h"
#include "level/health.h"
#include <math.h>
#include <stdlib.h>

#define RATE 48000
#define N (RATE * 40)
#define MAX_FAULTS 256

struct faults {
    uint32_t n;
    struct found_fault fault[MAX_FAULTS];
};

static void keep(void *context, const struct found_fault *fault)
{
    struct faults *faults = context;
    assert_true(faults->n < MAX_FAULTS);
    assert_true(fault->start_frame < fault->end_frame);
    assert_true((double)(fault->end_frame - fault->start_frame) <= HEALTH_LONGEST_PIECE_S * RATE);
    faults->fault[faults->n++] = *fault;
}

static float x[N];

static void make_noise(uint64_t seed, double deviation)
{
    struct random random;
    random_reset(&random, seed);
    for (int i = 0; i < N; i++) /* as a 16-bit converter gives it */
        x[i] = (float)(round(random_normal(&random) * deviation * 32768) / 32768);
}

static const struct calibration relative = {.self_noise_db = NAN};

static struct faults judge(uint32_t chunk)
{
    struct faults faults = {0};
    struct fault_sink sink = {keep, &faults};
    struct health *health;
    assert_int_equal(health_create(RATE, &relative, &health), STATUS_OK);
    health_reset(health, 1000);
    for (uint32_t done = 0; done < N;) {
        uint32_t take = chunk < N - done ? chunk : N - done;
        health_push(health, x + done, take, &sink);
        done += take;
    }
    health_finish(health, &sink);
    health_destroy(health);
    return faults;
}

/* The pieces of one cause adjoin; [*start, *end) is their whole. */
static uint32_t whole(const struct faults *faults, enum health_cause cause, uint64_t *start, uint64_t *end)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < faults->n; i++) {
        const struct found_fault *fault = &faults->fault[i];
        if (fault->cause != cause)
            continue;
        if (n)
            assert_int_equal(fault->start_frame, *end);
        else
            *start = fault->start_frame;
        *end = fault->end_frame;
        n++;
    }
    return n;
}

static void sound_is_healthy(void **state)
{
    (void)state;
    static const double deviations[] = {0.2, 0.001, 0.00002}; /* the last: within one step of 16 bits */
    for (int d = 0; d < 3; d++) {
        make_noise(31, deviations[d]);
        assert_int_equal(judge(4096).n, 0);
    }
}

static void a_dead_channel_is_found(void **state)
{
    (void)state;
    static const float values[] = {0, 0.25f};
    for (int v = 0; v < 2; v++) {
        make_noise(32, 0.1);
        for (int i = 5 * RATE; i < 33 * RATE; i++)
            x[i] = values[v];
        for (int i = 36 * RATE; i < 36 * RATE + RATE * 4 / 10; i++) /* too short */
            x[i] = values[v];
        struct faults faults = judge(4096);
        uint64_t start = 0, end = 0;
        uint32_t n = whole(&faults, HEALTH_DEAD, &start, &end);
        assert_int_equal(n, faults.n);
        assert_true(n >= 5 && n <= 9);
        assert_near((double)start - 1000, 5.0 * RATE, 256);
        assert_near((double)end - 1000, 33.0 * RATE, 256);
        /* the first piece is known half a second and a cell after the start */
        assert_true(faults.fault[0].known_frame <= start + RATE / 2 + 256);
    }
}

static void a_frozen_channel_is_found(void **state)
{
    (void)state;
    static const int periods[] = {64, 441, 8192, 11900};
    for (int p = 0; p < 4; p++) {
        make_noise(33, 0.1);
        for (int i = 10 * RATE; i < 20 * RATE; i++)
            x[i] = x[i - periods[p]];
        struct faults faults = judge(4096);
        uint64_t start = 0, end = 0;
        assert_int_equal(whole(&faults, HEALTH_FROZEN, &start, &end), faults.n);
        assert_true(faults.n > 0);
        assert_near((double)start - 1000, 10.0 * RATE, RATE * 0.8);
        assert_near((double)end - 1000, 20.0 * RATE, RATE * 0.51);
        assert_true((double)end - 1000 <= 20.0 * RATE);
    }
}

static void clipping_is_found(void **state)
{
    (void)state;
    make_noise(34, 0.1);
    const int at = 7 * RATE + 77;
    x[3 * RATE] = 1; /* one sample alone is a peak, not clipping */
    x[at] = x[at + 1] = -1;
    x[at + RATE / 20] = x[at + RATE / 20 + 1] = x[at + RATE / 20 + 2] = 32767.0f / 32768;
    x[at + RATE] = x[at + RATE + 1] = 1;
    struct faults faults = judge(4096);
    assert_int_equal(faults.n, 2);
    assert_int_equal(faults.fault[0].cause, HEALTH_CLIPPING);
    assert_int_equal(faults.fault[0].start_frame, 1000 + at);
    assert_int_equal(faults.fault[0].end_frame, 1000 + at + RATE / 20 + 3);
    assert_int_equal(faults.fault[1].start_frame, 1000 + at + RATE);
    assert_int_equal(faults.fault[1].end_frame, 1000 + at + RATE + 2);
    assert_true((double)faults.fault[0].known_frame <= 1000.0 + at + RATE * 0.16 + 256);
}

static void chunks_do_not_matter(void **state)
{
    (void)state;
    make_noise(35, 0.4);
    for (int i = 12 * RATE; i < 15 * RATE; i++)
        x[i] = 0;
    for (int i = 20 * RATE; i < 24 * RATE; i++)
        x[i] = x[i - 500];
    for (int i = 0; i < N; i++)
        x[i] = fmaxf(-1, fminf(1, x[i]));
    struct faults first = judge(4096);
    assert_true(first.n > 5);
    static const uint32_t chunks[] = {1, 331, 2048, 100000};
    for (int c = 0; c < 4; c++) {
        struct faults faults = judge(chunks[c]);
        assert_int_equal(faults.n, first.n);
        for (uint32_t i = 0; i < first.n; i++) {
            assert_int_equal(faults.fault[i].cause, first.fault[i].cause);
            assert_int_equal(faults.fault[i].start_frame, first.fault[i].start_frame);
            assert_int_equal(faults.fault[i].end_frame, first.fault[i].end_frame);
            assert_int_equal(faults.fault[i].known_frame, first.fault[i].known_frame);
        }
    }
}

static void not_finite_samples_are_counted(void **state)
{
    (void)state;
    make_noise(36, 0.1);
    x[100] = NAN;
    x[101] = INFINITY;
    x[90000] = -INFINITY;
    struct faults faults = {0};
    struct fault_sink sink = {keep, &faults};
    struct health *health;
    assert_int_equal(health_create(RATE, &relative, &health), STATUS_OK);
    for (int i = 0; i < N; i++)
        x[i] += 0.05f;
    health_push(health, x, N, &sink);
    struct health_counts counts;
    health_get_counts(health, &counts);
    assert_int_equal(counts.n_not_finite, 3);
    assert_near(counts.dc, 0.05, 4 * 0.1 / sqrt(24000));
    assert_int_equal(faults.n, 0);
    health_destroy(health);
}

static void a_copied_channel_is_found(void **state)
{
    (void)state;
    make_noise(37, 0.1);
    struct faults faults = {0};
    struct fault_sink sink = {keep, &faults};
    struct health *channels[3];
    for (int c = 0; c < 3; c++)
        assert_int_equal(health_create(RATE, &relative, &channels[c]), STATUS_OK);
    static float other[4096];
    for (uint32_t done = 0; done + 4096 <= N; done += 4096) {
        for (int i = 0; i < 4096; i++)
            other[i] = -x[done + (uint32_t)i];
        bool copied = done >= 10 * RATE && done < 20 * RATE;
        health_push(channels[0], x + done, 4096, &sink);
        health_push(channels[1], other, 4096, &sink);
        health_push(channels[2], copied ? other : x + N - 4096 - done, 4096, &sink);
        for (int b = 1; b < 3; b++)
            for (int a = 0; a < b; a++)
                health_compare(channels[a], channels[b], &sink);
    }
    uint64_t start = 0, end = 0;
    assert_int_equal(whole(&faults, HEALTH_DUPLICATE, &start, &end), faults.n);
    assert_true(faults.n > 0);
    assert_near((double)start, 10.0 * RATE, RATE * 0.6);
    assert_near((double)end, 20.0 * RATE, RATE * 0.6);
    for (int c = 0; c < 3; c++)
        health_destroy(channels[c]);
}

/* A channel of -180 dB re 1 V/uPa at 1 V: full scale is 180 dB. White noise of spectral density L has band
 * level L + 10 lg(bandwidth). Calmest sea of Knudsen (1948), 44.5 dB re 1 uPa2/Hz at 1 kHz. */
static bool too_quiet(double density_db, double self_noise_db, bool known)
{
    struct faults faults = {0};
    struct fault_sink sink = {keep, &faults};
    struct calibration calibration = {
        .known = known, .sensitivity_db = -180, .full_scale_v = 1, .self_noise_db = self_noise_db};
    struct health *health;
    assert_int_equal(health_create(RATE, &calibration, &health), STATUS_OK);
    struct found_level level = {.frames = RATE, .n_bands = 34, .spl_db = density_db + 10 * log10(RATE / 2.0)};
    for (int b = 0; b < 34; b++)
        level.band_db[b] = density_db + 10 * log10(0.2307675 * 1000 * pow(10, (b - 20) / 10.0));
    for (int s = 0; s < 30; s++) {
        level.start_frame = (uint64_t)s * RATE;
        level.known_frame = level.start_frame + RATE + 100;
        health_take_level(health, &level, &sink);
    }
    health_finish(health, &sink);
    uint64_t start = 0, end = 0;
    if (whole(&faults, HEALTH_TOO_QUIET, &start, &end)) {
        assert_int_equal(start, 0);
        assert_int_equal(end, 30 * RATE);
    }
    health_destroy(health);
    return faults.n > 0;
}

static void a_hydrophone_out_of_the_water_is_found(void **state)
{
    (void)state;
    /* White noise is nearest to the calm curve at 5 kHz, where that is 44.5 - 11.9 = 32.6 dB. */
    assert_true(too_quiet(22.5, NAN, true));
    assert_false(too_quiet(22.8, NAN, true));
    assert_false(too_quiet(60, NAN, true));
    assert_false(too_quiet(0, NAN, false));
    assert_true(too_quiet(60, 60 + 43.4, true));
    assert_false(too_quiet(60, 60 + 42.8, true));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(sound_is_healthy),          cmocka_unit_test(a_dead_channel_is_found),
        cmocka_unit_test(a_frozen_channel_is_found), cmocka_unit_test(clipping_is_found),
        cmocka_unit_test(chunks_do_not_matter),      cmocka_unit_test(not_finite_samples_are_counted),
        cmocka_unit_test(a_copied_channel_is_found), cmocka_unit_test(a_hydrophone_out_of_the_water_is_found),
    };
    return cmocka_run_group_tests_name("health", tests, NULL, NULL);
}
