/* Groups of pulses by likeness. */
#include "call/alike.h"
#include "base/units.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define APART_SPREAD_DB 8.0 /* of the level, between animals; like ALIKE_SPREAD_DB a judgement, no source */
#define MOST_PASSES 4
#define JOINS_FROM -4.0 /* ratio: a stray among the clicks of a coda is rarer than another of its clicks */
#define NONE UINT32_MAX

/* Sums over the pulses of a group, from which its mean follows, with any one of them left out. */
struct sums {
    double n, level_db, doubt;
    double weight[PULSE_SHAPE_BANDS], band[PULSE_SHAPE_BANDS];
    float echoes[PULSE_SHAPE_LAGS];
};

struct alike {
    const struct pulse *pulses;
    uint32_t n, least;
    double least_apart_frames;
    uint32_t *group; /* borrowed */
    double level_db[ALIKE_MOST];
    struct sums sums[ALIKE_MOST]; /* of each group, at its number */
    float ratio[ALIKE_MOST][ALIKE_MOST];
    uint32_t size[ALIKE_MOST], best[ALIKE_MOST]; /* while merging: 0 is gone; the most like later group */
};

enum status alike_create(struct alike **out)
{
    struct alike *alike = calloc(1, sizeof *alike);
    if (!alike)
        return STATUS_NO_MEMORY;
    *out = alike;
    return STATUS_OK;
}

void alike_destroy(struct alike *alike)
{
    free(alike);
}

static double level_ratio(double difference_db)
{
    const double alike = ALIKE_SPREAD_DB * ALIKE_SPREAD_DB, apart = APART_SPREAD_DB * APART_SPREAD_DB;
    return log(apart / alike) / 2 - difference_db * difference_db / 2 * (1 / alike - 1 / apart);
}

static bool too_near(const struct alike *alike, uint32_t i, uint32_t j)
{
    return fabs(alike->pulses[i].frame - alike->pulses[j].frame) < alike->least_apart_frames;
}

/* ---- merging */

static void find_best(struct alike *alike, uint32_t g)
{
    alike->best[g] = NONE;
    for (uint32_t h = g + 1; h < alike->n; h++)
        if (alike->size[h] && alike->ratio[g][h] > 0 &&
            (alike->best[g] == NONE || alike->ratio[g][h] > alike->ratio[g][alike->best[g]]))
            alike->best[g] = h;
}

/* Merges group `from` into `into`: the ratios to all others become means weighted by size. */
static void merge(struct alike *alike, uint32_t into, uint32_t from)
{
    float a = (float)alike->size[into], b = (float)alike->size[from];
    for (uint32_t h = 0; h < alike->n; h++) {
        if (!alike->size[h] || h == into || h == from)
            continue;
        float mean = (a * alike->ratio[into][h] + b * alike->ratio[from][h]) / (a + b);
        alike->ratio[into][h] = alike->ratio[h][into] = mean;
    }
    alike->size[into] += alike->size[from];
    alike->size[from] = 0;
    for (uint32_t i = 0; i < alike->n; i++)
        if (alike->group[i] == from)
            alike->group[i] = into;
    for (uint32_t g = 0; g < alike->n; g++)
        if (alike->size[g] && (g <= into || alike->best[g] == from || alike->best[g] == into))
            find_best(alike, g);
}

static void merge_all(struct alike *alike)
{
    for (uint32_t g = 0; g < alike->n; g++)
        find_best(alike, g);
    for (;;) {
        uint32_t into = NONE;
        for (uint32_t g = 0; g < alike->n; g++)
            if (alike->size[g] && alike->best[g] != NONE &&
                (into == NONE || alike->ratio[g][alike->best[g]] > alike->ratio[into][alike->best[into]]))
                into = g;
        if (into == NONE)
            return;
        merge(alike, into, alike->best[into]);
    }
}

/* ---- settling */

static void add(struct alike *alike, uint32_t g, uint32_t pulse, double sign)
{
    struct sums *sums = &alike->sums[g];
    const struct pulse_shape *shape = &alike->pulses[pulse].shape;
    for (uint32_t b = 0; b < PULSE_SHAPE_BANDS; b++) {
        double weight = 1 / (1 + (double)shape->doubt_db[b] * shape->doubt_db[b]);
        sums->weight[b] += sign * weight;
        sums->band[b] += sign * weight * shape->bands_db[b];
    }
    for (uint32_t l = 0; l < PULSE_SHAPE_LAGS; l++)
        sums->echoes[l] += (float)sign * shape->echoes[l];
    sums->doubt += sign * shape->echoes_doubt * shape->echoes_doubt;
    sums->level_db += sign * alike->level_db[pulse];
    sums->n += sign;
}

/* Log-likelihood ratio of a pulse against the mean of a group that it is not of. */
static double ratio_to(const struct alike *alike, uint32_t pulse, uint32_t g)
{
    const struct sums *sums = &alike->sums[g];
    struct pulse_shape mean = {.echoes_doubt = (float)(sqrt(fmax(0, sums->doubt)) / sums->n)};
    for (uint32_t b = 0; b < PULSE_SHAPE_BANDS; b++) {
        mean.bands_db[b] = (float)(sums->band[b] / sums->weight[b]);
        mean.doubt_db[b] = (float)sqrt(fmax(0, 1 / sums->weight[b] - 1 / sums->n));
    }
    for (uint32_t l = 0; l < PULSE_SHAPE_LAGS; l++)
        mean.echoes[l] = sums->echoes[l] / (float)sums->n;
    pulse_shape_centre(&mean);
    return pulse_shape_likeness(&alike->pulses[pulse].shape, &mean) +
           level_ratio(alike->level_db[pulse] - sums->level_db / sums->n);
}

/* Whether a pulse is nearer to one of the group's than an animal calls. */
static bool is_crowded(const struct alike *alike, uint32_t pulse, uint32_t g)
{
    for (uint32_t j = pulse; j > 0 && too_near(alike, pulse, j - 1); j--)
        if (alike->group[j - 1] == g)
            return true;
    for (uint32_t j = pulse + 1; j < alike->n && too_near(alike, pulse, j); j++)
        if (alike->group[j] == g)
            return true;
    return false;
}

/* Lets one pulse go to the group that it is most like; gives whether it went. */
static bool settle_one(struct alike *alike, uint32_t pulse)
{
    uint32_t own = alike->group[pulse], to = own;
    bool loose = alike->sums[own].n < alike->least - 0.5;
    add(alike, own, pulse, -1);
    double best = loose ? JOINS_FROM : alike->sums[own].n > 0.5 ? ratio_to(alike, pulse, own) : 0;
    for (uint32_t g = 0; g < alike->n; g++) {
        if (g == own || alike->sums[g].n < alike->least - 0.5 || is_crowded(alike, pulse, g))
            continue;
        double ratio = ratio_to(alike, pulse, g);
        if (ratio > best) {
            best = ratio;
            to = g;
        }
    }
    add(alike, to, pulse, 1);
    alike->group[pulse] = to;
    return to != own;
}

void alike_find(struct alike *alike, const struct pulse *pulses, const bool *hidden, uint32_t n,
                double least_apart_frames, uint32_t least, uint32_t *group)
{
    alike->pulses = pulses;
    alike->n = n;
    alike->least = least;
    alike->least_apart_frames = least_apart_frames;
    alike->group = group;
    for (uint32_t i = 0; i < n; i++) {
        group[i] = i;
        alike->size[i] = 1;
        alike->level_db[i] = units_power_db(pulses[i].snr);
        for (uint32_t j = 0; j < i; j++) {
            double ratio = -INFINITY;
            if (!hidden[i] && !hidden[j] && !too_near(alike, i, j))
                ratio = pulse_shape_likeness(&pulses[i].shape, &pulses[j].shape) +
                        level_ratio(alike->level_db[i] - alike->level_db[j]);
            alike->ratio[i][j] = alike->ratio[j][i] = (float)ratio;
        }
    }
    merge_all(alike);
    memset(alike->sums, 0, sizeof alike->sums);
    for (uint32_t i = 0; i < n; i++)
        add(alike, group[i], i, 1);
    bool moved = true;
    for (uint32_t pass = 0; moved && pass < MOST_PASSES; pass++) {
        moved = false;
        for (uint32_t i = 0; i < n; i++)
            moved |= !hidden[i] && settle_one(alike, i);
    }
}
