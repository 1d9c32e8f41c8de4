/* Real humpback song with simulated blows and shots of an own source in it, through listen with the shipped
 * catalogue. 64.8 s recorded in Glacier Bay by the US National Park Service (C. Gabriele), public domain, not
 * part of the project; blows each 2 s and shots each 10 s with reverberation by lib/scene.
 *
 * How loud: the highest mean square over 0.1 s of the blows or shots over that of the recording. */
#include "support/test.h"

#include "listen/blocks.h"
#include "listen/listen.h"
#include "scene/render.h"
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

struct sound {
    double rate_hz;
    uint32_t n;
    float *samples;
};

struct heard {
    struct listen *listen;
    uint32_t n_calls, n_impulses;
    double masked_s; /* of 50 Hz to 1 kHz */
    double calls[MAX_CALLS][2];
};

static struct sound read_recording(void)
{
    SF_INFO info = {0};
    SNDFILE *file = sf_open(test_shared(RECORDING), SFM_READ, &info);
    assert_non_null(file);
    struct sound sound = {info.samplerate, (uint32_t)info.frames,
                          malloc((size_t)info.frames * sizeof(float))};
    assert_int_equal(sf_readf_float(file, sound.samples, info.frames), info.frames);
    sf_close(file);
    return sound;
}

/* Blows each 2 s or shots each 10 s alone, as long as the recording. */
static float *render_impulses(const struct sound *sound, bool shots)
{
    struct scene *scene = calloc(1, sizeof *scene);
    struct render *render = NULL;
    scene_reset(scene);
    scene->seed = 7;
    scene->rate_hz = sound->rate_hz;
    scene->duration_s = sound->n / sound->rate_hz;
    scene->sea.ambient = false;
    scene->n_hydrophones = 1;
    scene->hydrophones[0] = (struct scene_hydrophone){.place = {0, 0, 12},
                                                      .calibration = {.known = true,
                                                                      .sensitivity_db = -180,
                                                                      .full_scale_v = 1,
                                                                      .expected_peak_db = NAN,
                                                                      .self_noise_db = NAN,
                                                                      .role = ROLE_BOTH}};
    if (shots)
        scene->airguns[scene->n_airguns++] = (struct scene_airguns){.track = {.at_start = {1000, 0, 6}},
                                                                    .end_s = INFINITY,
                                                                    .shot_interval_s = 10,
                                                                    .source_energy_level_db = 222,
                                                                    .late_burst_energy_level_db = 170,
                                                                    .reverberation_s = 4};
    else {
        scene->hammers[0] = scene_hammer_of();
        scene->n_hammers = 1;
        scene->hammers[0].track.at_start = (struct scene_place){1000, 0, 10};
        scene->hammers[0].n_steps = 1;
        scene->hammers[0].steps[0] = (struct scene_step){scene->duration_s, 2, 200};
    }
    assert_int_equal(render_create(scene, &render), STATUS_OK);
    float *out = calloc(sound->n, sizeof *out);
    render_get(render, 0, out, sound->n);
    render_destroy(render);
    free(scene);
    return out;
}

/* Highest mean square over 0.1 s. */
static double loudest(const float *samples, uint32_t n, double rate_hz)
{
    uint32_t window = (uint32_t)(0.1 * rate_hz);
    double sum = 0, most = 0;
    for (uint32_t i = 0; i < n; i++) {
        sum += (double)samples[i] * (double)samples[i];
        if (i >= window)
            sum -= (double)samples[i - window] * (double)samples[i - window];
        most = fmax(most, sum / window);
    }
    return most;
}

static void take_event(void *context, const struct event *event)
{
    struct heard *heard = context;
    heard->n_impulses += event->kind == EVENT_IMPULSE;
    if (event->kind == EVENT_UNHEARD && event->as.unheard.cause == UNHEARD_OWN_SOURCE &&
        event->as.unheard.low_hz == 50)
        heard->masked_s += 1e-9 * (double)(event->as.unheard.end_ns - event->as.unheard.start_ns);
    if (event->kind != EVENT_CALL || event->as.call.n_sounds > 0)
        return;
    assert_true(heard->n_calls < MAX_CALLS);
    heard->calls[heard->n_calls][0] = 1e-9 * (double)event->as.call.start_ns;
    heard->calls[heard->n_calls++][1] = 1e-9 * (double)event->as.call.end_ns;
}

static void take_block(void *context, const struct block *block)
{
    struct heard *heard = context;
    assert_int_equal(listen_push(heard->listen, block, &(struct event_sink){take_event, heard}), STATUS_OK);
}

static struct heard hear(const struct catalogue *catalogue, const struct sound *sound)
{
    struct heard heard = {0};
    struct blocks *blocks = NULL;
    struct listen_setup setup = {.stream = 1,
                                 .run = 1,
                                 .n_channels = 1,
                                 .rate_hz = sound->rate_hz,
                                 .map = {.rate_hz = sound->rate_hz},
                                 .calibration = {{.known = true,
                                                  .sensitivity_db = -180,
                                                  .full_scale_v = 1,
                                                  .expected_peak_db = NAN,
                                                  .self_noise_db = NAN,
                                                  .role = ROLE_BOTH}},
                                 .catalogue = catalogue};
    assert_int_equal(listen_create(&setup, &heard.listen), STATUS_OK);
    assert_int_equal(blocks_create(1, 1, sound->rate_hz, &blocks), STATUS_OK);
    blocks_push(blocks, 0, sound->samples, sound->n, &(struct block_sink){take_block, &heard});
    blocks_finish(blocks, &(struct block_sink){take_block, &heard});
    listen_finish(heard.listen, &(struct event_sink){take_event, &heard});
    blocks_destroy(blocks);
    listen_destroy(heard.listen);
    return heard;
}

/* Overlap of at least 0.3 of the union for labels of 1.0 s or more, of 0.1 s for shorter ones; each call
 * answers for one label, the labels in order: no more than the best matching would give. */
static uint32_t count_matched(const struct heard *heard)
{
    bool used[MAX_CALLS] = {false};
    uint32_t n = 0;
    for (uint32_t label = 0; label < N_LABELS; label++)
        for (uint32_t i = 0; i < heard->n_calls; i++) {
            const double *call = heard->calls[i], *of = labels[label];
            double common = fmin(call[1], of[1]) - fmax(call[0], of[0]);
            double both = fmax(call[1], of[1]) - fmin(call[0], of[0]);
            if (used[i] || !(of[1] - of[0] >= 1 ? common >= 0.3 * both : common >= 0.1))
                continue;
            used[i] = true;
            n++;
            break;
        }
    return n;
}

/* Calls of which less than half lies within 1 s of a label. */
static uint32_t count_false(const struct heard *heard)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < heard->n_calls; i++) {
        bool right = false;
        const double *call = heard->calls[i];
        for (uint32_t label = 0; label < N_LABELS; label++)
            right = right || fmin(call[1], labels[label][1] + 1) - fmax(call[0], labels[label][0] - 1) >=
                                 0.5 * (call[1] - call[0]);
        n += !right;
    }
    return n;
}

static void song_is_found_under_blows_and_shots(void **state)
{
    (void)state;
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    assert_true(catalogue && test_load_catalogue(catalogue));
    struct sound sound = read_recording(), mixed = sound;
    mixed.samples = malloc(sound.n * sizeof(float));
    const float scale = 0.02F; /* so that +20 dB does not clip */
    for (int shots = 0; shots < 2; shots++) {
        float *impulses = render_impulses(&sound, shots);
        double song = loudest(sound.samples, sound.n, sound.rate_hz);
        double own = loudest(impulses, sound.n, sound.rate_hz);
        for (int over_db = -10; over_db <= 20; over_db += 10) { /* -10: none */
            float gain = over_db < 0 ? 0 : (float)sqrt(song / own * pow(10, 0.1 * over_db));
            for (uint32_t i = 0; i < sound.n; i++)
                mixed.samples[i] = scale * (sound.samples[i] + gain * impulses[i]);
            struct heard heard = hear(catalogue, &mixed);
            uint32_t n_matched = count_matched(&heard), n_false = count_false(&heard);
            printf("# figure humpback song, %s %+d dB: %u of %d labels matched, %u calls, %u false; %u "
                   "impulses, "
                   "%.1f s masked of 50 Hz to 1 kHz\n",
                   over_db < 0 ? "nothing mixed in,"
                   : shots     ? "shots each 10 s"
                               : "blows each 2 s",
                   over_db < 0 ? 0 : over_db, n_matched, N_LABELS, heard.n_calls, n_false, heard.n_impulses,
                   heard.masked_s);
            assert_true(n_matched >= 12);
            assert_true(n_false <= 4);
        }
        free(impulses);
    }
    free(mixed.samples);
    free(sound.samples);
    free(catalogue);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(song_is_found_under_blows_and_shots)};
    if (!test_shared(RECORDING)) {
        printf("1..1\nok 1 # SKIP skipped: no recording\n");
        return 0;
    }
    return cmocka_run_group_tests_name("humpback own source", tests, NULL, NULL);
}
