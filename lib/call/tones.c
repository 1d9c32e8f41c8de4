/* The tone tracer of one channel; see tones.h. */
#include "call/tones.h"
#include "call/tones_judge.h"
#include "call/tones_trace.h"
#include "dsp/decimate.h"
#include "dsp/lanes.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SLICE_S 0.01    /* tracers and judge meet this often, at fixed frames: chunks cannot matter */
#define CARRIED 0.46    /* of the rate: the band that a recording holds */
#define HEADROOM 8.0    /* of a path's score over the threshold */
#define MOST_PA 1e6F    /* 240 dB re 1 uPa: more is a fault of the input, and would overflow a power */
#define TAIL_HEARD 2.0F /* over the quietest time: 3 dB */
#define MAX_OPEN 96
#define MAX_BANDS 16
#define PASS_BAND 0.4 /* of a decimated rate (dsp/decimate.h) */
/* How much more cautious the bound of tones_trace.h is than the rate in Gaussian noise, as an exponent:
 * measured over hours of noise at several rates (tests/scenario/tones_noise.c checks what comes of it). */
#define BOUND_CAUTION 7.5
#define MIN_FALSE_PER_HOUR 1e-3

/* The sound at a rate of its own; each but the first is decimated from the one before. */
struct band {
    uint32_t factor;
    double late_frames;
    struct decimator *decimator;
    float *samples; /* of one slice */
    uint32_t n_samples;
};

struct tones {
    double rate_hz;
    uint32_t n_tracers, n_slice;
    uint64_t next_frame; /* of the next sample */
    uint64_t slice_end;  /* a multiple of n_slice */
    bool owes;           /* a reset ended contours whose calls are still to be given */
    uint64_t owes_known;
    float *limited; /* [n_slice]: samples of which some were out of range */
    float *lowered; /* [most_lowered] of the last push, at the first band's rate; NULL: not kept */
    uint32_t n_lowered, most_lowered;
    struct contour *open; /* [MAX_OPEN] */
    struct judge *judge;
    uint32_t n_bands;
    struct band bands[MAX_BANDS]; /* by rising factor */
    uint32_t band_of[CATALOGUE_MAX_CLASSES];
    struct tracer *tracers[CATALOGUE_MAX_CLASSES];
};

struct context {
    struct judge *judge;
    uint32_t tracer;
};

static void take_contour(void *context, enum trace_end end, const struct contour *contour)
{
    const struct context *to = context;
    judge_take(to->judge, to->tracer, end, contour);
}

static bool carries(const struct call_class *class, double rate_hz)
{
    double high = fmin(class->high_hz, CARRIED * rate_hz);
    return class->form == CALL_TONE && class->sound.manner == MANNER_NONE &&
           high - class->low_hz >= 0.5 * (class->high_hz - class->low_hz);
}

/* How much the class lets through: octaves of frequency times octaves of duration, less where it wants a
 * sweep. */
static double allowance_of(const struct call_class *class)
{
    const struct tone_shape *tone = &class->tone;
    double free_sweep = isinf(tone->min_sweep_hz) + isinf(tone->max_sweep_hz);
    double free_beside = tone->max_sideband_hz > 0 ? 0.25 : 1;
    return log2(class->high_hz / class->low_hz) * log2(tone->max_s / tone->min_s) * (1 + free_sweep) / 3 *
           free_beside;
}

/* The widest bounds of the tone classes that share a window; their thresholds follow from the cells. */
static void gather(struct tones *tones, double window_s, struct tracer_setup *setup)
{
    bool first = true;
    *setup = (struct tracer_setup){.rate_hz = tones->rate_hz, .window_s = window_s};
    for (uint32_t i = 0; i < tones->judge->n_classes; i++) {
        const struct call_class *class = tones->judge->classes[i].class;
        if (!carries(class, tones->rate_hz) || class->tone.window_s != window_s)
            continue;
        double high = fmin(class->high_hz, CARRIED * setup->rate_hz);
        setup->low_hz = first ? class->low_hz : fmin(setup->low_hz, class->low_hz);
        setup->high_hz = fmax(setup->high_hz, high);
        setup->max_rate_hz_s = fmax(setup->max_rate_hz_s, class->tone.max_rate_hz_s);
        setup->max_s = fmax(setup->max_s, class->tone.max_s);
        setup->delay_s = first ? class->natural_delay_s : fmin(setup->delay_s, class->natural_delay_s);
        setup->tells_sidebands =
            setup->tells_sidebands || class->tone.min_sideband_hz > 0 || class->tone.max_sideband_hz > 0;
        first = false;
    }
    setup->factor = 1;
    while (PASS_BAND * setup->rate_hz / (2 * setup->factor) >= setup->high_hz)
        setup->factor *= 2;
}

static void set_thresholds(struct tones *tones, struct tracer_setup *setup)
{
    setup->threshold = INFINITY;
    for (uint32_t i = 0; i < tones->judge->n_classes; i++) {
        struct judged_class *judged = &tones->judge->classes[i];
        const struct call_class *class = judged->class;
        if (!carries(class, tones->rate_hz) || class->tone.window_s != setup->window_s)
            continue;
        struct tracer_setup alone = *setup;
        alone.low_hz = class->low_hz;
        alone.high_hz = fmin(class->high_hz, CARRIED * setup->rate_hz);
        double allowed = fmax(class->false_per_hour, MIN_FALSE_PER_HOUR);
        judged->threshold = log(3600 * tracer_cells_per_s(&alone) / allowed) - BOUND_CAUTION;
        judged->allowance = allowance_of(class);
        judged->tracer = tones->n_tracers;
        tones->judge->groups[tones->n_tracers] |= 1U << class->group;
        tones->judge->delay_s[tones->n_tracers] = setup->delay_s;
        setup->threshold = fmin(setup->threshold, judged->threshold);
        setup->ceiling = fmax(setup->ceiling, judged->threshold + HEADROOM);
    }
}

/* The bands of all factors that the tracers need, each from the one before. */
static enum status make_bands(struct tones *tones, const struct tracer_setup *setups)
{
    uint32_t before = 1;
    double late = 0;
    for (uint32_t factor = 1; factor != 0 && tones->n_bands < MAX_BANDS; factor *= 2) {
        bool needed = false;
        for (uint32_t i = 0; i < tones->n_tracers; i++)
            needed = needed || setups[i].factor == factor;
        if (!needed)
            continue;
        struct band *band = &tones->bands[tones->n_bands++];
        *band = (struct band){.factor = factor};
        band->samples = calloc(tones->n_slice / factor + 2, sizeof *band->samples);
        enum status status = decimator_create(factor / before, &band->decimator);
        if (!band->samples || status != STATUS_OK)
            return band->samples ? status : STATUS_NO_MEMORY;
        late += decimator_get_delay(band->decimator) * before;
        band->late_frames = late;
        before = factor;
    }
    return STATUS_OK;
}

static enum status make_tracers(struct tones *tones)
{
    struct tracer_setup *setups = calloc(CATALOGUE_MAX_CLASSES, sizeof *setups);
    if (!setups)
        return STATUS_NO_MEMORY;
    for (uint32_t c = 0; c < tones->judge->n_classes; c++) {
        struct judged_class *judged = &tones->judge->classes[c];
        if (judged->tracer != NO_TRACER || !carries(judged->class, tones->rate_hz))
            continue;
        gather(tones, judged->class->tone.window_s, &setups[tones->n_tracers]);
        set_thresholds(tones, &setups[tones->n_tracers]);
        tones->n_tracers++;
    }
    enum status status = make_bands(tones, setups);
    for (uint32_t i = 0; i < tones->n_tracers && status == STATUS_OK; i++) {
        while (tones->bands[tones->band_of[i]].factor != setups[i].factor)
            tones->band_of[i]++;
        setups[i].late_frames = tones->bands[tones->band_of[i]].late_frames;
        status = tracer_create(&setups[i], &tones->tracers[i]);
    }
    free(setups);
    return status;
}

static enum status fill(struct tones *tones, const struct call_class *classes, uint32_t n_classes)
{
    tones->n_slice = (uint32_t)ceil(SLICE_S * tones->rate_hz);
    tones->slice_end = tones->n_slice;
    tones->limited = calloc(tones->n_slice, sizeof *tones->limited);
    tones->open = calloc(MAX_OPEN, sizeof *tones->open);
    tones->judge = calloc(1, sizeof *tones->judge);
    if (!tones->limited || !tones->open || !tones->judge)
        return STATUS_NO_MEMORY;
    tones->judge->rate_hz = tones->rate_hz;
    tones->judge->n_classes = n_classes;
    for (uint32_t c = 0; c < n_classes; c++)
        tones->judge->classes[c] = (struct judged_class){.class = &classes[c], .tracer = NO_TRACER};
    return make_tracers(tones);
}

enum status tones_create(const struct call_class *classes, uint32_t n_classes, double rate_hz,
                         struct tones **out)
{
    if (n_classes > CATALOGUE_MAX_CLASSES || !(rate_hz >= 1000 && rate_hz <= 1e6))
        return STATUS_BAD_ARGUMENT;
    struct tones *tones = calloc(1, sizeof *tones);
    if (!tones)
        return STATUS_NO_MEMORY;
    tones->rate_hz = rate_hz;
    enum status status = fill(tones, classes, n_classes);
    if (status != STATUS_OK) {
        tones_destroy(tones);
        return status;
    }
    *out = tones;
    return STATUS_OK;
}

void tones_destroy(struct tones *tones)
{
    if (!tones)
        return;
    for (uint32_t i = 0; i < tones->n_tracers; i++)
        tracer_destroy(tones->tracers[i]);
    for (uint32_t i = 0; i < tones->n_bands; i++) {
        decimator_destroy(tones->bands[i].decimator);
        free(tones->bands[i].samples);
    }
    free(tones->limited);
    free(tones->lowered);
    free(tones->open);
    free(tones->judge);
    free(tones);
}

bool tones_can_hear(const struct tones *tones, uint32_t class_index)
{
    return class_index < tones->judge->n_classes && tones->judge->classes[class_index].tracer != NO_TRACER;
}

/* The first band has been filled as the samples came. */
static void run_bands(struct tones *tones)
{
    for (uint32_t i = 1; i < tones->n_bands; i++) {
        const struct band *from = &tones->bands[i - 1];
        struct band *band = &tones->bands[i];
        band->n_samples =
            (uint32_t)decimator_push(band->decimator, from->samples, from->n_samples, band->samples);
    }
}

/* The slice goes through every tracer, then the judge gives what is due. */
static void run_slice(struct tones *tones, const struct found_sink *sink)
{
    run_bands(tones);
    for (uint32_t i = 0; i < tones->n_tracers; i++) {
        const struct band *band = &tones->bands[tones->band_of[i]];
        struct context context = {tones->judge, i};
        struct trace_sink to = {take_contour, &context};
        tracer_push(tones->tracers[i], band->samples, band->n_samples, &to);
    }
    if (tones->n_bands > 0)
        tones->bands[0].n_samples = 0;
    if (!sink || !judge_is_due(tones->judge, (double)tones->next_frame))
        return;
    uint32_t n_open = 0;
    for (uint32_t i = 0; i < tones->n_tracers; i++) {
        uint32_t n = tracer_get_open(tones->tracers[i], tones->open + n_open, MAX_OPEN - n_open);
        for (uint32_t j = 0; j < n; j++)
            tones->open[n_open + j].tracer = i;
        n_open += n;
    }
    judge_give(tones->judge, tones->next_frame - 1, false, tones->open, n_open, sink);
}

static void pay(struct tones *tones, const struct found_sink *sink)
{
    if (tones->owes)
        judge_give(tones->judge, tones->owes_known, true, NULL, 0, sink);
    tones->owes = false;
}

static void end_tracers(struct tones *tones, uint64_t next_frame)
{
    for (uint32_t i = 0; i < tones->n_tracers; i++) {
        struct context context = {tones->judge, i};
        struct trace_sink to = {take_contour, &context};
        tracer_end(tones->tracers[i], next_frame, &to);
    }
    for (uint32_t i = 0; i < tones->n_bands; i++)
        decimator_reset(tones->bands[i].decimator);
}

void tones_reset(struct tones *tones, uint64_t next_frame)
{
    run_slice(tones, NULL);
    end_tracers(tones, next_frame);
    tones->owes_known = tones->next_frame > 0 ? tones->next_frame - 1 : 0;
    tones->owes = true;
    tones->next_frame = next_frame;
    tones->slice_end = (next_frame / tones->n_slice + 1) * tones->n_slice;
}

static float limit(float pascals)
{
    return isfinite(pascals) ? copysignf(MOST_PA, pascals) : 0;
}

LANES_WIDE static bool is_in_range(const float *pascals, uint32_t n)
{
    wide_mask beyond = {0};
    wide_lanes x;
    uint32_t i = 0;
    for (; i + WIDE_LANES <= n; i += WIDE_LANES) {
        wide_load(&x, pascals + i);
        beyond |= ~(WIDE_SIZE(x) <= MOST_PA);
    }
    bool good = true;
    for (uint32_t lane = 0; lane < WIDE_LANES; lane++)
        good = good && !beyond[lane];
    for (; i < n; i++)
        good = good && fabsf(pascals[i]) <= MOST_PA;
    return good;
}

/* At most a slice of samples goes into the first band. */
static void take_samples(struct tones *tones, const float *pascals, uint32_t n)
{
    if (tones->n_bands == 0)
        return;
    if (!is_in_range(pascals, n)) {
        for (uint32_t i = 0; i < n; i++)
            tones->limited[i] = fabsf(pascals[i]) <= MOST_PA ? pascals[i] : limit(pascals[i]);
        pascals = tones->limited;
    }
    struct band *first = &tones->bands[0];
    float *out = first->samples + first->n_samples;
    const uint32_t n_out = (uint32_t)decimator_push(first->decimator, pascals, n, out);
    first->n_samples += n_out;
    if (tones->lowered && tones->n_lowered + n_out <= tones->most_lowered) {
        memcpy(tones->lowered + tones->n_lowered, out, n_out * sizeof *out);
        tones->n_lowered += n_out;
    }
}

enum status tones_keep_lowered(struct tones *tones, uint32_t max_frames)
{
    if (tones->n_bands == 0 || tones->bands[0].factor == 1 || tones->lowered)
        return STATUS_OK;
    tones->most_lowered = max_frames / tones->bands[0].factor + 1;
    tones->lowered = calloc(tones->most_lowered, sizeof *tones->lowered);
    return tones->lowered ? STATUS_OK : STATUS_NO_MEMORY;
}

struct lowered tones_get_lowered(const struct tones *tones)
{
    return tones->lowered ? (struct lowered){tones->bands[0].factor, tones->n_lowered, tones->lowered}
                          : (struct lowered){.factor = 1};
}

void tones_push(struct tones *tones, const float *pascals, uint32_t n, const struct found_sink *sink)
{
    if (n > 0)
        pay(tones, sink);
    tones->n_lowered = 0;
    while (n > 0) {
        uint64_t left = tones->slice_end - tones->next_frame;
        uint32_t take = n < left ? n : (uint32_t)left;
        take_samples(tones, pascals, take);
        pascals += take;
        n -= take;
        tones->next_frame += take;
        if (take == left) {
            tones->slice_end += tones->n_slice;
            run_slice(tones, sink);
        }
    }
}

void tones_hear_tail(struct tones *tones, const struct gate_tail *tail)
{
    for (uint32_t i = 0; i < tones->n_tracers; i++)
        for (uint32_t b = 0; b < tail->n; b++) {
            const struct gate_tail_band *band = &tail->bands[b];
            tracer_set_tail(tones->tracers[i], band->low_hz, band->high_hz,
                            band->masked || band->ratio > TAIL_HEARD);
            tracer_set_masked(tones->tracers[i], b, band);
        }
}

void tones_finish(struct tones *tones, const struct found_sink *sink)
{
    tones_reset(tones, tones->next_frame);
    pay(tones, sink);
}

void tones_get_rejections(const struct tones *tones, uint64_t out[][REJECT_COUNT])
{
    memcpy(out, tones->judge->rejections, tones->judge->n_classes * sizeof out[0]);
}
