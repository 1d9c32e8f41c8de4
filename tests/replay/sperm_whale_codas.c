/* Real rhythms: the codas of two whales that overlap in time, from the annotations of the Dominica Sperm
 * Whale Project (Sharma et al. 2024, Nature Communications, doi 10.1038/s41467-024-47221-8, CC BY 4.0).
 * Clicks are synthesised at the real times (Gabor pulse of Mohl 2003), given to the pulse finder and its
 * trains, and each train is held against the whale that made most of its clicks. Levels are not in the
 * annotations: each whale gets one of its own (a spread of 5 dB between whales, 1 dB between clicks;
 * invented). */
#include "support/test.h"

#include "base/random.h"
#include "base/units.h"
#include "call/codas.h"
#include "call/trigger.h"
#include "support/catalogue.h"
#include "support/clicks.h"
#include <math.h>
#include <stdlib.h>

#define RATE 96000.0
#define SLOT 3
#define MAX_CODAS 4096
#define MAX_CLICKS 64
#define BEFORE_S 30.0 /* of noise: how often strays come is known by then */

struct coda {
    char recording[64];
    int whale, n;
    double start_s, times_s[MAX_CLICKS];
};

static struct coda codas[MAX_CODAS];

/* REC, nClicks, Duration, ICI1..ICI28, Whale, TsTo. */
static int load(const char *path)
{
    FILE *file = fopen(path, "r");
    assert_non_null(file);
    char line[2048];
    int n = 0;
    assert_non_null(fgets(line, sizeof line, file));
    while (n < MAX_CODAS && fgets(line, sizeof line, file)) {
        struct coda *coda = &codas[n];
        char *rest = line, *field = strsep(&rest, ",");
        snprintf(coda->recording, sizeof coda->recording, "%s", field);
        coda->n = atoi(strsep(&rest, ","));
        strsep(&rest, ",");
        coda->times_s[0] = 0;
        for (int i = 1; i <= 28; i++) {
            double interval = atof(strsep(&rest, ","));
            if (i < coda->n && i < MAX_CLICKS)
                coda->times_s[i] = coda->times_s[i - 1] + interval;
        }
        coda->whale = atoi(strsep(&rest, ","));
        coda->start_s = atof(strsep(&rest, ","));
        n += coda->n >= 3;
    }
    fclose(file);
    return n;
}

static struct call_class coda_class; /* of config/calls */

static void load_class(void)
{
    static struct catalogue catalogue;
    assert_true(test_load_catalogue(&catalogue));
    for (uint32_t c = 0; c < catalogue.n_classes; c++)
        if (strcmp(catalogue.classes[c].name, "sperm whale coda") == 0)
            coda_class = catalogue.classes[c];
    assert_true(coda_class.train.free_rhythm);
}

struct truth {
    double frame;
    int whale; /* 0 or 1 */
    int train; /* number of the train that has it, 0 none */
};

struct scene {
    struct truth clicks[2 * MAX_CLICKS];
    int n_clicks;
    struct codas *trains;
    double pulse_frames[4096];
    uint32_t n_pulses;
    uint64_t rejections[REJECT_COUNT];
};

static void take_train(void *context, const struct train *train)
{
    struct scene *scene = context;
    for (uint32_t i = 0; i < train->n_pulses; i++)
        for (int c = 0; c < scene->n_clicks; c++)
            if (fabs(scene->pulse_frames[train->members[i]] - scene->clicks[c].frame) < 0.001 * RATE)
                scene->clicks[c].train = (int)train->number;
}

static void take_pulse(void *context, const struct pulse *pulse)
{
    struct scene *scene = context;
    struct train_sink sink = {take_train, scene};
    assert_true(scene->n_pulses < 4096);
    scene->pulse_frames[scene->n_pulses++] = pulse->frame;
    codas_push(scene->trains, pulse, &sink, scene->rejections);
}

static double noise_rate_of(const void *context, double snr)
{
    return pulse_search_get_noise_rate(context, snr);
}

/* How one whale's clicks sound: from off the axis, five pulses of alternating sign whose distance is the time
 * sound takes through its head (Mohl 2003; the distance follows the body's length), each differing a little
 * from click to click (how much is invented). */
struct voice {
    double level_db, pulse_distance_s, frequency_hz;
    bool one_pulse;
};

static struct voice voice_of(double level_db, bool one_pulse, struct random *random)
{
    return (struct voice){level_db, 2.5e-3 + 5.5e-3 * random_uniform(random),
                          8000 + 4000 * random_uniform(random), one_pulse};
}

static void add_click(const struct voice *voice, double frame, float *x, size_t n, struct random *random)
{
    static const double amplitudes[] = {0.35, -1, 0.35, -0.12, 0.05};
    double amplitude = units_amplitude_ratio(voice->level_db + random_normal(random));
    if (voice->one_pulse) {
        clicks_add_gabor(x, n, RATE, frame, amplitude, 12000, 45e-6);
        return;
    }
    for (int p = 0; p < 5; p++) {
        double frequency = voice->frequency_hz * (1 + 0.03 * random_normal(random));
        double own = amplitude * amplitudes[p] * units_amplitude_ratio(1.5 * random_normal(random));
        double distance = voice->pulse_distance_s * (p - 1) * RATE;
        clicks_add_gabor(x, n, RATE, frame + distance, own, frequency, 45e-6);
    }
}

static void add_coda(struct scene *scene, const struct coda *coda, int whale, double from_s,
                     const struct voice *voice, float *x, size_t n, struct random *random)
{
    for (int i = 0; i < coda->n; i++) {
        double frame = (BEFORE_S + coda->start_s - from_s + coda->times_s[i]) * RATE;
        add_click(voice, frame, x, n, random);
        scene->clicks[scene->n_clicks++] = (struct truth){frame, whale, 0};
    }
}

/* Gives how many clicks are in a train of which their own whale made most. */
static int hear_pair(struct bands *bands, struct pulse_search *search, struct trigger *trigger,
                     const struct coda *a, const struct coda *b, bool one_pulse, struct random *random,
                     int *out_clicks, int *out_in_trains)
{
    static struct scene scene;
    memset(&scene, 0, sizeof scene);
    struct noise_rate noise = {noise_rate_of, search};
    assert_int_equal(codas_create(&coda_class, RATE, noise, &scene.trains), STATUS_OK);
    double end_s = fmax(a->start_s + a->times_s[a->n - 1], b->start_s + b->times_s[b->n - 1]) - a->start_s;
    uint32_t block = 64 * SLOT;
    size_t n = ((size_t)((BEFORE_S + end_s + 2.5) * RATE) / block + 1) * block;
    float *x = calloc(n, sizeof *x);
    assert_non_null(x);
    clicks_add_noise(x, n, 1, random);
    struct voice first = voice_of(25, one_pulse, random);
    struct voice second = voice_of(25 + 5 * random_normal(random), one_pulse, random);
    add_coda(&scene, a, 0, a->start_s, &first, x, n, random);
    add_coda(&scene, b, 1, a->start_s, &second, x, n, random);
    bands_reset(bands);
    pulse_search_reset(search);
    trigger_reset(trigger);
    struct pulse_sink pulse_sink = {take_pulse, &scene};
    struct train_sink train_sink = {take_train, &scene};
    for (size_t at = 0; at < n; at += block) {
        bands_push(bands, x + at);
        pulse_search_push(search);
        trigger_push(trigger, &pulse_sink, scene.rejections);
        codas_advance(scene.trains, trigger_get_known(trigger), &train_sink, scene.rejections);
    }
    trigger_finish(trigger, &pulse_sink);
    codas_finish(scene.trains, &train_sink, scene.rejections);
    int right = 0;
    for (int c = 0; c < scene.n_clicks; c++) {
        int own = 0, other = 0;
        for (int k = 0; k < scene.n_clicks; k++)
            if (scene.clicks[c].train && scene.clicks[k].train == scene.clicks[c].train)
                *(scene.clicks[k].whale == scene.clicks[c].whale ? &own : &other) += 1;
        right += own > other;
        *out_in_trains += scene.clicks[c].train != 0;
    }
    *out_clicks += scene.n_clicks;
    codas_destroy(scene.trains);
    free(x);
    return right;
}

static void hear_all(bool one_pulse, double least)
{
    const char *path = test_shared("data/sperm-whale-codas.csv");
    assert_non_null(path);
    load_class();
    int n_codas = load(path), n_pairs = 0, clicks = 0, in_trains = 0, right = 0;
    struct band_edges edges[] = {
        {coda_class.low_hz, 2 * coda_class.low_hz}, /* in parts, as call/pulses has it */
        {2 * coda_class.low_hz, coda_class.high_hz},
        {coda_class.train.guard_low_hz, coda_class.train.guard_high_hz}};
    struct bands *bands;
    struct pulse_search *search;
    struct trigger *trigger;
    uint32_t history = trigger_get_history(&coda_class, RATE, SLOT);
    assert_int_equal(bands_create(RATE, edges, 3, SLOT, 64, history, &bands), STATUS_OK);
    struct search_setup setup = {.call_class = &coda_class,
                                 .bands = bands,
                                 .band = {.n = 2, .bands = {0, 1}},
                                 .guards = {{.n = 1, .bands = {2}}},
                                 .rate_hz = RATE,
                                 .slot_frames = SLOT,
                                 .block_slots = 64,
                                 .history_slots = history,
                                 .frames_per_frame = 1};
    assert_int_equal(pulse_search_create(&setup, &search), STATUS_OK);
    assert_int_equal(trigger_create(&coda_class, search, &trigger), STATUS_OK);
    struct random random;
    random_reset(&random, 2024);
    int every = test_length() == TEST_LONG ? 1 : test_length() == TEST_CHECK ? 3 : 20, k = 0;
    for (int i = 0; i < n_codas; i++)
        for (int j = 0; j < n_codas; j++) {
            const struct coda *a = &codas[i], *b = &codas[j];
            bool overlap = b->start_s >= a->start_s && b->start_s <= a->start_s + a->times_s[a->n - 1];
            if (i == j || !overlap || a->whale == b->whale || strcmp(a->recording, b->recording) != 0 ||
                k++ % every)
                continue;
            right += hear_pair(bands, search, trigger, a, b, one_pulse, &random, &clicks, &in_trains);
            n_pairs++;
        }
    trigger_destroy(trigger);
    pulse_search_destroy(search);
    bands_destroy(bands);
    printf(
        "# figure codas, %s: %d pairs, %d clicks: %.1f %% in a train, %.1f %% in a train of their own whale "
        "(%.1f %% of those in trains; goal 90 %%)\n",
        one_pulse ? "all whales alike but for the level" : "each whale its own pulse distance", n_pairs,
        clicks, 100.0 * in_trains / clicks, 100.0 * right / clicks, 100.0 * right / in_trains);
    assert_true(n_pairs >= 15);
    assert_true(right > least * in_trains); /* chance gives half */
    assert_true(in_trains > 0.85 * clicks);
}

static void overlapping_codas_keep_their_whales(void **state)
{
    (void)state;
    hear_all(false, 0.9);
}

static void codas_that_differ_only_in_level_stay_mixed(void **state)
{
    (void)state;
    /* No more than chance is claimed. Known levels would give 1 - arctan(2 s / d) / pi, 0.88, for spreads of
     * s = 1 dB between clicks and d = 5 dB between whales. */
    hear_all(true, 0.5);
}

int main(void)
{
    if (!test_shared("data/sperm-whale-codas.csv")) {
        printf("1..1\nok 1 # SKIP skipped: no recording\n");
        return 0;
    }
    const struct CMUnitTest tests[] = {cmocka_unit_test(overlapping_codas_keep_their_whales),
                                       cmocka_unit_test(codas_that_differ_only_in_level_stay_mixed)};
    return cmocka_run_group_tests_name("sperm whale codas", tests, NULL, NULL);
}
