/* What the watch costs, as JSON: nanoseconds a sample of each stage and of the whole on the busy scene,
 * beside the bare spectra (window, FFTW in single precision with 1024 points and an estimated plan, half
 * overlap, magnitude), on the same samples, in the same run, with the same compiler flags. Only ratios within
 * one run mean anything on a shared machine; each figure is the least of ROUNDS, taken in turn.
 *
 * The stages are run as the whole runs them, each block through every channel, so that they find the caches
 * as they do there; one block in SAMPLED is timed, since the clock is a system call. resident_mib is what the
 * whole added to the process: objects and what they touched.
 *
 * usage: watch_cost [RATE_HZ CHANNELS [SECONDS]] */
#include "base/time.h"
#include "call/others.h"
#include "float_mode.h"
#include "listen/blocks.h"
#include "listen/ear.h"
#include "listen/listen.h"
#include "listen/strips.h"
#include "rule/watch.h"
#include "settings/catalogue.h"
#include "settings/permit.h"
#include "support/bench.h"
#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>

#define ROUNDS 5
#define SAMPLED 5

enum stage {
    STAGE_BLOCKS,
    STAGE_PICK,
    STAGE_HEALTH,
    STAGE_LEVELS,
    STAGE_GATE,
    STAGE_IMPULSES,
    STAGE_TONES,
    STAGE_PULSES,
    STAGE_STRIPS,
    STAGE_OTHERS,
    STAGE_COMPARE,
    STAGE_COUNT
};
static const char *const stage_names[STAGE_COUNT] = {"blocks", "pick",     "health", "levels",
                                                     "gate",   "impulses", "tones",  "pulses",
                                                     "strips", "others",   "compare"};

static struct catalogue catalogue;
static struct permit permit;
static uint64_t n_events, n_calls, n_impulses;

static void ignore_level(void *context, uint32_t channel, const struct found_level *level)
{
    (void)context;
    (void)channel;
    (void)level;
}

static void ignore_fault(void *context, uint32_t channel, const struct found_fault *fault)
{
    (void)context;
    (void)channel;
    (void)fault;
}

static void ignore_impulse(void *context, uint32_t channel, const struct found_impulse *impulse)
{
    (void)context;
    (void)channel;
    (void)impulse;
}

static void ignore_call(void *context, uint32_t channel, const struct found_call *call)
{
    (void)context;
    (void)channel;
    (void)call;
}

static void ignore_masked(void *context, uint32_t channel, const struct gate_masked *masked)
{
    (void)context;
    (void)channel;
    (void)masked;
}

static void drop_fault(void *context, const struct found_fault *fault)
{
    (void)context;
    (void)fault;
}

static void drop_call(void *context, const struct found_call *call)
{
    (void)context;
    (void)call;
}

static void drop_masked(void *context, const struct gate_masked *masked)
{
    (void)context;
    (void)masked;
}

static void drop_column(void *context, const struct column *column)
{
    (void)context;
    (void)column;
}

static void push_all(const struct bench_sound *sound, struct blocks *blocks, const struct block_sink *sink)
{
    for (uint64_t at = 0; at < sound->n_frames; at += 4096) {
        uint64_t n = sound->n_frames - at < 4096 ? sound->n_frames - at : 4096;
        blocks_push(blocks, 0, sound->frames + at * sound->n_channels, (uint32_t)n, sink);
    }
}

/* What one channel finds is dropped, but that an impulse goes to its gate. */
struct dropped {
    struct ear *ear;
};

static void drop_level(void *context, const struct found_level *level)
{
    const struct dropped *dropped = context;
    health_take_level(dropped->ear->health, level, &(struct fault_sink){drop_fault, NULL});
}

static void drop_impulse(void *context, const struct found_impulse *impulse)
{
    const struct dropped *dropped = context;
    if (dropped->ear->gate)
        gate_push_impulse(dropped->ear->gate, impulse->onset_frame, impulse->t90_s,
                          &(struct gate_masked_sink){drop_masked, NULL});
}

/* As ear_push, with a clock between the stages. */
static void push_ear(struct ear *ear, const float *frames, uint32_t n, uint32_t n_channels, double clock_s,
                     double *out)
{
    struct dropped dropped = {ear};
    const struct found_sink calls = {drop_call, NULL};
    double times[STAGE_STRIPS + 1];
    times[STAGE_PICK] = bench_cpu_s();
    ear_pick(ear, frames, n, n_channels);
    times[STAGE_HEALTH] = bench_cpu_s();
    health_push(ear->health, ear->samples, n, &(struct fault_sink){drop_fault, NULL});
    times[STAGE_LEVELS] = bench_cpu_s();
    meter_push(ear->meter, ear->pascals, n, &(struct level_sink){drop_level, &dropped});
    times[STAGE_GATE] = bench_cpu_s();
    if (ear->gate)
        gate_push(ear->gate, ear->pascals, n, &(struct gate_masked_sink){drop_masked, NULL});
    times[STAGE_IMPULSES] = bench_cpu_s();
    if (ear->impulses)
        impulse_finder_push(ear->impulses, ear->pascals, n,
                            &(struct impulse_sink){.take = drop_impulse, .context = &dropped});
    times[STAGE_TONES] = bench_cpu_s();
    tones_push(ear->tones, ear->pascals, n, &calls);
    times[STAGE_PULSES] = bench_cpu_s();
    const struct lowered lowered = tones_get_lowered(ear->tones);
    pulses_push_lowered(ear->pulses, ear->pascals, n, &lowered, &calls);
    times[STAGE_STRIPS] = bench_cpu_s();
    for (int s = STAGE_PICK; s < STAGE_STRIPS; s++)
        out[s] += times[s + 1] - times[s] - clock_s;
}

static void drop_found(void *context, const struct found_call *found)
{
    (void)context;
    (void)found;
}

struct stages {
    const struct bench_sound *sound;
    struct ear ears[FLOW_MAX_CHANNELS];
    struct strips *strips;
    struct others *others;
    uint64_t n_blocks;
    double clock_s, spent_s[STAGE_COUNT];
};

static void compare_ears(struct stages *stages, uint32_t n_channels)
{
    for (uint32_t later = 1; later < n_channels; later++)
        for (uint32_t earlier = 0; earlier < later; earlier++)
            ear_compare(&stages->ears[earlier], &stages->ears[later]);
}

static void run_stages(void *context, const struct block *block)
{
    struct stages *stages = context;
    const struct time_map map = {.rate_hz = stages->sound->rate_hz};
    const bool timed = stages->n_blocks++ % SAMPLED == 0;
    double times[5] = {bench_cpu_s()};
    for (uint32_t c = 0; c < block->n_channels; c++)
        if (timed)
            push_ear(&stages->ears[c], block->samples, block->n_frames, block->n_channels, stages->clock_s,
                     stages->spent_s);
        else
            ear_push(&stages->ears[c], block->samples, block->n_frames, block->n_channels);
    times[1] = timed ? bench_cpu_s() : 0;
    strips_push(stages->strips, stages->ears[0].pascals, block->n_frames, &map,
                &(struct column_sink){drop_column, NULL});
    times[2] = timed ? bench_cpu_s() : 0;
    const float *second = block->n_channels > 1 ? stages->ears[1].pascals : NULL;
    others_push(stages->others, stages->ears[0].pascals, second, block->n_frames,
                &(struct found_sink){drop_found, NULL});
    times[3] = timed ? bench_cpu_s() : 0;
    compare_ears(stages, block->n_channels);
    times[4] = bench_cpu_s();
    if (timed) {
        stages->spent_s[STAGE_STRIPS] += times[2] - times[1] - stages->clock_s;
        stages->spent_s[STAGE_OTHERS] += times[3] - times[2] - stages->clock_s;
        stages->spent_s[STAGE_COMPARE] += times[4] - times[3] - stages->clock_s;
    }
    stages->spent_s[STAGE_BLOCKS] -=
        times[4] - times[0] + stages->clock_s; /* the rest of the time is theirs */
}

/* Each stage by itself, each block through every channel; false without memory. */
static bool stages_s(const struct bench_sound *sound, double out[STAGE_COUNT])
{
    static struct stages stages;
    struct blocks *blocks;
    stages = (struct stages){.sound = sound, .clock_s = bench_clock_cost_s()};
    struct ear_setup setup = {
        .rate_hz = sound->rate_hz,
        .max_frames = flow_block_frames(sound->rate_hz),
        .calibration = sound->calibration,
        .classes = catalogue.classes,
        .n_classes = catalogue.n_classes,
        .sink = {ignore_level, ignore_fault, ignore_impulse, ignore_call, ignore_masked, NULL}};
    for (uint32_t c = 0; c < sound->n_channels; c++) {
        setup.channel = c + 1;
        setup.gates = setup.finds_impulses = c == 0; /* as listen chooses when every channel does both */
        if (ear_create(&setup, &stages.ears[c]))
            return false;
    }
    if (strips_create(sound->rate_hz, false, &stages.strips) ||
        others_create(catalogue.classes, catalogue.n_classes, sound->rate_hz, sound->n_channels > 1,
                      &stages.others) ||
        blocks_create(1, sound->n_channels, sound->rate_hz, &blocks))
        return false;
    double start = bench_cpu_s();
    push_all(sound, blocks, &(struct block_sink){run_stages, &stages});
    stages.spent_s[STAGE_BLOCKS] += bench_cpu_s() - start;
    const double all_blocks = (double)stages.n_blocks / (double)((stages.n_blocks + SAMPLED - 1) / SAMPLED);
    for (int s = 0; s < STAGE_COUNT; s++)
        out[s] = fmin(out[s], stages.spent_s[s] * (s == STAGE_BLOCKS ? 1 : all_blocks));
    blocks_destroy(blocks);
    strips_destroy(stages.strips);
    others_destroy(stages.others);
    for (uint32_t c = 0; c < sound->n_channels; c++)
        ear_destroy(&stages.ears[c]);
    return true;
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
    double start = bench_cpu_s();
    watch_push(chain->watch, event, &(struct outcome_sink){count_outcome, NULL});
    chain->watch_s += bench_cpu_s() - start;
}

static void take_block(void *context, const struct block *block)
{
    struct chain *chain = context;
    listen_push(chain->listen, block, &(struct event_sink){take_event, chain});
}

/* The whole of lib: blocks, listen with its strips, watch. */
static double whole_s(const struct bench_sound *sound, double *out_watch_s, double *out_mib)
{
    struct chain chain = {0};
    double before_mib = bench_resident_mib();
    n_calls = n_impulses = 0;
    struct blocks *blocks;
    struct listen_setup setup = {.stream = 1,
                                 .run = 1,
                                 .n_channels = sound->n_channels,
                                 .rate_hz = sound->rate_hz,
                                 .map = {.rate_hz = sound->rate_hz},
                                 .catalogue = &catalogue,
                                 .columns = {drop_column, NULL}};
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
    double start = bench_cpu_s();
    push_all(sound, blocks, &sink);
    double spent = bench_cpu_s() - start;
    *out_watch_s = chain.watch_s;
    *out_mib = bench_resident_mib() - before_mib;
    blocks_destroy(blocks);
    listen_destroy(chain.listen);
    watch_destroy(chain.watch);
    return spent;
}

struct costs {
    double bare_s, whole_s, watch_s, stages_s[STAGE_COUNT], mib;
};

/* One more round of each; every figure keeps its least. */
static bool measure(const struct bench_sound *sound, struct costs *costs)
{
    double watch, mib, bare = bench_bare_spectra_s(sound), whole = whole_s(sound, &watch, &mib);
    if (isnan(whole) || !stages_s(sound, costs->stages_s))
        return false;
    costs->bare_s = fmin(costs->bare_s, bare);
    costs->whole_s = fmin(costs->whole_s, whole);
    costs->watch_s = fmin(costs->watch_s, watch);
    costs->mib = fmax(costs->mib, mib);
    return true;
}

static void print_costs(const struct bench_sound *sound, const struct costs *costs)
{
    double seconds = (double)sound->n_frames / sound->rate_hz, sum = costs->watch_s;
    double ns = 1e9 / ((double)sound->n_frames * sound->n_channels);
    printf("{\"bench\": \"watch_cost\", \"rate_hz\": %.0f, \"channels\": %u, \"seconds\": %.1f, \"calls\": "
           "%llu, \"impulses\": %llu,\n \"ns_per_sample\": {",
           sound->rate_hz, sound->n_channels, seconds, (unsigned long long)n_calls,
           (unsigned long long)n_impulses);
    for (int s = 0; s < STAGE_COUNT; s++) {
        sum += costs->stages_s[s];
        printf("\"%s\": %.3f, ", stage_names[s], costs->stages_s[s] * ns);
    }
    printf("\"watch\": %.3f,\n  \"all\": %.3f, \"bare_spectra\": %.3f},\n", costs->watch_s * ns,
           costs->whole_s * ns, costs->bare_s * ns);
    printf(" \"ratio_to_bare_spectra\": %.2f, \"times_real_time\": %.1f, \"stages_over_all\": %.3f, "
           "\"resident_mib\": %.1f}\n",
           costs->whole_s / costs->bare_s, seconds / costs->whole_s, sum / costs->whole_s, costs->mib);
}

int main(int argc, char **argv)
{
    struct bench_sound sound = {.rate_hz = argc > 2 ? atof(argv[1]) : 192000,
                                .n_channels = argc > 2 ? (uint32_t)atoi(argv[2]) : 8};
    struct problems problems = {0};
    struct costs costs = {.bare_s = INFINITY, .whole_s = INFINITY, .watch_s = INFINITY};
    for (int s = 0; s < STAGE_COUNT; s++)
        costs.stages_s[s] = INFINITY;
    float_mode_flush_to_zero();
    sound.n_frames = (uint64_t)((argc > 3 ? atof(argv[3]) : 20) * sound.rate_hz);
    if (catalogue_load("config/calls", &problems, NULL, &catalogue) != STATUS_OK ||
        permit_load("config/permits/demonstration.cfg", NULL, &problems, &permit) != STATUS_OK ||
        !bench_render_busy(&sound)) {
        fputs(problems.lines.data ? problems.lines.data : "", stderr);
        return 3;
    }
    for (int round = 0; round < ROUNDS; round++)
        if (!measure(&sound, &costs))
            return 3;
    print_costs(&sound, &costs);
    free(sound.frames);
    return 0;
}
