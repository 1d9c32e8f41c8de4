/* Every create function survives the failure of its Nth own allocation, for every N: it says
 * STATUS_NO_MEMORY, leaves its output untouched and keeps nothing. The allocators are wrapped by the linker
 * for our own objects only; FFTW's planner, which ends the program without memory, is outside the count. The
 * idea: SQLite's out-of-memory tests ("How SQLite Is Tested"). */
#include "support/test.h"

#include "call/gate.h"
#include "call/others.h"
#include "call/pulses.h"
#include "call/tones.h"
#include "dsp/background.h"
#include "dsp/decimate.h"
#include "dsp/spectrum.h"
#include "http/board.h"
#include "http/player.h"
#include "level/exposure.h"
#include "level/health.h"
#include "level/impulses.h"
#include "level/meter.h"
#include "level/together.h"
#include "listen/blocks.h"
#include "listen/listen.h"
#include "listen/strips.h"
#include "merge.h"
#include "record/minute.h"
#include "rule/tally.h"
#include "rule/watch.h"
#include "scene/render.h"
#include "sea/fit.h"
#include "settings/catalogue.h"
#include "settings/criteria.h"
#include "settings/permit.h"
#include "settings/scene.h"
#include "sound/clip_store.h"
#include "sound/clips.h"
#include "sound/disk_ring.h"
#include "sound/keeper.h"
#include "watcher.h"
#include <fftw3.h>
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>

#define MAX_LIVE 16384

static bool counting;
static long allocations, fail_at;
static void *live[MAX_LIVE];
static size_t n_live;

void *__real_malloc(size_t size);
void *__real_calloc(size_t n, size_t size);
void *__real_realloc(void *old, size_t size);
void *__real_aligned_alloc(size_t alignment, size_t size);
void __real_free(void *pointer);
float *__real_fftwf_alloc_real(size_t n);
fftwf_complex *__real_fftwf_alloc_complex(size_t n);
void __real_fftwf_free(void *pointer);
void *__wrap_malloc(size_t size);
void *__wrap_calloc(size_t n, size_t size);
void *__wrap_realloc(void *old, size_t size);
void *__wrap_aligned_alloc(size_t alignment, size_t size);
void __wrap_free(void *pointer);
float *__wrap_fftwf_alloc_real(size_t n);
fftwf_complex *__wrap_fftwf_alloc_complex(size_t n);
void __wrap_fftwf_free(void *pointer);

static bool fails(void)
{
    return counting && ++allocations == fail_at;
}

static void *keep(void *pointer)
{
    if (counting && pointer && n_live < MAX_LIVE)
        live[n_live++] = pointer;
    return pointer;
}

static void forget(void *pointer)
{
    for (size_t i = n_live; i > 0; i--)
        if (live[i - 1] == pointer) {
            live[i - 1] = live[--n_live];
            return;
        }
}

void *__wrap_malloc(size_t size)
{
    return fails() ? NULL : keep(__real_malloc(size));
}

void *__wrap_calloc(size_t n, size_t size)
{
    return fails() ? NULL : keep(__real_calloc(n, size));
}

void *__wrap_realloc(void *old, size_t size)
{
    if (fails())
        return NULL;
    forget(old);
    return keep(__real_realloc(old, size));
}

void *__wrap_aligned_alloc(size_t alignment, size_t size)
{
    return fails() ? NULL : keep(__real_aligned_alloc(alignment, size));
}

void __wrap_free(void *pointer)
{
    forget(pointer);
    __real_free(pointer);
}

float *__wrap_fftwf_alloc_real(size_t n)
{
    return fails() ? NULL : keep(__real_fftwf_alloc_real(n));
}

fftwf_complex *__wrap_fftwf_alloc_complex(size_t n)
{
    return fails() ? NULL : keep(__real_fftwf_alloc_complex(n));
}

void __wrap_fftwf_free(void *pointer)
{
    forget(pointer);
    __real_fftwf_free(pointer);
}

/* What the creates need. */
static struct catalogue catalogue;
static struct permit permit;
static struct scene_file scene;
static struct criteria criteria;

struct create_case {
    const char *name;
    enum status (*create)(void **out);
    void (*destroy)(void *object);
};

/* One line each: the object, how it is made, how it goes. */
#define CASE(object, call)                                                                                   \
    static enum status make_##object(void **out)                                                             \
    {                                                                                                        \
        struct object *made = *out;                                                                          \
        enum status status = call;                                                                           \
        *out = made;                                                                                         \
        return status;                                                                                       \
    }                                                                                                        \
    static void end_##object(void *made)                                                                     \
    {                                                                                                        \
        object##_destroy(made);                                                                              \
    }

#define RATE 192000.0
static const struct calibration calibration = {.known = true, .sensitivity_db = -180, .full_scale_v = 1};
static const bool all_live[SITE_MAX_STREAMS] = {true, true, true};

static void drop_column(void *context, const struct column *column)
{
    (void)context;
    (void)column;
}

static enum status listen_of_four(struct listen **out)
{
    struct listen_setup setup = {.stream = 1,
                                 .run = 1,
                                 .n_channels = 4,
                                 .rate_hz = RATE,
                                 .map = {.rate_hz = RATE},
                                 .catalogue = &catalogue,
                                 .columns = {drop_column, NULL}};
    return listen_create(&setup, out);
}

CASE(decimator, decimator_create(60, &made))
CASE(spectrum, spectrum_create(1024, WINDOW_SINE, &made))
CASE(background, background_create(513, 90, &made))
CASE(meter, meter_create(RATE, false, &made))
CASE(health, health_create(RATE, &calibration, &made))
CASE(impulse_finder, impulse_finder_create(RATE, 1000, true, &made))
CASE(tones, tones_create(catalogue.classes, catalogue.n_classes, RATE, &made))
CASE(pulses, pulses_create(catalogue.classes, catalogue.n_classes, RATE, &made))
CASE(others, others_create(catalogue.classes, catalogue.n_classes, RATE, true, &made))
CASE(gate, gate_create(RATE, 3, &made))
CASE(blocks, blocks_create(1, 8, RATE, &made))
CASE(strips, strips_create(RATE, true, &made))
CASE(listen, listen_of_four(&made))
CASE(watch, watch_create(&(struct watch_setup){.permit = &permit,
                                               .contact_gap_s = 300,
                                               .look_evidence = 1,
                                               .act_evidence = 3,
                                               .evidence_decay_s = 180,
                                               .sighting_log_spread = 0.15,
                                               .silence_s = 60},
                         &made))
CASE(minutes, minutes_create(1, 8, &made))
CASE(merge, merge_create(3, all_live, 0, &made))
CASE(watcher, watcher_create(&(struct watcher_setup){.run = 1}, &made))
CASE(board,
     board_create(
         &(struct board_setup){
             .site = "x", .permit = &permit, .run = 1, .n_stations = 1, .stations = {"crew"}, .n_streams = 2},
         &made))
CASE(exposure, exposure_create(&(struct exposure_setup){.n_criteria = criteria.n,
                                                        .criteria = criteria.items,
                                                        .reference_m = 750,
                                                        .loss = {.n_db = 15}},
                               &made))
CASE(together,
     together_create(&(struct together_setup){.n_others = 1,
                                              .others = &(struct together_other){.sound = SOUND_CONTINUOUS,
                                                                                 .at_m = 1,
                                                                                 .level_db = 180},
                                              .loss = {.n_db = 15},
                                              .inner_m = 1},
                     &made))
CASE(fit, fit_create(100, 0, &made))
CASE(tally,
     tally_create(&(struct tally_setup){.criteria = &criteria, .n_streams = 2, .loss_n_db = 15}, &made))
CASE(render, render_create(&scene.scene, &made))
/* A folder that cannot be made is no error: what is kept in it then is nothing. */
CASE(disk_ring, disk_ring_create(&(struct disk_ring_setup){.folder = "/proc/none/ring",
                                                           .minutes = 1,
                                                           .run = 1,
                                                           .n_streams = 2,
                                                           .streams = {{RATE, 2}, {RATE, 1}}},
                                 &made))
CASE(clips, clips_create(&(struct clips_setup){.folder = "/proc/none/clips", .run = 1}, &made))
CASE(clip_store, clip_store_create("clips", &made))
CASE(keeper, keeper_create(&(struct keeper_setup){.n_streams = 1}, &made))
CASE(player, player_create(NULL, NULL, &made))

#define LINE(object)                                                                                         \
    {                                                                                                        \
#object, make_##object, end_##object                                                                 \
    }
static const struct create_case cases[] = {
    LINE(decimator), LINE(spectrum),   LINE(background), LINE(meter),    LINE(health),  LINE(impulse_finder),
    LINE(tones),     LINE(pulses),     LINE(others),     LINE(gate),     LINE(blocks),  LINE(strips),
    LINE(listen),    LINE(watch),      LINE(minutes),    LINE(merge),    LINE(watcher), LINE(board),
    LINE(render),    LINE(exposure),   LINE(fit),        LINE(together), LINE(tally),   LINE(disk_ring),
    LINE(clips),     LINE(clip_store), LINE(keeper),     LINE(player),
};

static void fail_each_allocation(const struct create_case *one)
{
    void *const untouched = (void *)cases;
    /* All of them when there is time; else of the later ones every seventh, in a short run fewer: to make a
     * listen costs 0.1 s, under a sanitizer many times more, and its parts have had each of theirs. */
    const long step = test_length() == TEST_LONG ? 1 : test_length() == TEST_SHORT ? 29 : 7;
    for (long n = 1;; n += n > 50 ? step : 1) {
        void *object = untouched;
        allocations = 0;
        fail_at = n;
        n_live = 0;
        counting = true;
        enum status status = one->create(&object);
        if (status == STATUS_OK) {
            one->destroy(object);
            counting = false;
            if (n < 2 || n_live != 0)
                fail_msg("%s: %ld allocations, %zu kept after destroy", one->name, allocations, n_live);
            printf("# %s: %ld allocations\n", one->name, allocations);
            return;
        }
        counting = false;
        if (status != STATUS_NO_MEMORY || object != untouched || n_live != 0)
            fail_msg("%s, allocation %ld: %s, output %s, %zu allocations kept", one->name, n,
                     status_text(status), object == untouched ? "untouched" : "changed", n_live);
    }
}

static void every_create_survives_each_failure(void **state)
{
    (void)state;
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++)
        fail_each_allocation(&cases[i]);
}

static void destroy_takes_null(void **state)
{
    (void)state;
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++)
        cases[i].destroy(NULL);
}

int main(void)
{
    struct problems problems = {0};
    if (catalogue_load("config/calls", &problems, NULL, &catalogue) != STATUS_OK ||
        permit_load("config/permits/demonstration.cfg", NULL, &problems, &permit) != STATUS_OK ||
        criteria_load("config/criteria/fish-fhwg-2008.cfg", &problems, NULL, &criteria) != STATUS_OK ||
        scene_load("config/scenes/demonstration.cfg", &problems, &scene) != STATUS_OK) {
        fputs(problems.lines.data ? problems.lines.data : "", stderr);
        return 1;
    }
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_create_survives_each_failure),
        cmocka_unit_test(destroy_takes_null),
    };
    return cmocka_run_group_tests_name("create_failures", tests, NULL, NULL);
}
