/* Every sound made of pulses that lib/scene can make, alone in a calm sea, and what the classes of
 * config/calls say of it: the animals' by their own class, none by another group's. The recipes' figures and
 * sources stand in lib/scene/kind_*.c. */
#include "support/test.h"

#include "call/pulses.h"
#include "level/calibration.h"
#include "scene/kind.h"
#include "scene/render.h"
#include "support/catalogue.h"
#include <math.h>
#include <stdlib.h>

#define CHUNK 65536

static struct catalogue catalogue;

struct heard {
    uint32_t n_calls[CATALOGUE_MAX_CLASSES], n_pulses[CATALOGUE_MAX_CLASSES];
    double first_s[CATALOGUE_MAX_CLASSES], rate_hz;
};

static void hear(void *context, const struct found_call *found)
{
    struct heard *heard = context;
    uint32_t c = found->class_index;
    if (heard->n_calls[c]++ == 0)
        heard->first_s[c] = (double)found->known_frame / heard->rate_hz;
    heard->n_pulses[c] += found->n_pulses;
}

struct voice {
    const char *kind, *class_name; /* class_name NULL: nothing may be heard */
    double rate_hz, seconds, range_m;
    double interval_s; /* 0: the kind's */
};

static const struct scene_hydrophone hydrophone = {.place = {.x_m = 0, .y_m = 0, .z_m = 20},
                                                   .calibration = {.known = true,
                                                                   .sensitivity_db = -170,
                                                                   .full_scale_v = 10,
                                                                   .expected_peak_db = NAN,
                                                                   .self_noise_db = NAN,
                                                                   .role = ROLE_BOTH}};

static void listen_to(const struct voice *voice, uint64_t seed, struct heard *heard)
{
    static struct scene scene;
    scene_reset(&scene);
    scene.seed = seed;
    scene.rate_hz = voice->rate_hz;
    scene.duration_s = voice->seconds;
    scene.sea.wind_m_s = 4;
    scene.n_hydrophones = 1;
    scene.hydrophones[0] = hydrophone;
    scene.n_emitters = 1;
    scene.emitters[0] = scene_emitter_of(voice->kind);
    scene.emitters[0].track.at_start = (struct scene_place){voice->range_m, 0, 20};
    scene.emitters[0].start_s = voice->seconds / 5;
    if (voice->interval_s > 0)
        scene.emitters[0].interval_s = voice->interval_s;
    struct render *render;
    struct pulses *pulses;
    float *samples = calloc(CHUNK, sizeof *samples);
    assert_non_null(samples);
    assert_int_equal(render_create(&scene, &render), STATUS_OK);
    assert_int_equal(pulses_create(catalogue.classes, catalogue.n_classes, voice->rate_hz, &pulses),
                     STATUS_OK);
    pulses_reset(pulses, 0);
    *heard = (struct heard){.rate_hz = voice->rate_hz};
    struct found_sink sink = {hear, heard};
    const double pa = calibration_pa_per_unit(&hydrophone.calibration);
    for (uint64_t at = 0; at + CHUNK <= voice->seconds * voice->rate_hz; at += CHUNK) {
        render_get(render, at, samples, CHUNK);
        for (uint32_t i = 0; i < CHUNK; i++)
            samples[i] *= (float)pa;
        pulses_push(pulses, samples, CHUNK, &sink);
    }
    pulses_finish(pulses, &sink);
    pulses_destroy(pulses);
    render_destroy(render);
    free(samples);
}

static const struct voice animals[] = {
    {"sperm whale clicks", "sperm whale click train", 96000, 60, 3000, 0},
    {"sperm whale coda", "sperm whale coda", 96000, 60, 500, 0},
    {"sperm whale creak", "sperm whale creak", 96000, 60, 800, 0},
    {"sperm whale slow clicks", "sperm whale slow clicks", 48000, 120, 5000, 0},
    {"beaked whale clicks", "beaked whale pulse train", 192000, 40, 800, 0},
    {"blainville clicks", "beaked whale pulse train", 192000, 40, 800, 0},
    {"delphinid clicks", "delphinid click train", 192000, 30, 400, 0},
    {"delphinid burst pulse", "delphinid burst pulse", 192000, 20, 400, 0},
    {"porpoise clicks", "porpoise click train", 384000, 15, 100, 0},
    {"porpoise buzz", "porpoise buzz", 384000, 15, 40, 0},
    {"fin whale pulse", "fin whale song", 8000, 400, 15000, 0},
    {"minke slow-down train", "minke whale pulse train", 8000, 150, 1500, 0},
    {"minke speed-up train", "minke whale pulse train", 8000, 150, 1500, 0},
};

static enum group group_of(const char *class_name)
{
    for (uint32_t c = 0; c < catalogue.n_classes; c++)
        if (strcmp(catalogue.classes[c].name, class_name) == 0)
            return catalogue.classes[c].group;
    fail_msg("no class %s", class_name);
    return GROUP_UNKNOWN;
}

static void each_animal_is_heard_as_its_own(void **state)
{
    (void)state;
    uint32_t n_other = 0, n_missed = 0;
    for (uint32_t v = 0; v < sizeof animals / sizeof animals[0]; v++) {
        const struct voice *voice = &animals[v];
        struct heard heard;
        listen_to(voice, 70 + v, &heard);
        printf("# figure %s:", voice->kind);
        bool found = false;
        for (uint32_t c = 0; c < catalogue.n_classes; c++) {
            if (!heard.n_calls[c])
                continue;
            printf(" %s %u calls of %u pulses, first known at %.1f s;", catalogue.classes[c].name,
                   heard.n_calls[c], heard.n_pulses[c], heard.first_s[c]);
            found |= strcmp(catalogue.classes[c].name, voice->class_name) == 0;
            n_other +=
                catalogue.classes[c].animal && catalogue.classes[c].group != group_of(voice->class_name);
        }
        printf("\n");
        n_missed += !found;
    }
    assert_int_equal(n_missed, 0);
    assert_int_equal(n_other, 0);
}

static int load(void **state)
{
    (void)state;
    return test_load_catalogue(&catalogue) ? 0 : -1;
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(each_animal_is_heard_as_its_own)};
    return cmocka_run_group_tests_name("train classes", tests, load, NULL);
}
