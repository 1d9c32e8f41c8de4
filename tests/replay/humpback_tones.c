/* Real humpback song through the tone tracer with the shipped catalogue: 64.8 s recorded in Glacier Bay by
 * the US National Park Service (C. Gabriele), public domain, not part of the project. */
#include "support/test.h"

#include "call/tones.h"
#include "support/catalogue.h"
#include <math.h>
#include <sndfile.h>
#include <stdlib.h>

#define RECORDING "data/glacier-bay-humpback.hq.ogg"
#define MAX_CALLS 400
#define N_LABELS 17

/* Start and end in s: rough labels from a 186 ms FFT, not an expert's. */
static const double labels[N_LABELS][2] = {
    {0.05, 0.6},  {1.0, 3.0},   {4.4, 7.9},   {8.7, 10.5},  {12.0, 17.1}, {18.7, 20.5},
    {21.9, 23.6}, {24.9, 26.9}, {27.8, 29.4}, {31.5, 32.6}, {37.3, 38.3}, {42.8, 47.0},
    {47.9, 48.9}, {54.2, 54.4}, {55.9, 56.5}, {58.9, 61.4}, {63.2, 63.7}};

struct calls {
    double rate_hz;
    uint32_t n;
    struct found_call calls[MAX_CALLS];
};

static struct catalogue *load_catalogue(void)
{
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    assert_true(catalogue && test_load_catalogue(catalogue));
    return catalogue;
}

/* The whole recording, or NULL where it is absent. */
static float *read_recording(double *out_rate, uint32_t *out_n)
{
    const char *path = test_shared(RECORDING);
    if (!path)
        return NULL;
    SF_INFO info = {0};
    SNDFILE *file = sf_open(path, SFM_READ, &info);
    assert_non_null(file);
    assert_int_equal(info.channels, 1);
    float *samples = malloc((size_t)info.frames * sizeof *samples);
    assert_int_equal(sf_readf_float(file, samples, info.frames), info.frames);
    sf_close(file);
    *out_rate = info.samplerate;
    *out_n = (uint32_t)info.frames;
    return samples;
}

static void keep(void *context, const struct found_call *found)
{
    struct calls *calls = context;
    if (calls->n < MAX_CALLS)
        calls->calls[calls->n] = *found;
    calls->n++;
}

static struct calls *trace(const struct catalogue *catalogue, const float *samples, uint32_t n,
                           double rate_hz)
{
    struct calls *calls = calloc(1, sizeof *calls);
    calls->rate_hz = rate_hz;
    struct found_sink sink = {keep, calls};
    struct tones *tones = NULL;
    assert_int_equal(tones_create(catalogue->classes, catalogue->n_classes, rate_hz, &tones), STATUS_OK);
    for (uint32_t at = 0; at < n; at += 2048)
        tones_push(tones, samples + at, n - at < 2048 ? n - at : 2048, &sink);
    tones_finish(tones, &sink);
    tones_destroy(tones);
    assert_true(calls->n <= MAX_CALLS);
    return calls;
}

/* Overlap of at least 0.3 of the union for labels of 1.0 s or more, of 0.1 s for shorter ones. */
static bool matches(const struct calls *calls, uint32_t i, uint32_t label)
{
    double start = calls->calls[i].start_frame / calls->rate_hz;
    double end = calls->calls[i].end_frame / calls->rate_hz;
    double common = fmin(end, labels[label][1]) - fmax(start, labels[label][0]);
    double both = fmax(end, labels[label][1]) - fmin(start, labels[label][0]);
    return labels[label][1] - labels[label][0] >= 1.0 ? common >= 0.3 * both : common >= 0.1;
}

/* One step of Kuhn's maximum matching: finds a call for the label, moving others where it must. */
static bool find_call(const struct calls *calls, uint32_t label, bool *visited, int *owner)
{
    for (uint32_t i = 0; i < calls->n; i++) {
        if (visited[i] || !matches(calls, i, label))
            continue;
        visited[i] = true;
        if (owner[i] < 0 || find_call(calls, (uint32_t)owner[i], visited, owner)) {
            owner[i] = (int)label;
            return true;
        }
    }
    return false;
}

static uint32_t count_matched(const struct calls *calls)
{
    int owner[MAX_CALLS];
    uint32_t n = 0;
    for (uint32_t i = 0; i < calls->n; i++)
        owner[i] = -1;
    for (uint32_t label = 0; label < N_LABELS; label++) {
        bool visited[MAX_CALLS] = {false};
        n += find_call(calls, label, visited, owner);
    }
    return n;
}

static void print_calls(const struct catalogue *catalogue, const struct calls *calls)
{
    for (uint32_t i = 0; i < calls->n; i++) {
        const struct found_call *call = &calls->calls[i];
        printf("# %-20s %6.2f to %6.2f s, %5.0f to %5.0f Hz, %4.1f dB\n",
               catalogue->classes[call->class_index].name, call->start_frame / calls->rate_hz,
               call->end_frame / calls->rate_hz, call->low_hz, call->high_hz, call->snr_db);
    }
}

static void song_units_are_found_and_little_else(void **state)
{
    (void)state;
    double rate_hz;
    uint32_t n, n_baleen = 0, n_late = 0;
    float *samples = read_recording(&rate_hz, &n);
    struct catalogue *catalogue = load_catalogue();
    struct calls *calls = trace(catalogue, samples, n, rate_hz);
    print_calls(catalogue, calls);
    for (uint32_t i = 0; i < calls->n; i++) {
        const struct call_class *class = &catalogue->classes[calls->calls[i].class_index];
        n_baleen += class->group == GROUP_BALEEN_WHALE;
        double late = (double)calls->calls[i].known_frame - calls->calls[i].end_frame;
        n_late += late > (class->natural_delay_s + 0.1) * rate_hz;
    }
    uint32_t n_matched = count_matched(calls);
    printf(
        "# figure humpback recording: %u of %d labels matched by %u calls, %u of them of baleen whales, %u "
        "later than natural delay + 0.1 s\n",
        n_matched, N_LABELS, calls->n, n_baleen, n_late);
    assert_true(n_matched >= 12);
    assert_true(calls->n <= 40);
    assert_true(n_baleen >= 0.8 * calls->n);
    assert_int_equal(n_late, 0);
    free(calls);
    free(catalogue);
    free(samples);
}

/* Blows as decaying sines of 200 Hz every 2 s, 10 dB above the recording's peak: an invented hammer. */
static void song_is_found_under_hammer_blows(void **state)
{
    (void)state;
    double rate_hz, peak = 0;
    uint32_t n;
    float *samples = read_recording(&rate_hz, &n);
    for (uint32_t i = 0; i < n; i++)
        peak = fmax(peak, fabs(samples[i]));
    for (double start = 0.7; start * rate_hz < n; start += 2)
        for (uint32_t i = 0; i < 0.5 * rate_hz; i++) {
            double t = i / rate_hz;
            uint32_t at = (uint32_t)(start * rate_hz) + i;
            if (at < n)
                samples[at] += (float)(3.162 * peak * exp(-t / 0.03) * sin(2 * 3.14159265358979 * 200 * t));
        }
    struct catalogue *catalogue = load_catalogue();
    struct calls *calls = trace(catalogue, samples, n, rate_hz);
    print_calls(catalogue, calls);
    uint32_t n_matched = count_matched(calls);
    printf("# figure humpback under 32 blows of +10 dB: %u of %d labels matched by %u calls\n", n_matched,
           N_LABELS, calls->n);
    assert_true(n_matched >= 10);
    assert_true(calls->n <= 40);
    free(calls);
    free(catalogue);
    free(samples);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(song_units_are_found_and_little_else),
        cmocka_unit_test(song_is_found_under_hammer_blows),
    };
    if (!test_shared(RECORDING)) {
        printf("1..1\nok 1 # SKIP skipped: no recording\n");
        return 0;
    }
    return cmocka_run_group_tests_name("humpback tones", tests, NULL, NULL);
}
