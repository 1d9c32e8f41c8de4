/* Series of pulses tied by likeness. */
#include "call/codas.h"
#include "base/median.h"
#include "base/units.h"
#include "call/alike.h"
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define MOST ALIKE_MOST /* pulses of a stretch */
#define STRETCH_S 6.0   /* after so long it is looked at, quiet or not */
#define KEPT_S 3.0      /* of it, for what is still going on */
#define LEVELS 24       /* steps of 3 dB in which stray pulses are counted */
#define LEVEL_STEP_DB 3
#define RATE_INTERVALS 60
#define BACKGROUND_DOUBT_DB 1.0 /* by which the background may be too low: it is young, or follows */
#define MACHINE_PULSES 4        /* of a series as regular as that: no whale's */
#define NONE UINT32_MAX

struct codas {
    struct call_class call_class;
    double rate_hz, memory_s;
    struct noise_rate noise;
    struct alike *alike;
    double rate_above[LEVELS]; /* running, of pulses tied to nothing at each level or more, a second */
    double counted_until_s;
    uint64_t n_pulses; /* taken since the last reset */
    uint32_t n_trains;
    uint32_t n;
    struct pulse pulses[MOST];
    uint64_t numbers[MOST];
    uint32_t group[MOST]; /* of each pulse; a group has the number of its first pulse */
    bool hidden[MOST];
    uint64_t members[MOST];
    double sorted[MOST], arrivals[MOST];
};

enum status codas_create(const struct call_class *call_class, double rate_hz, struct noise_rate noise,
                         struct codas **out)
{
    struct codas *codas = calloc(1, sizeof *codas);
    if (!codas)
        return STATUS_NO_MEMORY;
    codas->call_class = *call_class;
    codas->rate_hz = rate_hz;
    codas->memory_s = RATE_INTERVALS * call_class->train.max_interval_s;
    codas->noise = noise;
    if (alike_create(&codas->alike) != STATUS_OK) {
        codas_destroy(codas);
        return STATUS_NO_MEMORY;
    }
    codas_reset(codas);
    *out = codas;
    return STATUS_OK;
}

void codas_reset(struct codas *codas)
{
    memset(codas->rate_above, 0, sizeof codas->rate_above);
    codas->counted_until_s = 0;
    codas->n_pulses = 0;
    codas->n = 0;
}

/* ---- which belong together */

static void find_groups(struct codas *codas)
{
    double least_apart = codas->call_class.train.min_interval_s * codas->rate_hz;
    alike_find(codas->alike, codas->pulses, codas->hidden, codas->n, least_apart,
               codas->call_class.train.min_pulses, codas->group);
    /* A pause ends a coda: what comes after is a group of its own. */
    double pause = codas->call_class.train.max_interval_s * codas->rate_hz;
    for (uint32_t i = 0; i < codas->n; i++) {
        uint32_t before = NONE;
        for (uint32_t j = 0; j < i; j++)
            if (codas->group[j] == codas->group[i])
                before = j;
        if (before != NONE && codas->pulses[i].frame - codas->pulses[before].frame > pause) {
            uint32_t old = codas->group[i];
            for (uint32_t j = i; j < codas->n; j++)
                if (codas->group[j] == old)
                    codas->group[j] = i;
        }
    }
}

/* ---- whether a group is more than chance */

static uint32_t level_index(double snr)
{
    return (uint32_t)fmin(LEVELS - 1, fmax(0, units_power_db(snr) / LEVEL_STEP_DB - 1));
}

/* Remembers a pulse that was tied to nothing. */
static void count_stray(struct codas *codas, const struct pulse *pulse)
{
    double time_s = pulse->frame / codas->rate_hz;
    double kept = exp(-fmax(0, time_s - codas->counted_until_s) / codas->memory_s);
    codas->counted_until_s = fmax(time_s, codas->counted_until_s);
    for (uint32_t l = 0; l < LEVELS; l++)
        codas->rate_above[l] =
            codas->rate_above[l] * kept + (l <= level_index(pulse->snr) ? 1 / codas->memory_s : 0);
}

/* Rate at which chance gives pulses such as this: what was counted at its level and a step below, one more,
 * and a standard deviation. */
static double chance_rate(const struct codas *codas, const struct pulse *pulse, double now_s)
{
    uint32_t level = level_index(pulse->snr);
    double doubt = units_power_ratio(-BACKGROUND_DOUBT_DB);
    double least_snr = doubt * units_power_ratio(codas->call_class.train.min_snr_db);
    double kept = exp(-fmax(0, now_s - codas->counted_until_s) / codas->memory_s);
    double count = codas->rate_above[level > 0 ? level - 1 : 0] * kept * codas->memory_s;
    double heard_s = fmax(codas->call_class.train.max_interval_s, fmin(codas->memory_s, now_s));
    return (count + 1 + sqrt(count)) / heard_s +
           noise_rate_competing(&codas->noise, doubt * pulse->snr, least_snr, ALIKE_SPREAD_DB);
}

/* members[0..n) of one group, in order of arrival. */
static bool is_certain(const struct codas *codas, uint32_t n, double *out_excess, double *out_rate)
{
    const struct train_shape *shape = &codas->call_class.train;
    double ln_range = log(log(shape->max_interval_s / shape->min_interval_s)), ratio = 0, first = 0;
    double now_s = codas->pulses[codas->members[0]].frame / codas->rate_hz;
    for (uint32_t i = 0; i < n; i++) {
        const struct pulse *pulse = &codas->pulses[codas->members[i]];
        double rate = chance_rate(codas, pulse, now_s);
        if (i == 0) {
            first = rate;
            continue;
        }
        double interval_s = (pulse->frame - codas->pulses[codas->members[i - 1]].frame) / codas->rate_hz;
        ratio -= log(interval_s) + ln_range + log(rate);
    }
    *out_rate = first;
    *out_excess = ratio - log(3600 * first / codas->call_class.false_per_hour);
    return n >= shape->min_pulses && *out_excess > 0;
}

/* Root mean square of how far, as a share, the n intervals in sorted[] are from whole multiples of their
 * median. */
static double find_jitter(const double *sorted, uint32_t n, double interval)
{
    double sum = 0;
    for (uint32_t i = 0; i < n; i++) {
        double share = log(sorted[i] / (fmax(1, round(sorted[i] / interval)) * interval));
        sum += share * share;
    }
    return sqrt(sum / n);
}

static const struct pulse *member_of(const void *context, uint32_t i)
{
    const struct codas *codas = context;
    return &codas->pulses[codas->members[i]];
}

static void give(struct codas *codas, uint32_t n, double excess, double rate, const struct train_sink *sink,
                 uint64_t *rejections)
{
    struct train train = {.number = ++codas->n_trains, .members = codas->members, .excess = excess};
    for (uint32_t i = 0; i + 1 < n; i++)
        codas->sorted[i] =
            codas->pulses[codas->members[i + 1]].frame - codas->pulses[codas->members[i]].frame;
    train.interval_frames = median_of(codas->sorted, n - 1);
    train.jitter = find_jitter(codas->sorted, n - 1, train.interval_frames);
    if (n >= MACHINE_PULSES && train.jitter < codas->call_class.train.min_jitter) {
        rejections[REJECT_MACHINE_RHYTHM]++;
        return;
    }
    train.strays = rate * train.interval_frames / codas->rate_hz;
    for (uint32_t i = 0; i + 1 < n; i++)
        train.likeness += fmax(0, pulse_shape_likeness(&codas->pulses[codas->members[i]].shape,
                                                       &codas->pulses[codas->members[i + 1]].shape)) /
                          (n - 1);
    struct train_pulses pulses = {member_of, codas, n};
    train_describe(&pulses, codas->sorted, codas->arrivals, &train);
    for (uint32_t i = 0; i < n; i++)
        codas->members[i] = codas->numbers[codas->members[i]];
    sink->take(sink->context, &train);
}

/* ---- a stretch */

static void forget_before(struct codas *codas, double frame)
{
    uint32_t kept = 0;
    for (uint32_t i = 0; i < codas->n; i++) {
        if (codas->group[i] == NONE || codas->pulses[i].frame < frame)
            continue;
        codas->pulses[kept] = codas->pulses[i];
        codas->numbers[kept] = codas->numbers[i];
        codas->hidden[kept++] = codas->hidden[i];
    }
    codas->n = kept;
}

/* Judges the groups that ended before `ended`, and forgets them, and all that came before `kept`. */
static void judge(struct codas *codas, double ended, double kept, const struct train_sink *sink,
                  uint64_t *rejections)
{
    find_groups(codas);
    for (uint32_t g = 0; g < codas->n; g++) {
        uint32_t n = 0;
        for (uint32_t i = g; i < codas->n; i++)
            if (codas->group[i] == g)
                codas->members[n++] = i;
        if (n == 0 || codas->pulses[codas->members[n - 1]].frame > ended)
            continue;
        double excess, rate;
        bool certain = is_certain(codas, n, &excess, &rate);
        for (uint32_t i = g; i < codas->n; i++) {
            if (codas->group[i] != g)
                continue;
            codas->group[i] = NONE;
            if (certain || codas->hidden[i])
                continue;
            rejections[REJECT_NO_RHYTHM]++;
            count_stray(codas, &codas->pulses[i]);
        }
        if (certain)
            give(codas, n, excess, rate, sink, rejections);
    }
    forget_before(codas, kept);
}

void codas_push(struct codas *codas, const struct pulse *pulse, const struct train_sink *sink,
                uint64_t *rejections)
{
    codas_advance(codas, pulse->frame, sink, rejections);
    if (pulse->foreign) {
        rejections[REJECT_SHAPE]++;
        return;
    }
    codas->pulses[codas->n] = *pulse;
    codas->numbers[codas->n] = codas->n_pulses++;
    codas->hidden[codas->n++] = false;
}

void codas_advance(struct codas *codas, double frame, const struct train_sink *sink, uint64_t *rejections)
{
    if (codas->n == 0)
        return;
    double pause = codas->call_class.train.max_interval_s * codas->rate_hz;
    bool quiet = frame - codas->pulses[codas->n - 1].frame > pause;
    bool full = codas->n == MOST || frame - codas->pulses[0].frame > STRETCH_S * codas->rate_hz;
    if (quiet)
        judge(codas, INFINITY, INFINITY, sink, rejections);
    else if (full)
        judge(codas, frame - pause, fmax(frame - KEPT_S * codas->rate_hz, codas->pulses[codas->n / 2].frame),
              sink, rejections);
}

void codas_finish(struct codas *codas, const struct train_sink *sink, uint64_t *rejections)
{
    judge(codas, INFINITY, INFINITY, sink, rejections);
    codas_reset(codas);
}

void codas_hide(struct codas *codas, double start_frame, double end_frame, uint64_t *rejections)
{
    for (uint32_t i = 0; i < codas->n; i++) {
        double frame = codas->pulses[i].frame;
        if (codas->hidden[i] || frame < start_frame || frame > end_frame)
            continue;
        codas->hidden[i] = true;
        rejections[REJECT_OWN_SOURCE]++;
    }
}

void codas_destroy(struct codas *codas)
{
    if (!codas)
        return;
    alike_destroy(codas->alike);
    free(codas);
}
