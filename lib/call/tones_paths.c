/* The recursion of the tracer and its paths; see tones_trace.h. */
#include "call/tones_field.h"
#include <math.h>
#include <string.h>

/* What a step costs: about the negative log-probability of ending so many bins from where the slope points.
 * Over all whole steps exp(-cost) sums to 1.15 where Ville's inequality wants 1: found better on weak
 * whistles, and paid for in the measured part of the threshold (BOUND_CAUTION in tones.c). */
#define STEP_COST 0.45F
#define STEP_COST_BIN 1.2F
#define STEP_COST_MOST 3.6F
#define GAP_COST 12.0F    /* fall of the score that ends a path: a gap of about 8 frames */
#define PIECE_SWEEPS 0.03 /* of its frequency: what is too long for a call, and yet no line */
#define REMAINS 0.5       /* of its power after its end: it has not ended */
#define REFUTED 6.0F      /* 1 in 400 */
#define SLOPE_GAIN 0.35F  /* how fast the slope follows */

typedef int8_t wide_bytes __attribute__((vector_size(WIDE_LANES)));
typedef int8_t all_bytes __attribute__((vector_size(4 * WIDE_LANES)));

/* Whole numbers that a byte can hold, as bytes. */
static inline void store_steps(int8_t *to, const wide_mask *steps)
{
    const all_bytes bytes = (all_bytes)*steps;
#if __BYTE_ORDER__ == __ORDER_LITTLE_ENDIAN__
    const wide_bytes low = __builtin_shufflevector(bytes, bytes, 0, 4, 8, 12, 16, 20, 24, 28);
#else
    const wide_bytes low = __builtin_shufflevector(bytes, bytes, 3, 7, 11, 15, 19, 23, 27, 31);
#endif
    memcpy(to, &low, sizeof low);
}

/* The best path that leads to each of eight cells, from at most max_step bins away: a constant where this is
 * used, so that the steps are written out. */
static inline __attribute__((always_inline)) void
best_of(const struct cells *before, uint32_t k, int max_step, wide_lanes *out_best, wide_mask *out_steps)
{
    const wide_lanes most = WIDE_ALL(STEP_COST_MOST);
    wide_lanes best = {0}, score, slope;
    wide_mask chosen = (wide_mask){0} + STEP_START;
#pragma GCC unroll 9
    for (int d = -max_step; d <= max_step; d++) {
        wide_load(&score, before->score + (int)(MAX_STEP + k) - d);
        wide_load(&slope, before->slope + (int)(MAX_STEP + k) - d);
        const wide_lanes turn = (float)d - slope;
        wide_lanes cost = STEP_COST + STEP_COST_BIN * WIDE_SIZE(turn);
        cost = WIDE_CHOOSE(cost < most, cost, most);
        const wide_lanes candidate = score - cost;
        const wide_mask better = candidate > best;
        chosen = (better & d) | (~better & chosen);
        best = WIDE_CHOOSE(better, candidate, best);
    }
    *out_best = best;
    *out_steps = chosen;
}

/* The best path that leads to each cell, 0 where it is better to begin there, and the score with the cell's
 * own gain. Cells begin paths, but for those that go on from another. */
LANES_WIDE static void find_best(struct tracer *tracer, const float *snrs, int8_t *out_steps,
                                 float *out_scores)
{
    const wide_lanes none = {0};
    const float ceiling = (float)tracer->setup.ceiling;
    struct cells *now = &tracer->now;
    const struct cells *before = &tracer->before;
    for (uint32_t k = 0; k < tracer->n_bins; k += WIDE_LANES) {
        wide_lanes best, gain, snr;
        wide_mask steps;
        if (tracer->max_step == 2)
            best_of(before, k, 2, &best, &steps);
        else if (tracer->max_step == 3)
            best_of(before, k, 3, &best, &steps);
        else if (tracer->max_step == 4)
            best_of(before, k, 4, &best, &steps);
        else
            best_of(before, k, (int)tracer->max_step, &best, &steps);
        wide_store(tracer->best + k, &best);
        store_steps(out_steps + k, &steps);
        wide_load(&gain, tracer->gain + k);
        best = WIDE_CHOOSE(best < ceiling, best, WIDE_ALL(ceiling)) + gain;
        best = WIDE_CHOOSE(best > none, best, none);
        wide_store(out_scores + k, &best);
        wide_load(&snr, snrs + k);
        wide_store(now->slope + k + MAX_STEP, &none);
        wide_store(now->level + k + MAX_STEP, &snr);
        wide_store(now->peak + k + MAX_STEP, &snr);
    }
    uint64_t *first = now->first + MAX_STEP;
    const uint64_t frame = tracer->frame;
    const uint32_t n = tracer->stride;
    for (uint32_t k = 0; k < n; k++)
        first[k] = frame;
}

static void inherit_cell(struct tracer *tracer, uint32_t at, int step, float snr)
{
    struct cells *now = &tracer->now;
    const struct cells *before = &tracer->before;
    const uint32_t from = (uint32_t)((int)at - step);
    const float peak = before->peak[from] * tracer->tail_fall;
    now->slope[at] = before->slope[from] + SLOPE_GAIN * ((float)step - before->slope[from]);
    const float most = GROWTH * before->level[from];
    const float heard = snr > NOT_HEARD ? snr : before->level[from];
    now->level[at] = before->level[from] + SMOOTHING * ((heard < most ? heard : most) - before->level[from]);
    now->peak[at] = now->level[at] > peak ? now->level[at] : peak;
    now->path[at] = before->path[from];
    now->first[at] = before->first[from];
}

/* A cell that goes on from another, and what it says of the path that runs there. */
static void step_cell(struct tracer *tracer, uint32_t k, int step, float snr, float ceiling)
{
    const uint32_t at = k + MAX_STEP;
    if (snr > NOT_HEARD && tracer->gain[k] > FLANK_GAIN &&
        snr < TAIL_SHARE * tracer->before.peak[(uint32_t)((int)at - step)]) {
        const float score = (tracer->best[k] < ceiling ? tracer->best[k] : ceiling) + FLANK_GAIN;
        tracer->now.score[at] = score > 0 ? score : 0;
        if (score <= 0)
            return;
    }
    inherit_cell(tracer, at, step, snr);
    if (tracer->now.path[at] == NO_PATH)
        return;
    struct path *path = &tracer->paths[tracer->now.path[at]];
    tracer->tail[k] = TAIL_SHARE;
    if (tracer->now.score[at] > path->tip) {
        path->tip = tracer->now.score[at];
        path->tip_bin = k;
    }
}

/* A path has one course: what leads elsewhere and is so much less likely than where the path stands is no
 * part of it. There another may begin, which would else be taken for the rest of this one. */
static void refute_cell(struct tracer *tracer, uint32_t k, float snr)
{
    struct cells *now = &tracer->now;
    const uint32_t at = k + MAX_STEP;
    if (now->path[at] == NO_PATH || now->score[at] >= tracer->paths[now->path[at]].tip - REFUTED)
        return;
    now->path[at] = NO_PATH;
    now->score[at] = tracer->gain[k] > 0 ? tracer->gain[k] : 0;
    now->slope[at] = 0;
    now->level[at] = now->peak[at] = snr > NOT_HEARD ? snr : 0;
    now->first[at] = tracer->frame;
    tracer->tail[k] = 0;
    tracer->history_step[(size_t)tracer_row(tracer, tracer->frame) * tracer->stride + k] = STEP_START;
}

static void forget_tips(struct tracer *tracer)
{
    while (tracer->n_paths > 0 && !tracer->paths[tracer->n_paths - 1].open)
        tracer->n_paths--;
    for (uint32_t i = 0; i < tracer->n_paths; i++)
        tracer->paths[i].tip = 0;
}

static void step_cells(struct tracer *tracer)
{
    const float ceiling = (float)tracer->setup.ceiling;
    float *scores = tracer->now.score + MAX_STEP;
    const size_t row = (size_t)tracer_row(tracer, tracer->frame) * tracer->stride;
    const float *snrs = tracer->history_snr + row;
    int8_t *steps = tracer->history_step + row;
    find_best(tracer, snrs, steps, scores);
    for (uint32_t k = tracer->n_bins; k < tracer->stride; k++)
        scores[k] = 0; /* beyond the band nothing runs */
    memset(tracer->now.path, 0xff, (tracer->stride + 2 * MAX_STEP) * sizeof *tracer->now.path); /* NO_PATH */
    memset(tracer->tail, 0, tracer->stride * sizeof *tracer->tail);
    forget_tips(tracer);
    for (uint32_t k = 0; k < tracer->n_bins; k += TILE) {
        const lanes going = lanes_least(lanes_load(scores + k), lanes_load(tracer->best + k));
        for (uint32_t bits = lanes_bits(going > lanes_all(0)); bits; bits &= bits - 1) {
            const uint32_t at = k + (uint32_t)__builtin_ctz(bits);
            step_cell(tracer, at, steps[at], snrs[at], ceiling);
        }
    }
    for (uint32_t k = 0; k < tracer->n_bins && tracer->n_paths > 0; k += TILE) {
        uint64_t paths;
        memcpy(&paths, tracer->now.path + MAX_STEP + k, sizeof paths);
        if (paths == UINT64_MAX)
            continue; /* all of them NO_PATH */
        for (uint32_t j = k; j < k + TILE && j < tracer->n_bins; j++)
            refute_cell(tracer, j, snrs[j]);
    }
}

/* Nothing may go on from the cells of a path that has ended. */
static void clear_path(struct tracer *tracer, uint32_t i)
{
    for (uint32_t at = MAX_STEP; at < tracer->n_bins + MAX_STEP; at++)
        if (tracer->now.path[at] == (int)i) {
            tracer->now.path[at] = NO_PATH;
            tracer->now.score[at] = tracer->now.slope[at] = 0;
        }
    tracer->paths[i].open = false;
}

/* A line is learned at once: its cells' mean power becomes the background there. */
static void learn_line(struct tracer *tracer, const struct contour *contour)
{
    for (uint32_t i = 0; i < TRACE_POINTS; i++) {
        int bin = (int)lround(contour->hz[i] / tracer->bin_hz) - (int)tracer->first_bin;
        for (int k = bin - 2; k <= bin + 2; k++)
            if (k >= 0 && k < (int)tracer->n_bins)
                background_raise(tracer->background, (uint32_t)k, tracer->smooth[k]);
    }
}

static void end_path(struct tracer *tracer, uint32_t i, enum trace_end end, const struct trace_sink *sink)
{
    struct contour contour;
    contour_trace(tracer, &tracer->paths[i], true, &contour);
    const bool flat = contour_is_flat(&contour) || contour_settles(&contour);
    const bool sweeps = fabs(contour.sweep_hz) > PIECE_SWEEPS * contour.high_hz;
    if (end == TRACE_STEADY_LINE && sweeps && !flat)
        end = TRACE_CONTOUR; /* a piece of what is too long */
    if (flat && contour.remains > REMAINS)
        end = TRACE_STEADY_LINE; /* the background has come up to it; the tone has not ended */
    if (end == TRACE_STEADY_LINE)
        learn_line(tracer, &contour);
    clear_path(tracer, i);
    sink->take(sink->context, end, &contour);
}

static void follow_paths(struct tracer *tracer, const struct trace_sink *sink)
{
    const float ceiling = (float)tracer->setup.ceiling;
    const double max_frames = tracer->setup.max_s * tracer->frame_rate - 2;
    const float *snrs = tracer->history_snr + (size_t)tracer_row(tracer, tracer->frame) * tracer->stride;
    for (uint32_t i = 0; i < tracer->n_paths; i++) {
        struct path *path = &tracer->paths[i];
        if (!path->open)
            continue;
        float tip = path->tip < ceiling ? path->tip : ceiling;
        path->n_unheard += snrs[path->tip_bin] <= NOT_HEARD && path->n_unheard < tracer->max_unheard;
        if (tip >= path->best) {
            path->best = tip;
            path->last_rise = tracer->frame;
            path->n_unheard = 0;
            path->best_bin = path->tip_bin;
        }
        if ((double)(path->last_rise - path->first) > max_frames)
            end_path(tracer, i, TRACE_STEADY_LINE, sink);
        else if (tip <= path->best - GAP_COST ||
                 tracer->frame - path->last_rise >= tracer->gap + path->n_unheard)
            end_path(tracer, i, TRACE_CONTOUR, sink);
    }
}

static uint32_t bins_apart(uint32_t a, uint32_t b)
{
    return a > b ? a - b : b - a;
}

/* What began in the same frame, and is no further away than it could have come since, is a branch of the path
 * in bin k. */
static void claim_branches(struct tracer *tracer, uint32_t k, int16_t path)
{
    struct cells *now = &tracer->now;
    const uint64_t first = now->first[k + MAX_STEP];
    const uint64_t reach = (tracer->frame - first) * tracer->max_step;
    for (uint32_t i = 0; i < tracer->n_bins; i++) {
        const uint32_t at = i + MAX_STEP;
        if (now->path[at] == NO_PATH && now->score[at] > 0 && now->first[at] == first &&
            bins_apart(i, k) <= reach)
            now->path[at] = path;
    }
}

/* A cell whose score has reached the threshold and is the highest around begins a path, unless one is there
 * already: then it is the flank of that one. */
static void open_path(struct tracer *tracer, uint32_t k, const struct trace_sink *sink)
{
    struct cells *now = &tracer->now;
    const uint32_t at = k + MAX_STEP;
    for (uint32_t near = at - 3; near <= at + 3; near++)
        if (now->path[near] != NO_PATH && now->score[near] > 0) {
            now->path[at] = now->path[near];
            return;
        }
    for (uint32_t i = 0; i < MAX_PATHS; i++) {
        struct path *path = &tracer->paths[i];
        if (path->open)
            continue;
        float ceiling = (float)tracer->setup.ceiling;
        float best = now->score[at] < ceiling ? now->score[at] : ceiling;
        *path = (struct path){.open = true,
                              .best = best,
                              .first = now->first[at],
                              .last_rise = tracer->frame,
                              .best_bin = k,
                              .tip = now->score[at],
                              .tip_bin = k};
        claim_branches(tracer, k, (int16_t)i);
        now->path[at] = (int16_t)i;
        tracer->n_paths = i < tracer->n_paths ? tracer->n_paths : i + 1;
        return;
    }
    now->score[at] = 0;
    sink->take(sink->context, TRACE_TOO_MANY, NULL);
}

static void open_paths(struct tracer *tracer, const struct trace_sink *sink)
{
    const float *score = tracer->now.score;
    const lanes threshold = lanes_all((float)tracer->setup.threshold);
    for (uint32_t k = 0; k < tracer->n_bins; k++) {
        const uint32_t at = k + MAX_STEP;
        if (k % TILE == 0 && !lanes_any(lanes_load(score + at) >= threshold)) {
            k += TILE - 1;
            continue;
        }
        if (tracer->now.path[at] == NO_PATH && score[at] >= (float)tracer->setup.threshold &&
            score[at] >= score[at - 1] && score[at] > score[at + 1])
            open_path(tracer, k, sink);
    }
}

void paths_advance(struct tracer *tracer, const struct trace_sink *sink)
{
    step_cells(tracer);
    follow_paths(tracer, sink);
    open_paths(tracer, sink);
    struct cells swap = tracer->before;
    tracer->before = tracer->now;
    tracer->now = swap;
}

void paths_end(struct tracer *tracer, const struct trace_sink *sink)
{
    for (uint32_t i = 0; i < MAX_PATHS; i++)
        if (tracer->paths[i].open)
            end_path(tracer, i, TRACE_CONTOUR, sink);
    memset(tracer->before.score, 0, (tracer->n_bins + 2 * MAX_STEP) * sizeof *tracer->before.score);
}
