/* What the watch costs, as JSON: nanoseconds a sample of each stage and of the whole on the busy scene,
 * beside the bare spectra (window, FFTW in single precision with 1024 points and an estimated plan, half
 * overlap, magnitude), on the same samples, in the same run, with the same compiler flags. Only ratios within
 * one run mean anything on a shared machine.
 *
 * usage: watch_cost [RATE_HZ CHANNELS [SECONDS]] */
#include "base/time.h"
#include "listen/blocks.h"
#include "listen/ear.h"
#include "listen/listen.h"
#include "rule/watch.h"
#include "scene/render.h"
#include "settings/catalogue.h"
#include "settings/permit.h"
#include "settings/scene.h"
#include <fftw3.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <time.h>

enum stage { STAGE_HEALTH, STAGE_METER, STAGE_IMPULSES, STAGE_TONES, STAGE_PULSES, STAGE_COUNT };
static const char *const stage_names[STAGE_COUNT] = {"health", "levels", "impulses", "tones", "pulses"};

struct sound {
    double rate_hz;
    uint32_t n_channels;
    uint64_t n_frames;
    float *frames; /* [n_frames * n_channels] */
    struct calibration calibration;
};

static struct catalogue catalogue;
static struct permit permit;
static uint64_t n_events, n_calls, n_impulses;

static double cpu_s(void)
{
    struct timespec now;
    clock_gettime(CLOCK_THREAD_CPUTIME_ID, &now);
    return (double)now.tv_sec + (double)now.tv_nsec * 1e-9;
}

static void ignore_level(void *context, const struct found_level *level)
{
    (void)context;
    (void)level;
}

static void ignore_fault(void *context, const struct found_fault *fault)
{
    (void)context;
    (void)fault;
}

static void ignore_impulse(void *context, const struct found_impulse *impulse)
{
    (void)context;
    (void)impulse;
}

static void ignore_call(void *context, const struct found_call *call)
{
    (void)context;
    (void)call;
}

static bool render_busy(struct sound *sound)
{
    static struct scene_file file;
    struct problems problems = {0};
    struct render *render;
    if (scene_load("config/scenes/busy.cfg", &problems, &file) != STATUS_OK) {
        fputs(problems.lines.data ? problems.lines.data : "no scene\n", stderr);
        return false;
    }
    file.scene.rate_hz = sound->rate_hz;
    file.scene.n_hydrophones = sound->n_channels;
    sound->calibration = file.scene.hydrophones[0].calibration;
    sound->calibration.role = ROLE_BOTH;
    sound->frames = malloc(sound->n_frames * sound->n_channels * sizeof(float));
    if (!sound->frames || render_create(&file.scene, &render) != STATUS_OK)
        return false;
    for (uint64_t at = 0; at < sound->n_frames; at += 4096) {
        uint64_t n = sound->n_frames - at < 4096 ? sound->n_frames - at : 4096;
        render_get(render, at, sound->frames + at * sound->n_channels, (uint32_t)n);
    }
    render_destroy(render);
    scene_file_destroy(&file);
    return true;
}

/* Window, FFT, magnitude of one channel, half overlapped. */
static double bare_spectra_s(const struct sound *sound)
{
    enum { N = 1024 };
    float *in = fftwf_alloc_real(N), window[N];
    fftwf_complex *out = fftwf_alloc_complex(N / 2 + 1);
    fftwf_plan plan = fftwf_plan_dft_r2c_1d(N, in, out, FFTW_ESTIMATE);
    float *channel = malloc(sound->n_frames * sizeof *channel);
    static volatile float kept;
    double spent = 0;
    for (int i = 0; i < N; i++)
        window[i] = 0.5F - 0.5F * cosf((float)(2 * M_PI * i / N));
    for (uint32_t c = 0; c < sound->n_channels; c++) {
        for (uint64_t i = 0; i < sound->n_frames; i++)
            channel[i] = sound->frames[i * sound->n_channels + c];
        double start = cpu_s();
        for (uint64_t at = 0; at + N <= sound->n_frames; at += N / 2) {
            float magnitude[N / 2 + 1];
            for (int i = 0; i < N; i++)
                in[i] = channel[at + (uint64_t)i] * window[i];
            fftwf_execute(plan);
            for (int k = 0; k <= N / 2; k++)
                magnitude[k] = sqrtf(out[k][0] * out[k][0] + out[k][1] * out[k][1]);
            kept = magnitude[at / N % (N / 2)];
        }
        spent += cpu_s() - start;
    }
    (void)kept;
    free(channel);
    fftwf_destroy_plan(plan);
    fftwf_free(in);
    fftwf_free(out);
    return spent;
}

/* Each stage alone, channel after channel, block after block. */
static void stages_s(const struct sound *sound, double out[STAGE_COUNT])
{
    uint32_t block = flow_block_frames(sound->rate_hz);
    float *samples = malloc(block * sizeof(float)), *pascals = malloc(block * sizeof(float));
    float scale = (float)calibration_pa_per_unit(&sound->calibration);
    for (uint32_t c = 0; c < sound->n_channels; c++) {
        struct health *health;
        struct meter *meter;
        struct impulse_finder *impulses = NULL;
        struct tones *tones;
        struct pulses *pulses;
        health_create(sound->rate_hz, &sound->calibration, &health);
        meter_create(sound->rate_hz, false, &meter);
        if (c == 0)
            impulse_finder_create(sound->rate_hz, scale, &impulses);
        tones_create(catalogue.classes, catalogue.n_classes, sound->rate_hz, &tones);
        pulses_create(catalogue.classes, catalogue.n_classes, sound->rate_hz, &pulses);
        for (uint64_t at = 0; at + block <= sound->n_frames; at += block) {
            for (uint32_t i = 0; i < block; i++) {
                samples[i] = sound->frames[(at + i) * sound->n_channels + c];
                pascals[i] = samples[i] * scale;
            }
            double times[STAGE_COUNT + 1] = {cpu_s()};
            health_push(health, samples, block, &(struct fault_sink){ignore_fault, NULL});
            times[1] = cpu_s();
            meter_push(meter, pascals, block, &(struct level_sink){ignore_level, NULL});
            times[2] = cpu_s();
            if (impulses)
                impulse_finder_push(impulses, pascals, block, &(struct impulse_sink){ignore_impulse, NULL});
            times[3] = cpu_s();
            tones_push(tones, pascals, block, &(struct found_sink){ignore_call, NULL});
            times[4] = cpu_s();
            pulses_push(pulses, pascals, block, &(struct found_sink){ignore_call, NULL});
            times[5] = cpu_s();
            for (int s = 0; s < STAGE_COUNT; s++)
                out[s] += times[s + 1] - times[s];
        }
        health_destroy(health);
        meter_destroy(meter);
        impulse_finder_destroy(impulses);
        tones_destroy(tones);
        pulses_destroy(pulses);
    }
    free(samples);
    free(pascals);
}

struct chain {
    struct listen *listen;
    struct watch *watch;
    double watch_s;
};

static void count_outcome(void *context, const struct outcome *outcome)
{
    (void)context;
    (void)outcome;
    n_events++;
}

static void take_event(void *context, const struct event *event)
{
    struct chain *chain = context;
    n_calls += event->kind == EVENT_CALL;
    n_impulses += event->kind == EVENT_IMPULSE;
    double start = cpu_s();
    watch_push(chain->watch, event, &(struct outcome_sink){count_outcome, NULL});
    chain->watch_s += cpu_s() - start;
}

static void take_block(void *context, const struct block *block)
{
    struct chain *chain = context;
    listen_push(chain->listen, block, &(struct event_sink){take_event, chain});
}

static void ignore_column(void *context, const struct column *column)
{
    (void)context;
    (void)column;
}

/* The whole of lib: blocks, listen with its strips, watch. */
static double whole_s(const struct sound *sound, double *out_watch_s)
{
    struct chain chain = {0};
    struct blocks *blocks;
    struct listen_setup setup = {.stream = 1,
                                 .run = 1,
                                 .n_channels = sound->n_channels,
                                 .rate_hz = sound->rate_hz,
                                 .map = {.rate_hz = sound->rate_hz},
                                 .catalogue = &catalogue,
                                 .columns = {ignore_column, NULL}};
    for (uint32_t c = 0; c < sound->n_channels; c++)
        setup.calibration[c] = sound->calibration;
    const struct watch_setup watch = {.permit = &permit,
                                      .contact_gap_s = 300,
                                      .look_evidence = 1,
                                      .act_evidence = 3,
                                      .evidence_decay_s = 180,
                                      .sighting_log_spread = 0.15,
                                      .silence_s = 60};
    if (listen_create(&setup, &chain.listen) || watch_create(&watch, &chain.watch) ||
        blocks_create(1, sound->n_channels, sound->rate_hz, &blocks))
        return NAN;
    const struct block_sink sink = {take_block, &chain};
    double start = cpu_s();
    for (uint64_t at = 0; at < sound->n_frames; at += 4096) {
        uint64_t n = sound->n_frames - at < 4096 ? sound->n_frames - at : 4096;
        blocks_push(blocks, 0, sound->frames + at * sound->n_channels, (uint32_t)n, &sink);
    }
    double spent = cpu_s() - start;
    *out_watch_s = chain.watch_s;
    blocks_destroy(blocks);
    listen_destroy(chain.listen);
    watch_destroy(chain.watch);
    return spent;
}

int main(int argc, char **argv)
{
    struct sound sound = {.rate_hz = argc > 2 ? atof(argv[1]) : 192000,
                          .n_channels = argc > 2 ? (uint32_t)atoi(argv[2]) : 8};
    double seconds = argc > 3 ? atof(argv[3]) : 20, stages[STAGE_COUNT] = {0}, watch_s = 0, sum = 0;
    struct problems problems = {0};
    sound.n_frames = (uint64_t)(seconds * sound.rate_hz);
    if (catalogue_load("config/calls", &problems, NULL, &catalogue) != STATUS_OK ||
        permit_load("config/permits/demonstration.cfg", &problems, &permit) != STATUS_OK ||
        !render_busy(&sound)) {
        fputs(problems.lines.data ? problems.lines.data : "", stderr);
        return 3;
    }
    double samples = (double)sound.n_frames * sound.n_channels;
    double bare = bare_spectra_s(&sound), whole = whole_s(&sound, &watch_s);
    stages_s(&sound, stages);
    double bare_again = bare_spectra_s(&sound);
    bare = bare < bare_again ? bare : bare_again;
    struct rusage usage;
    getrusage(RUSAGE_SELF, &usage);
    printf("{\"bench\": \"watch_cost\", \"rate_hz\": %.0f, \"channels\": %u, \"seconds\": %.1f, \"calls\": "
           "%llu, \"impulses\": %llu,\n",
           sound.rate_hz, sound.n_channels, seconds, (unsigned long long)n_calls,
           (unsigned long long)n_impulses);
    printf(" \"ns_per_sample\": {");
    for (int s = 0; s < STAGE_COUNT; s++) {
        sum += stages[s];
        printf("\"%s\": %.3f, ", stage_names[s], stages[s] / samples * 1e9);
    }
    sum += watch_s;
    printf("\"watch\": %.3f, \"all\": %.3f, \"bare_spectra\": %.3f},\n", watch_s / samples * 1e9,
           whole / samples * 1e9, bare / samples * 1e9);
    printf(" \"ratio_to_bare_spectra\": %.2f, \"times_real_time\": %.1f, \"stages_over_all\": %.3f}\n",
           whole / bare, seconds / whole, sum / whole);
    free(sound.frames);
    return 0;
}
