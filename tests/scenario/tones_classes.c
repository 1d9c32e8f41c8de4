/* Every kind of tone that lib/scene gives, in Gaussian noise: it is found as its own class, with its times,
 * and not as another's. SNR is that of a steady tone of the call's mean square in a cell of a Hann window of
 * cell_s, as the scene's truth states it. The calls are invented by lib/scene/kind_*.c, each of which names
 * the published figures that it follows. */
#include "support/test.h"

#include "base/random.h"
#include "base/units.h"
#include "call/tones.h"
#include "scene/kind.h"
#include "support/catalogue.h"
#include <math.h>
#include <stdlib.h>

#define MAX_CALLS 40
#define SEED 4

/* What is asked for: of the kind's calls at this SNR at least `recall` as one of the class, and at most
 * `strays` calls of the other classes for each of them. */
struct row {
    const char *kind, *class;
    double rate_hz, cell_s, snr_db, recall, strays;
};

/* Downsweeps of blue, sei and fin whales differ in duration alone, which weak ends hide; a killer whale's
 * pulse rate, a boing's lines and a trill's last part are also heard by the song's class. */
static const struct row rows[] = {
    {"blue whale moan", "blue whale B call", 2000, 2.0, 15, 0.6, 0.3},
    {"blue whale A call", "blue whale A call", 2000, 2.0, 15, 0.5, 0.3},
    {"blue whale Z call", "blue whale Z call", 2000, 2.0, 15, 0.8, 0.3},
    {"blue whale D call", "blue whale D call", 2000, 0.256, 15, 0.7, 0.4},
    {"sei whale downsweep", "sei whale downsweep", 2000, 0.256, 15, 0.5, 0.5},
    {"fin whale 40 Hz call", "fin whale 40 Hz call", 2000, 0.256, 15, 0.6, 0.4},
    {"sei whale downsweep", "sei whale downsweep", 2000, 0.256, 27, 0.5, 0.5},
    {"fin whale 40 Hz call", "fin whale 40 Hz call", 2000, 0.256, 27, 0.6, 0.4},
    {"right whale upcall", "right whale upcall", 8000, 0.128, 15, 0.7, 0.4},
    {"minke boing", "minke boing", 16000, 0.128, 20, 0.7, 0.4},
    {"killer whale call", "killer whale call", 48000, 0.0213, 20, 0.6, 0.6},
    {"beluga whistle", "delphinid whistle", 48000, 0.0213, 15, 0.8, 0.5},
    {"varied delphinid whistle", "delphinid whistle", 48000, 0.0213, 15, 0.7, 0.3},
    {"killer whale whistle", "delphinid whistle", 48000, 0.0213, 15, 0.8, 0.3},
    {"pilot whale whistle", "delphinid whistle", 48000, 0.0213, 15, 0.8, 0.5},
    {"stepped whistle", "delphinid whistle", 48000, 0.0213, 15, 0.5, 0.5},
    {"bearded seal trill", "bearded seal trill", 24000, 0.032, 15, 0.8, 1},
};

struct truth {
    double start_s, end_s;
    double right_s; /* covered by calls of its class: a long one is given in pieces */
};

struct trial {
    const struct row *row;
    const struct catalogue *catalogue;
    uint32_t n_calls, wanted;
    struct truth calls[MAX_CALLS];
    uint32_t of_class[CATALOGUE_MAX_CLASSES];
};

static void take(void *context, const struct found_call *found)
{
    struct trial *trial = context;
    double start_s = found->start_frame / trial->row->rate_hz, end_s = found->end_frame / trial->row->rate_hz;
    trial->of_class[found->class_index]++;
    for (uint32_t i = 0; i < trial->n_calls; i++) {
        struct truth *call = &trial->calls[i];
        double common = fmin(end_s, call->end_s) - fmax(start_s, call->start_s);
        if (found->class_index == trial->wanted)
            call->right_s += fmax(0, common);
    }
}

/* Adds the emission from start_s on and says when it ends. */
static double add_emission(const struct emission *emission, double start_s, double rate_hz, double amplitude,
                           uint32_t n, float *out)
{
    double gain[SOUND_MAX_PARTS], end_s = start_s;
    for (uint32_t k = 0; k < SOUND_MAX_PARTS; k++)
        gain[k] = 1;
    uint32_t n_pulses = emission->n_pulses ? emission->n_pulses : 1;
    for (uint32_t p = 0; p < n_pulses; p++) {
        double at_s = start_s + (emission->n_pulses ? emission->pulse_s[p] : 0);
        double size = amplitude * (emission->n_pulses ? (double)emission->pulse_gain[p] : 1);
        uint32_t first = (uint32_t)ceil(at_s * rate_hz);
        sound_add(&emission->sound, 0, gain, size, size, first / rate_hz - at_s, 1 / rate_hz, n - first,
                  out + first);
        if (emission->tail.length_s > 0)
            sound_add(&emission->tail, 0, gain, size, size, first / rate_hz - at_s, 1 / rate_hz, n - first,
                      out + first);
        end_s = at_s + emission->sound.length_s;
    }
    return end_s;
}

static float *make_sound(struct trial *trial, uint32_t wanted_calls, uint32_t *out_n)
{
    const struct row *row = trial->row;
    struct random random;
    random_reset(&random, SEED);
    struct scene_emitter emitter = scene_emitter_of(row->kind);
    assert_non_null(emitter.kind);
    double most_s = emitter.kind->max_length_s + 16;
    uint32_t n = *out_n = (uint32_t)((15 + wanted_calls * most_s) * row->rate_hz);
    float *out = malloc(n * sizeof *out);
    assert_non_null(out);
    for (uint32_t i = 0; i < n; i++)
        out[i] = (float)random_normal(&random);
    double amplitude = sqrt(3 * units_power_ratio(row->snr_db) / (row->cell_s * row->rate_hz));
    static struct emission emission;
    double at_s = 15;
    for (uint32_t i = 0; i < wanted_calls; i++) {
        struct kind_order order = {
            .emitter = &emitter, .rate_hz = row->rate_hz, .repertoire = 1 + i / 4, .number = i + 1};
        memset(&emission, 0, sizeof emission);
        kind_make(&order, &random, &emission);
        double end_s = add_emission(&emission, at_s, row->rate_hz, amplitude, n, out);
        uint32_t n_pulses = emission.n_pulses ? emission.n_pulses : 1;
        for (uint32_t p = 0; p < n_pulses && trial->n_calls < MAX_CALLS; p++) {
            double from_s = at_s + (emission.n_pulses ? emission.pulse_s[p] : 0);
            trial->calls[trial->n_calls++] =
                (struct truth){.start_s = from_s, .end_s = from_s + emission.sound.length_s};
        }
        at_s = end_s + random_between(&random, 6, 14);
    }
    return out;
}

static uint32_t class_named(const struct catalogue *catalogue, const char *name)
{
    uint32_t c = 0;
    while (c < catalogue->n_classes && strcmp(catalogue->classes[c].name, name) != 0)
        c++;
    return c;
}

static bool run_row(const struct row *row, const struct catalogue *catalogue, uint32_t n_calls)
{
    struct trial *trial = calloc(1, sizeof *trial);
    *trial = (struct trial){.row = row, .catalogue = catalogue};
    trial->wanted = class_named(catalogue, row->class);
    uint32_t n;
    float *samples = make_sound(trial, n_calls, &n);
    struct tones *tones = NULL;
    struct found_sink sink = {take, trial};
    assert_int_equal(tones_create(catalogue->classes, catalogue->n_classes, row->rate_hz, &tones), STATUS_OK);
    for (uint32_t at = 0; at < n; at += 2048)
        tones_push(tones, samples + at, n - at < 2048 ? n - at : 2048, &sink);
    tones_finish(tones, &sink);
    tones_destroy(tones);
    free(samples);
    uint32_t n_right = 0, n_all = 0;
    for (uint32_t i = 0; i < trial->n_calls; i++)
        n_right += trial->calls[i].right_s >= 0.4 * (trial->calls[i].end_s - trial->calls[i].start_s);
    printf("# figure %s, %g dB in %g s: %u of %u as %s;", row->kind, row->snr_db, row->cell_s, n_right,
           trial->n_calls, row->class);
    for (uint32_t c = 0; c < catalogue->n_classes; c++)
        if (c != trial->wanted && trial->of_class[c]) {
            printf(" %u %s;", trial->of_class[c], catalogue->classes[c].name);
            n_all += trial->of_class[c];
        }
    printf(" seed %d\n", SEED);
    bool good = n_right >= row->recall * trial->n_calls && n_all <= row->strays * trial->n_calls;
    free(trial);
    return good;
}

static void each_kind_is_found_as_its_class(void **state)
{
    (void)state;
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    assert_true(catalogue && test_load_catalogue(catalogue));
    uint32_t n_calls = test_length() == TEST_LONG ? 30 : test_length() == TEST_SHORT ? 4 : 10, n_bad = 0;
    for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++)
        n_bad += !run_row(&rows[i], catalogue, n_calls);
    free(catalogue);
    assert_int_equal(n_bad, 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(each_kind_is_found_as_its_class)};
    return cmocka_run_group_tests_name("tone classes", tests, NULL, NULL);
}
