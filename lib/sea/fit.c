/* Robust regression of levels on lg of range; the method stands in the header. */
#include "sea/fit.h"
#include "base/student.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define BISQUARE_K 4.685 /* 95 % as efficient as least squares where errors are normal */
#define MAD_TO_SPREAD 1.4826
#define ROUNDS 12 /* of each kind; the weights stand still to 1e-3 by then */
#define PLACE_DECADES 0.05
#define MAX_PLACES 512u
#define LEAST_IN_PLACE 3u
#define BEND_PRIOR_DB 5.0 /* the law's slope may change by twice this over a decade */
#define BEND_LEAST_PLACES 6u
#define PLACE_LEAST_PLACES 4u
#define PLACE_PRIOR_DB 1.0
#define NONE UINT32_MAX

/* One point as the regression sees it. */
struct sample {
    double x, y, weight, residual;
    uint32_t place, source; /* source counts runs of points with one source number */
};

/* Of one source level: weighted means. */
struct source_sum {
    double weight, x, xx, y, low_x, high_x;
    uint32_t n;
};

struct line {
    double level, slope, bend; /* at x = 0 */
    double kept;               /* part of the bend that the data decide, 0 .. 1 */
};

struct fit {
    double absorption_db_m;
    uint32_t capacity, n, next;
    struct fit_point *points;
    struct sample *samples;
    struct source_sum *sources;
    double *sorted;
    uint32_t n_samples, n_sources, n_places;
    double ridge;                  /* scatter^2 / prior^2 of the bend; INFINITY: no bend */
    int32_t place_key[MAX_PLACES]; /* in lg range */
    uint32_t place_n[MAX_PLACES];
};

enum status fit_create(uint32_t capacity, double absorption_db_m, struct fit **out)
{
    if (!out || capacity < FIT_LEAST_POINTS || capacity > 100000 || !isfinite(absorption_db_m) ||
        absorption_db_m < 0.0)
        return STATUS_BAD_ARGUMENT;
    struct fit *fit = calloc(1, sizeof *fit);
    if (!fit)
        return STATUS_NO_MEMORY;
    fit->capacity = capacity;
    fit->absorption_db_m = absorption_db_m;
    fit->points = calloc(capacity, sizeof *fit->points);
    fit->samples = calloc(capacity, sizeof *fit->samples);
    fit->sources = calloc(capacity, sizeof *fit->sources);
    fit->sorted = calloc(capacity, sizeof *fit->sorted);
    if (!fit->points || !fit->samples || !fit->sources || !fit->sorted) {
        fit_destroy(fit);
        return STATUS_NO_MEMORY;
    }
    *out = fit;
    return STATUS_OK;
}

void fit_destroy(struct fit *fit)
{
    if (!fit)
        return;
    free(fit->points);
    free(fit->samples);
    free(fit->sources);
    free(fit->sorted);
    free(fit);
}

void fit_reset(struct fit *fit)
{
    fit->n = fit->next = 0;
}

enum status fit_set_absorption(struct fit *fit, double absorption_db_m)
{
    if (!isfinite(absorption_db_m) || absorption_db_m < 0.0)
        return STATUS_BAD_ARGUMENT;
    fit->absorption_db_m = absorption_db_m;
    return STATUS_OK;
}

enum status fit_push(struct fit *fit, const struct fit_point *point)
{
    if (!isfinite(point->range_m) || point->range_m <= 0.0 || !isfinite(point->level_db) ||
        !isfinite(point->source_db))
        return STATUS_OUT_OF_RANGE;
    fit->points[fit->next] = *point;
    fit->next = (fit->next + 1) % fit->capacity;
    fit->n += fit->n < fit->capacity;
    return STATUS_OK;
}

static uint32_t place_of(struct fit *fit, double x)
{
    int32_t key = (int32_t)lrint(floor(x / PLACE_DECADES));
    for (uint32_t i = 0; i < fit->n_places; i++)
        if (fit->place_key[i] == key)
            return i;
    if (fit->n_places == MAX_PLACES)
        return MAX_PLACES - 1;
    fit->place_key[fit->n_places] = key;
    fit->place_n[fit->n_places] = 0;
    return fit->n_places++;
}

/* Points become samples; those alone with their source level say nothing and are left out. */
static void gather(struct fit *fit)
{
    fit->n_places = fit->n_sources = fit->n_samples = 0;
    for (uint32_t i = 0; i < fit->n;) {
        uint32_t end = i, oldest = fit->n < fit->capacity ? 0 : fit->next;
        const struct fit_point *first = &fit->points[(oldest + i) % fit->capacity];
        while (end < fit->n && fit->points[(oldest + end) % fit->capacity].source == first->source)
            end++;
        for (uint32_t k = i; k < end && end - i > 1; k++) {
            const struct fit_point *point = &fit->points[(oldest + k) % fit->capacity];
            struct sample *sample = &fit->samples[fit->n_samples++];
            sample->x = log10(point->range_m / FIT_REFERENCE_M);
            sample->y = point->level_db - point->source_db + fit->absorption_db_m * point->range_m;
            sample->weight = 1.0;
            sample->place = place_of(fit, sample->x);
            sample->source = fit->n_sources;
            fit->place_n[sample->place]++;
        }
        fit->n_sources += end - i > 1;
        i = end;
    }
}

/* Whether enough points stand at a place or next to it for it to be no stray range. */
static bool is_held(const struct fit *fit, uint32_t place)
{
    uint32_t n = 0;
    for (uint32_t i = 0; i < fit->n_places; i++)
        if (abs(fit->place_key[i] - fit->place_key[place]) <= 1)
            n += fit->place_n[i];
    return n >= LEAST_IN_PLACE;
}

static void find_reach(const struct fit *fit, struct fitted *out)
{
    double low = INFINITY, high = -INFINITY;
    for (uint32_t i = 0; i < fit->n_samples; i++) {
        if (is_held(fit, fit->samples[i].place)) {
            low = fmin(low, fit->samples[i].x);
            high = fmax(high, fit->samples[i].x);
        }
    }
    out->nearest_m = FIT_REFERENCE_M * pow(10.0, low);
    out->farthest_m = FIT_REFERENCE_M * pow(10.0, high);
}

static int compare_doubles(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static int compare_sources(const void *a, const void *b)
{
    const struct source_sum *x = a, *y = b;
    double p = x->high_x - x->low_x, q = y->high_x - y->low_x;
    return (p > q) - (p < q);
}

/* lg of the range ratio within the source level of the median sample. */
static double spread_of_ranges(struct fit *fit)
{
    for (uint32_t s = 0; s < fit->n_sources; s++)
        fit->sources[s] = (struct source_sum){.low_x = INFINITY, .high_x = -INFINITY};
    for (uint32_t i = 0; i < fit->n_samples; i++) {
        const struct sample *sample = &fit->samples[i];
        struct source_sum *source = &fit->sources[sample->source];
        source->n++;
        if (is_held(fit, sample->place)) {
            source->low_x = fmin(source->low_x, sample->x);
            source->high_x = fmax(source->high_x, sample->x);
        }
    }
    qsort(fit->sources, fit->n_sources, sizeof *fit->sources, compare_sources);
    uint32_t passed = 0;
    for (uint32_t s = 0; s < fit->n_sources; s++) {
        passed += fit->sources[s].n;
        if (2 * passed >= fit->n_samples)
            return fit->sources[s].high_x - fit->sources[s].low_x;
    }
    return -INFINITY;
}

/* Weighted means within each source level; `y` is the samples' own, or 1 at one place and 0 elsewhere. */
static double sample_y(const struct sample *sample, uint32_t only_place)
{
    return only_place == NONE ? sample->y : sample->place == only_place ? 1.0 : 0.0;
}

static void sum_sources(struct fit *fit, uint32_t without_place, uint32_t only_place)
{
    memset(fit->sources, 0, fit->n_sources * sizeof *fit->sources);
    for (uint32_t i = 0; i < fit->n_samples; i++) {
        const struct sample *sample = &fit->samples[i];
        struct source_sum *source = &fit->sources[sample->source];
        if (sample->place == without_place)
            continue;
        source->weight += sample->weight;
        source->x += sample->weight * sample->x;
        source->xx += sample->weight * sample->x * sample->x;
        source->y += sample->weight * sample_y(sample, only_place);
    }
    for (uint32_t s = 0; s < fit->n_sources; s++) {
        struct source_sum *source = &fit->sources[s];
        double weight = source->weight > 0.0 ? source->weight : 1.0;
        source->x /= weight;
        source->xx /= weight;
        source->y /= weight;
    }
}

/* Weighted least squares with a free level for each source and a ridge on the bend. False when the ranges
 * left are too much alike. */
static bool solve(struct fit *fit, uint32_t without_place, uint32_t only_place, struct line *out)
{
    double xx = 0, xq = 0, qq = 0, xy = 0, qy = 0, weight = 0, mean_x = 0, mean_q = 0, mean_y = 0;
    sum_sources(fit, without_place, only_place);
    for (uint32_t i = 0; i < fit->n_samples; i++) {
        const struct sample *sample = &fit->samples[i];
        const struct source_sum *source = &fit->sources[sample->source];
        if (sample->place == without_place)
            continue;
        double w = sample->weight, x = sample->x - source->x, q = sample->x * sample->x - source->xx;
        double y = sample_y(sample, only_place) - source->y;
        xx += w * x * x;
        xq += w * x * q;
        qq += w * q * q;
        xy += w * x * y;
        qy += w * q * y;
        weight += w;
        mean_x += w * source->x;
        mean_q += w * source->xx;
        mean_y += w * source->y;
    }
    if (!(xx > 1e-6 * weight))
        return false;
    double told = fmax(qq - xq * xq / xx, 0.0); /* what is left of the bend beside the slope */
    bool bends = isfinite(fit->ridge) && told + fit->ridge > 0.0;
    out->kept = bends ? told / (told + fit->ridge) : 0.0;
    out->bend = bends ? (qy - xq * xy / xx) / (told + fit->ridge) : 0.0;
    out->slope = (xy - xq * out->bend) / xx;
    out->level = (mean_y - out->slope * mean_x - out->bend * mean_q) / weight;
    return true;
}

static void find_residuals(struct fit *fit, const struct line *line)
{
    sum_sources(fit, NONE, NONE);
    for (uint32_t i = 0; i < fit->n_samples; i++) {
        struct sample *sample = &fit->samples[i];
        const struct source_sum *source = &fit->sources[sample->source];
        sample->residual = sample->y - source->y - line->slope * (sample->x - source->x) -
                           line->bend * (sample->x * sample->x - source->xx);
    }
}

/* From the median absolute residual, as the standard deviation of normal errors. */
static double find_scatter(struct fit *fit)
{
    for (uint32_t i = 0; i < fit->n_samples; i++)
        fit->sorted[i] = fabs(fit->samples[i].residual);
    qsort(fit->sorted, fit->n_samples, sizeof *fit->sorted, compare_doubles);
    double median = 0.5 * (fit->sorted[(fit->n_samples - 1) / 2] + fit->sorted[fit->n_samples / 2]);
    /* each free level takes a degree of freedom, and so does the slope */
    double free_points = fmax(1.0, (double)fit->n_samples - (double)fit->n_sources - 1.0);
    return MAD_TO_SPREAD * median * sqrt((double)fit->n_samples / free_points);
}

/* Robust weights of the straight law, and the scatter. */
static bool weigh(struct fit *fit, double *out_scatter_db)
{
    struct line line;
    fit->ridge = INFINITY;
    for (uint32_t round = 0; round < 2 * ROUNDS; round++) {
        if (!solve(fit, NONE, NONE, &line))
            return false;
        find_residuals(fit, &line);
        *out_scatter_db = find_scatter(fit);
        double least_db = fmax(1e-3 * *out_scatter_db, 1e-9),
               reach_db = fmax(BISQUARE_K * *out_scatter_db, 1e-6);
        for (uint32_t i = 0; i < fit->n_samples; i++) {
            double off = fabs(fit->samples[i].residual), part = off / reach_db;
            double inside = part < 1.0 ? 1.0 - part * part : 0.0;
            fit->samples[i].weight = round < ROUNDS ? least_db / fmax(off, least_db) : inside * inside;
        }
    }
    return true;
}

static void add_product(double variance[3][3], const double v[3], double weight)
{
    for (int i = 0; i < 3; i++)
        for (int k = 0; k < 3; k++)
            variance[i][k] += weight * v[i] * v[k];
}

/* Jackknife over places about the fit to all; false when a place cannot be spared. */
static bool jackknife(struct fit *fit, const struct line *all, double variance[3][3])
{
    double n = fit->n_places;
    for (uint32_t p = 0; p < fit->n_places; p++) {
        struct line without;
        if (!solve(fit, p, NONE, &without))
            return false;
        const double off[3] = {without.level - all->level, without.slope - all->slope,
                               without.bend - all->bend};
        add_product(variance, off, (n - 1.0) / n);
    }
    return true;
}

/* Few places: each off by its own prior error, and the scatter of the points, which says the rest. */
static void assume_places(struct fit *fit, double scatter_db, double variance[3][3])
{
    for (uint32_t p = 0; p < fit->n_places; p++) {
        struct line moved;
        if (!solve(fit, NONE, p, &moved))
            continue;
        double n = fit->place_n[p];
        const double by[3] = {moved.level, moved.slope, moved.bend};
        add_product(variance, by, PLACE_PRIOR_DB * PLACE_PRIOR_DB + scatter_db * scatter_db / n);
    }
}

/* What a bend of 1 that the fit does not see does to level and slope. */
static bool unseen_bend(struct fit *fit, double by[3])
{
    struct line as_straight;
    for (uint32_t i = 0; i < fit->n_samples; i++) {
        double x = fit->samples[i].x, y = fit->samples[i].y;
        fit->samples[i].y = x * x;
        fit->samples[i].residual = y;
    }
    double ridge = fit->ridge;
    fit->ridge = INFINITY;
    bool good = solve(fit, NONE, NONE, &as_straight);
    fit->ridge = ridge;
    for (uint32_t i = 0; i < fit->n_samples; i++)
        fit->samples[i].y = fit->samples[i].residual;
    by[0] = as_straight.level;
    by[1] = as_straight.slope;
    by[2] = -1.0;
    return good;
}

/* The law's variance with the fit's present ridge, and Student's quantile that goes with it. */
static bool find_variance(struct fit *fit, double scatter_db, struct line *line, double variance[3][3],
                          double *out_quantile)
{
    memset(variance, 0, 9 * sizeof variance[0][0]);
    if (!solve(fit, NONE, NONE, line))
        return false;
    if (fit->n_places >= PLACE_LEAST_PLACES && jackknife(fit, line, variance)) {
        *out_quantile = student_quantile(0.95, fit->n_places - 2.0 - line->kept);
        return true;
    }
    memset(variance, 0, 9 * sizeof variance[0][0]);
    assume_places(fit, scatter_db, variance);
    *out_quantile = student_quantile(0.95, INFINITY);
    return true;
}

enum status fit_get(struct fit *fit, struct fitted *out)
{
    struct fitted result = {.absorption_db_m = fit->absorption_db_m};
    struct line straight, bent;
    double variance[3][3], unseen[3], quantile;
    gather(fit);
    if (fit->n_samples < FIT_LEAST_POINTS)
        return STATUS_NOT_FOUND;
    double spread = spread_of_ranges(fit);
    if (!(spread >= log10(FIT_LEAST_RATIO * (1.0 - FIT_RATIO_TOLERANCE))))
        return STATUS_OUT_OF_RANGE;
    if (!weigh(fit, &result.scatter_db) ||
        !find_variance(fit, result.scatter_db, &straight, variance, &quantile))
        return STATUS_NOT_FOUND;
    double half = quantile * sqrt(variance[1][1]);
    result.n_db = -straight.slope;
    result.n_low_db = result.n_db - half;
    result.n_high_db = result.n_db + half;
    if (fit->n_places >= BEND_LEAST_PLACES)
        fit->ridge = result.scatter_db * result.scatter_db / (BEND_PRIOR_DB * BEND_PRIOR_DB);
    if (!unseen_bend(fit, unseen) ||
        !find_variance(fit, result.scatter_db, &bent, result.variance, &result.quantile))
        return STATUS_NOT_FOUND;
    add_product(result.variance, unseen, pow((1.0 - bent.kept) * BEND_PRIOR_DB, 2.0));
    result.slope_db = bent.slope;
    result.bend_db = bent.bend;
    result.level_db = bent.level - fit->absorption_db_m * FIT_REFERENCE_M;
    half = hypot(student_quantile(0.95, INFINITY) * result.scatter_db,
                 result.quantile * sqrt(result.variance[0][0]));
    result.level_low_db = result.level_db - half;
    result.level_high_db = result.level_db + half;
    find_reach(fit, &result);
    result.range_ratio = pow(10.0, spread);
    result.n_points = fit->n_samples;
    result.n_places = fit->n_places;
    *out = result;
    return STATUS_OK;
}
