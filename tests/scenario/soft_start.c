/* A soft start of 25 min, heard at 750 m and at 3,010 m in the noise of wind and ships: every blow found,
 * none that was not struck, its levels as the scene's truth has them (measured there on the waveform without
 * noise), and N as the scene spreads sound. */
#include "support/test.h"

#include "level/impulses.h"
#include "scene/path.h"
#include "scene/render.h"
#include "scene/truth.h"
#include "sea/fit.h"
#include <jansson.h>
#include <math.h>
#include <stdlib.h>

#define RATE 48000
#define CHANNELS 2
#define MAX_BLOWS 2048
#define SEED 318
#define PIECE 4096

struct blow {
    double start_s, end_s, sel_db, peak_db;
};

static struct blow truth[CHANNELS][MAX_BLOWS];
static uint32_t n_truth;

struct found {
    uint32_t n;
    struct found_impulse impulse[MAX_BLOWS];
};
static struct found found[CHANNELS];

static void keep(void *context, const struct found_impulse *impulse)
{
    struct found *to = context;
    assert_true(to->n < MAX_BLOWS);
    to->impulse[to->n++] = *impulse;
}

/* Five steps of rising energy and rate, a rest of two minutes after the third, as a hammer is warmed up
 * (common practice, no source). length scales all times. */
static void make_scene(struct scene *scene, double length)
{
    scene_reset(scene);
    scene->seed = SEED;
    scene->rate_hz = RATE;
    scene->duration_s = 1500 * length + 10;
    scene->sea.ambient = true;
    scene->sea.wind_m_s = 6;
    scene->sea.shipping = 0.5;
    scene->n_hydrophones = CHANNELS;
    for (int c = 0; c < CHANNELS; c++) {
        struct scene_hydrophone *hydrophone = &scene->hydrophones[c];
        hydrophone->place = (struct scene_place){c ? 3010 : 750, 0, 12};
        hydrophone->calibration = (struct calibration){
            .known = true, .sensitivity_db = -200, .full_scale_v = 1, .self_noise_db = NAN};
    }
    scene->n_hammers = 1;
    scene->hammers[0] = scene_hammer_of();
    scene->hammers[0].start_s = 5;
    static const struct scene_step steps[] = {{300, 10, 172}, {300, 5, 178}, {240, 3, 184},
                                              {120, 1, NAN},  {240, 2, 190}, {300, 1.5, 200}};
    scene->hammers[0].n_steps = sizeof steps / sizeof steps[0];
    for (uint32_t i = 0; i < scene->hammers[0].n_steps; i++) {
        scene->hammers[0].steps[i] = steps[i];
        scene->hammers[0].steps[i].duration_s *= length;
    }
}

struct growing {
    char *data;
    size_t length, capacity;
};

static enum status grow(void *context, const char *piece)
{
    struct growing *text = context;
    size_t more = strlen(piece);
    if (text->length + more + 1 > text->capacity) {
        text->capacity = 2 * (text->length + more + 1);
        text->data = realloc(text->data, text->capacity);
        if (!text->data)
            return STATUS_NO_MEMORY;
    }
    memcpy(text->data + text->length, piece, more + 1);
    text->length += more;
    return STATUS_OK;
}

static void read_truth(const struct scene *scene)
{
    struct growing text = {0};
    struct truth_sink sink = {grow, &text};
    assert_int_equal(truth_write(scene, &sink), STATUS_OK);
    json_t *root = json_loads(text.data, 0, NULL), *blows = json_object_get(root, "blows");
    n_truth = (uint32_t)json_array_size(blows);
    assert_in_range(n_truth, 20, MAX_BLOWS);
    for (uint32_t i = 0; i < n_truth; i++) {
        json_t *heard = json_object_get(json_array_get(blows, i), "heard");
        assert_int_equal(json_array_size(heard), CHANNELS);
        for (uint32_t c = 0; c < CHANNELS; c++) {
            json_t *one = json_array_get(heard, c);
            truth[c][i] = (struct blow){json_number_value(json_object_get(one, "start_s")),
                                        json_number_value(json_object_get(one, "end_s")),
                                        json_number_value(json_object_get(one, "sel_db")),
                                        json_number_value(json_object_get(one, "peak_db"))};
        }
    }
    json_decref(root);
    free(text.data);
}

static void listen_to(const struct scene *scene)
{
    struct render *render;
    struct impulse_finder *finders[CHANNELS];
    static float frames[PIECE * CHANNELS], pascals[PIECE];
    double scale[CHANNELS];
    assert_int_equal(render_create(scene, &render), STATUS_OK);
    for (uint32_t c = 0; c < CHANNELS; c++) {
        scale[c] = calibration_pa_per_unit(&scene->hydrophones[c].calibration);
        assert_int_equal(impulse_finder_create(RATE, scale[c], true, &finders[c]), STATUS_OK);
        found[c].n = 0;
    }
    for (uint64_t at = 0; at + PIECE <= (uint64_t)(scene->duration_s * RATE); at += PIECE) {
        render_get(render, at, frames, PIECE);
        for (uint32_t c = 0; c < CHANNELS; c++) {
            struct impulse_sink sink = {.take = keep, .context = &found[c]};
            for (uint32_t i = 0; i < PIECE; i++)
                pascals[i] = (float)(frames[i * CHANNELS + c] * scale[c]);
            impulse_finder_push(finders[c], pascals, PIECE, &sink);
        }
    }
    for (uint32_t c = 0; c < CHANNELS; c++)
        impulse_finder_destroy(finders[c]);
    render_destroy(render);
}

static int by_size(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return x < y ? -1 : x > y;
}

struct errors {
    uint32_t n;
    double sel_db[MAX_BLOWS * CHANNELS], peak_db[MAX_BLOWS * CHANNELS], size[MAX_BLOWS * CHANNELS];
};

/* Median of the signed SEL errors, 95 % point of their sizes, greatest error of the peak; whatever has no
 * blow counts as none. */
static void say_errors(struct errors *errors, const char *which, double out[3])
{
    out[0] = out[1] = out[2] = NAN;
    if (errors->n == 0)
        return;
    for (uint32_t i = 0; i < errors->n; i++)
        errors->size[i] = fabs(errors->sel_db[i]);
    qsort(errors->sel_db, errors->n, sizeof(double), by_size);
    qsort(errors->size, errors->n, sizeof(double), by_size);
    double worst_peak = 0;
    for (uint32_t i = 0; i < errors->n; i++)
        worst_peak = fmax(worst_peak, fabs(errors->peak_db[i]));
    out[0] = errors->sel_db[errors->n / 2];
    out[1] = errors->size[(uint32_t)((errors->n - 1) * 0.95)];
    out[2] = worst_peak;
    printf("# figure %s: %u blows, SEL error median %+.3f dB, 95 %% within %.3f dB, peak within %.3f dB\n",
           which, errors->n, out[0], out[1], out[2]);
}

static struct scene scene;
static const struct found_impulse *heard[CHANNELS][MAX_BLOWS]; /* of each blow; NULL: not found */

static int hear_scene(void **state)
{
    (void)state;
    make_scene(&scene, test_length() == TEST_SHORT ? 0.2 : 1);
    read_truth(&scene);
    listen_to(&scene);
    return 0;
}

static void every_blow_is_found_and_measured(void **state)
{
    (void)state;
    static struct errors weak, about_20, middle, strong;
    weak.n = about_20.n = middle.n = strong.n = 0;
    for (uint32_t c = 0; c < CHANNELS; c++) {
        uint32_t hits = 0;
        for (uint32_t b = 0, f = 0; b < n_truth; b++) {
            const struct blow *blow = &truth[c][b];
            while (f < found[c].n && found[c].impulse[f].onset_frame / RATE < blow->start_s - 0.02)
                f++;
            if (f == found[c].n || found[c].impulse[f].onset_frame / RATE > blow->end_s) {
                printf("# not found on channel %u: the blow at %.3f s, SEL %.1f dB\n", c + 1, blow->start_s,
                       blow->sel_db);
                continue;
            }
            const struct found_impulse *impulse = heard[c][b] = &found[c].impulse[f];
            hits++;
            double ratio_db = impulse->rms90_db - impulse->background_db;
            struct errors *to = ratio_db < 18   ? &weak
                                : ratio_db < 22 ? &about_20
                                : ratio_db < 40 ? &middle
                                                : &strong;
            to->sel_db[to->n] = impulse->sel_db - blow->sel_db;
            to->peak_db[to->n++] = impulse->peak_db - blow->peak_db;
        }
        printf("# figure at %.0f m: %u of %u blows found, %u extra; SEL %.1f to %.1f dB, seed %d\n",
               scene.hydrophones[c].place.x_m, hits, n_truth, found[c].n - hits, truth[c][0].sel_db,
               truth[c][n_truth - 1].sel_db, SEED);
        assert_int_equal(hits, n_truth);
        assert_int_equal(found[c].n, n_truth);
    }
    double of[3];
    say_errors(&weak, "below 18 dB over the background", of);
    say_errors(&about_20, "18 to 22 dB over the background", of);
    assert_in_range(about_20.n, 10, 100000);
    assert_true(fabs(of[0]) <= 0.1);
    assert_true(of[1] <= 0.25);
    assert_true(of[2] <= 1);
    say_errors(&middle, "22 to 40 dB over the background", of);
    assert_in_range(middle.n, 20, 100000);
    assert_true(fabs(of[0]) <= 0.1);
    assert_true(of[1] <= 0.25);
    assert_true(of[2] <= 1);
    say_errors(&strong, "40 dB and more over the background", of);
    assert_in_range(strong.n, 20, 100000);
    assert_true(fabs(of[0]) <= 0.1);
    assert_true(of[1] <= 0.25);
    assert_true(of[2] <= 0.2);
}

/* What the two hydrophones measured of the same blow shares its source level, so the hammer's growth and the
 * scatter of its blows (0.3 dB here) do not count: only measuring errs. The scene spreads spherically: N is
 * 20; absorption is that of 200 Hz, about where these blows are loudest. The blows' level at 750 m, moved
 * there from 3,010 m, against the truth at 750 m. */
static void n_is_that_of_the_scene(void **state)
{
    (void)state;
    const struct path_sea sea = path_sea_of(&scene);
    const double absorption = absorption_db_m(&sea.absorption, 200);
    double range_m[CHANNELS];
    struct fit *fit;
    assert_int_equal(fit_create(CHANNELS * MAX_BLOWS, absorption, &fit), STATUS_OK);
    for (uint32_t c = 0; c < CHANNELS; c++)
        range_m[c] = path_range_m(&sea, &scene.hammers[0].track.at_start, c, false);
    for (uint32_t b = 0; b < n_truth; b++)
        for (uint32_t c = 0; c < CHANNELS && heard[0][b] && heard[1][b]; c++)
            assert_int_equal(fit_push(fit, &(struct fit_point){b, 0, range_m[c], heard[c][b]->sel_db}),
                             STATUS_OK);
    struct fitted law;
    assert_int_equal(fit_get(fit, &law), STATUS_OK);
    double worst = 0;
    uint32_t held = 0;
    for (uint32_t b = 0; b < n_truth; b++) {
        double level, low, high;
        fitted_move(&law, range_m[1], heard[1][b]->sel_db, range_m[0], &level, &low, &high);
        worst = fmax(worst, fabs(level - truth[0][b].sel_db));
        held += truth[0][b].sel_db >= low && truth[0][b].sel_db <= high;
    }
    printf("# figure N of %u blows heard at both: %.3f for 20, 90 %% from %.2f to %.2f; scatter of one level "
           "%.3f dB; moved to 750 m off by at most %.3f dB, inside the 90 %% interval %u of %u\n",
           n_truth, law.n_db, law.n_low_db, law.n_high_db, law.scatter_db, worst, held, n_truth);
    assert_near(law.n_db, 20, 0.3);
    assert_true(law.n_low_db <= 20 && law.n_high_db >= 20);
    assert_true(worst < 1);
    fit_destroy(fit);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_blow_is_found_and_measured),
        cmocka_unit_test(n_is_that_of_the_scene),
    };
    return cmocka_run_group_tests_name("soft start", tests, hear_scene, NULL);
}
