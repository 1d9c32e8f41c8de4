/* Share of calls found over signal-to-noise ratio, of every class of animals whose call lib/scene can make:
 * the class by itself, at its own false_per_hour, in white Gaussian noise that goes on; and how long after
 * its end each call was known. Signal-to-noise ratios as voices.h has them. Levels come down in steps until
 * nothing is found. */
#include "base/units.h"
#include "bench/calls/calls.h"
#include "bench/calls/voices.h"
#include "call/pulses.h"
#include "call/tones.h"
#include "scene/kind.h"
#include "support/clicks.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define MAX_LEVELS 14
#define STEP_DB 3.0
#define MOST_DB 27.0
#define SETTLE_S 60.0   /* of noise before the first call */
#define MEASURED_S 30.0 /* of noise, from which its level is taken */
#define RHYTHM_SPREAD 0.02

/* What of lib/scene is the class's call; so many pulses of it where it comes in trains of any length, and
 * their interval where a sound of it is one pulse. */
static const struct source {
    const char *class_name, *kind;
    uint32_t pulses;
    double interval_s;
} sources[] = {
    {"sperm whale click train", "sperm whale clicks", 16, 0},
    {"sperm whale slow clicks", "sperm whale slow clicks", 8, 0},
    {"sperm whale coda", "sperm whale coda", 0, 0},
    {"sperm whale creak", "sperm whale creak", 0, 0},
    {"beaked whale pulse train", "beaked whale clicks", 16, 0},
    {"delphinid click train", "delphinid clicks", 16, 0},
    {"delphinid burst pulse", "delphinid burst pulse", 0, 0},
    {"porpoise click train", "porpoise clicks", 16, 0},
    {"porpoise buzz", "porpoise buzz", 0, 0},
    {"fin whale song", "fin whale pulse", 12, 15},
    {"minke whale pulse train", "minke slow-down train", 0, 0},
    {"humpback song unit", "humpback song", 0, 0},
    {"right whale upcall", "right whale upcall", 0, 0},
    {"blue whale A call", "blue whale A call", 0, 0},
    {"blue whale B call", "blue whale moan", 0, 0},
    {"blue whale D call", "blue whale D call", 0, 0},
    {"blue whale Z call", "blue whale Z call", 0, 0},
    {"fin whale 40 Hz call", "fin whale 40 Hz call", 0, 0},
    {"sei whale downsweep", "sei whale downsweep", 0, 0},
    {"minke boing", "minke boing", 0, 0},
    {"killer whale call", "killer whale call", 0, 0},
    {"delphinid whistle", "varied delphinid whistle", 0, 0},
    {"bearded seal trill", "bearded seal trill", 0, 0},
};

struct sweep {
    const struct call_class *call_class;
    const struct source *source;
    struct voice voice;
    double rate_hz, deviation;
    float *medians; /* of a tone */
    struct tones *tones;
    struct pulses *pulses;
    struct random random;
    struct emission *emission;
    struct truth_call *truth;
    struct stretch stretch;
    uint32_t room; /* of the stretch, samples */
    double start_frame, end_frame;
    uint64_t n_frames; /* before the stretch */
    bool hit;
    uint32_t n_delays, delays_room;
    double *delays;
};

static void look(void *context, const struct found_call *found)
{
    struct sweep *sweep = context;
    if (found->class_index != 0 || found->end_frame < sweep->start_frame ||
        found->start_frame > sweep->end_frame)
        return;
    sweep->hit = true;
    if (sweep->n_delays < sweep->delays_room)
        sweep->delays[sweep->n_delays++] = ((double)found->known_frame - found->end_frame) / sweep->rate_hz;
}

static void push(struct sweep *sweep)
{
    struct found_sink sink = {look, sweep};
    if (sweep->tones)
        tones_push(sweep->tones, sweep->stretch.samples, sweep->stretch.n, &sink);
    else
        pulses_push(sweep->pulses, sweep->stretch.samples, sweep->stretch.n, &sink);
    sweep->n_frames += sweep->stretch.n;
}

/* A stretch of that many seconds of noise; false without memory. */
static bool fill_noise(struct sweep *sweep, double seconds)
{
    uint32_t n = (uint32_t)(seconds * sweep->rate_hz);
    if (n > sweep->room) {
        float *larger = realloc(sweep->stretch.samples, n * sizeof *larger);
        if (!larger)
            return false;
        sweep->stretch.samples = larger;
        sweep->room = n;
    }
    sweep->stretch.n = n;
    memset(sweep->stretch.samples, 0, n * sizeof *sweep->stretch.samples);
    clicks_add_noise(sweep->stretch.samples, n, 1, &sweep->random);
    return true;
}

/* Makes a train of a sound that is one pulse. */
static void repeat(struct emission *emission, uint32_t n, double interval_s, struct random *random)
{
    double at_s = 0;
    emission->n_pulses = n;
    for (uint32_t i = 0; i < n; i++) {
        emission->pulse_s[i] = at_s;
        emission->pulse_gain[i] = 1;
        at_s += interval_s * exp(RHYTHM_SPREAD * random_normal(random));
    }
}

/* One call in noise; false on failure. */
static bool try_call(struct sweep *sweep, double snr_db)
{
    const struct source *source = sweep->source;
    double delay_s = sweep->call_class->natural_delay_s;
    sweep->voice.snr_db = snr_db;
    voice_draw(&sweep->voice, sweep->rate_hz, &sweep->random, sweep->emission);
    if (sweep->tones)
        sweep->emission->n_pulses = 0; /* one of those that come in pairs */
    else if (source->interval_s > 0)
        repeat(sweep->emission, source->pulses, source->interval_s, &sweep->random);
    double at_s = 1 + random_uniform(&sweep->random);
    if (!fill_noise(sweep, at_s + emission_length_s(sweep->emission) + 2 * delay_s + 2))
        return false;
    double gain =
        voice_gain(&sweep->voice, sweep->emission, &sweep->stretch, sweep->medians, sweep->deviation);
    sweep->stretch.start_s = 0;
    voice_add(sweep->emission, gain, at_s, &sweep->stretch, sweep->truth);
    sweep->start_frame = (double)sweep->n_frames + sweep->truth->start_s * sweep->rate_hz;
    sweep->end_frame = (double)sweep->n_frames + sweep->truth->end_s * sweep->rate_hz;
    sweep->hit = false;
    push(sweep);
    return gain > 0;
}

static bool create(const struct calls_setup *setup, const struct call_class *call_class, uint32_t number,
                   const struct source *source, struct sweep *out)
{
    const struct scene_kind *kind = scene_kind_find(source->kind);
    struct scene_emitter emitter = scene_emitter_of(source->kind);
    bool tone = call_class->form == CALL_TONE;
    *out = (struct sweep){.call_class = call_class,
                          .source = source,
                          .rate_hz = fmax(calls_lowest_rate(call_class), kind->min_rate_hz),
                          .voice = {.kind = source->kind,
                                    .pulses = source->pulses ? source->pulses : emitter.pulses,
                                    .window_s = call_class->tone.window_s,
                                    .low_hz = call_class->low_hz,
                                    .high_hz = call_class->high_hz},
                          .emission = calloc(1, sizeof *out->emission),
                          .truth = calloc(1, sizeof *out->truth),
                          .delays_room = 8192,
                          .delays = calloc(8192, sizeof *out->delays)};
    random_reset(&out->random, calls_seed(setup, 9, number));
    out->stretch.rate_hz = out->rate_hz;
    if (!out->emission || !out->truth || !out->delays || !fill_noise(out, MEASURED_S))
        return false;
    uint32_t n_fft = 2 * (uint32_t)lround(out->voice.window_s * out->rate_hz / 2);
    if (tone && !(out->medians = stretch_medians(&out->stretch, n_fft)))
        return false;
    if (!tone)
        out->deviation = stretch_deviation(&out->stretch, out->voice.low_hz, out->voice.high_hz);
    enum status status = tone ? tones_create(call_class, 1, out->rate_hz, &out->tones)
                              : pulses_create(call_class, 1, out->rate_hz, &out->pulses);
    if (status != STATUS_OK)
        return false;
    if (!tone)
        pulses_reset(out->pulses, 0);
    out->start_frame = INFINITY;
    for (double done_s = 0; done_s < SETTLE_S; done_s += 10)
        if (fill_noise(out, 10))
            push(out);
    return true;
}

static void destroy(struct sweep *sweep)
{
    tones_destroy(sweep->tones);
    pulses_destroy(sweep->pulses);
    free(sweep->medians);
    free(sweep->emission);
    free(sweep->truth);
    free(sweep->stretch.samples);
    free(sweep->delays);
}

static json_t *measure(const struct calls_setup *setup, const struct call_class *call_class, uint32_t number,
                       const struct source *source)
{
    struct sweep sweep;
    double levels[MAX_LEVELS], found[MAX_LEVELS];
    uint32_t n = calls_trials(setup, 40, 10), first = MAX_LEVELS;
    bool good = create(setup, call_class, number, source, &sweep), any = true;
    while (good && any && first > 0) {
        uint32_t hits = 0;
        first--;
        levels[first] = MOST_DB - STEP_DB * (MAX_LEVELS - 1 - first);
        for (uint32_t k = 0; k < n && good; k++) {
            good = try_call(&sweep, levels[first]);
            hits += sweep.hit;
        }
        found[first] = hits / (double)n;
        any = hits > 0 || first > MAX_LEVELS - 4;
    }
    json_t *row = NULL;
    uint32_t used = MAX_LEVELS - first;
    if (good)
        row = json_pack("{s:s, s:s, s:s, s:f, s:i, s:o, s:o, s:f, s:i, s:o, s:o}", "class", call_class->name,
                        "sound", source->kind, "form", call_class->form == CALL_TONE ? "tone" : "train",
                        "rate_hz", sweep.rate_hz, "trials", (int)n, "levels_db",
                        calls_numbers(levels + first, used), "pd", calls_numbers(found + first, used),
                        "natural_delay_s", call_class->natural_delay_s, "n_delays", (int)sweep.n_delays,
                        "delay_p50_s", calls_number(calls_quantile(sweep.delays, sweep.n_delays, 0.5)),
                        "delay_p99_s", calls_number(calls_quantile(sweep.delays, sweep.n_delays, 0.99)));
    destroy(&sweep);
    return row;
}

json_t *calls_voices(const struct calls_setup *setup)
{
    json_t *rows = json_array();
    for (size_t s = 0; s < sizeof sources / sizeof sources[0]; s++)
        for (uint32_t c = 0; c < setup->catalogue->n_classes; c++)
            if (strcmp(setup->catalogue->classes[c].name, sources[s].class_name) == 0 &&
                json_array_append_new(rows, measure(setup, &setup->catalogue->classes[c], c, &sources[s])) !=
                    0)
                return NULL;
    return json_pack("{s:o}", "rows", rows);
}
