/* Which sounds count now: windows, and what has been received in them. See exposure.h. */
#include "base/time.h"
#include "base/units.h"
#include "level/exposure_inner.h"
#include <math.h>

static int64_t later(int64_t a, int64_t b)
{
    return a > b ? a : b;
}

static int64_t day_start_ns(const struct exposure *exposure, int64_t now_ns)
{
    double days = floor(time_to_s(now_ns - exposure->day_start_ns) / DAY_S);
    return exposure->day_start_ns + (int64_t)days * (int64_t)DAY_S * TIME_NS_PER_S;
}

struct window_span exposure_span(const struct exposure *exposure, enum criterion_window window, bool placed,
                                 int64_t now_ns)
{
    struct window_span span = {.buckets = placed ? &exposure->placed_ring : &exposure->received_ring};
    now_ns = later(now_ns, exposure->latest_ns);
    if (window == ACCUMULATE_DAY || window == ACCUMULATE_24_H) {
        int64_t start_ns = window == ACCUMULATE_DAY ? day_start_ns(exposure, now_ns)
                                                    : now_ns - (int64_t)DAY_S * TIME_NS_PER_S;
        span.from = buckets_index(span.buckets, start_ns);
        span.to = buckets_index(span.buckets, now_ns);
    } else {
        span.buckets = placed ? &exposure->placed_job : NULL;
        span.to = placed ? (int64_t)exposure->placed_job.n - 1 : 0;
    }
    return span;
}

const struct bucket *exposure_sum(struct exposure *exposure, enum criterion_window window, bool placed,
                                  int64_t now_ns)
{
    struct window_span span = exposure_span(exposure, window, placed, now_ns);
    if (!span.buckets)
        return &exposure->received_job;
    struct window_sum *kept = placed ? &exposure->placed_sums[window] : &exposure->received_sums[window];
    if (kept->valid && kept->pushes == exposure->pushes && kept->from == span.from && kept->to == span.to)
        return &kept->sum;
    *kept = (struct window_sum){.valid = true, .pushes = exposure->pushes, .from = span.from, .to = span.to};
    for (int64_t i = span.from; i <= span.to; i++) {
        const struct bucket *bucket = buckets_find(span.buckets, i);
        if (bucket)
            bucket_add(&kept->sum, bucket);
    }
    return &kept->sum;
}

double exposure_energy(const struct prepared *item, const struct bucket *bucket, const double *t)
{
    double sum = 0, moved = 0;
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++) {
        sum += bucket->band[b];
        moved += bucket->band[b] * (item->criterion.weighting ? item->factor[b] : 1) * (t ? t[b] : 1);
    }
    if (item->criterion.weighting)
        return moved;
    return sum > 0 ? bucket->energy * (moved / sum) : bucket->energy * (t ? t[BARE_BAND] : 1);
}

/* When sounds next leave the window because time goes on. */
static int64_t resets_ns(struct exposure *exposure, enum criterion_window window, const struct bucket *sum,
                         int64_t now_ns)
{
    int64_t day_ns = (int64_t)DAY_S * TIME_NS_PER_S;
    if (window == ACCUMULATE_DAY)
        return day_start_ns(exposure, later(now_ns, exposure->latest_ns)) + day_ns;
    if (window != ACCUMULATE_24_H || sum->n == 0)
        return -1;
    const struct buckets *ring = &exposure->received_ring;
    int64_t first = buckets_index(ring, exposure->day_start_ns + time_from_s(sum->first_s));
    return exposure->day_start_ns + (first + 1) * time_from_s(RECEIVED_WIDTH_S) + day_ns;
}

static void fill_counts(struct exposure *exposure, const struct prepared *item, int64_t now_ns,
                        struct exposure_state *out)
{
    enum criterion_window window = item->criterion.window;
    const struct bucket *sum = exposure_sum(exposure, window, false, now_ns);
    bool job = window != ACCUMULATE_DAY && window != ACCUMULATE_24_H;
    out->n = sum->n;
    out->n_quiet = item->quiet >= 0 ? sum->n_quiet[item->quiet] : 0;
    out->n_unweighted = sum->n_unweighted;
    out->n_clipped = sum->n_clipped;
    out->n_without_range = sum->n_without_range;
    out->top_band = sum->n ? sum->top_band : LEVEL_FIRST_BAND - 1;
    out->first_ns = sum->n == 0 ? -1
                    : job       ? exposure->job_first_ns
                                : exposure->day_start_ns + time_from_s(sum->first_s);
    out->resets_ns = resets_ns(exposure, window, sum, now_ns);
    out->latest_db = item->latest_db;
}

enum status exposure_get(struct exposure *exposure, uint32_t criterion, int64_t now_ns,
                         struct exposure_state *out)
{
    if (criterion >= exposure->n)
        return STATUS_BAD_ARGUMENT;
    const struct prepared *item = &exposure->items[criterion];
    const struct criterion *c = &item->criterion;
    if (!criterion_applies(c, exposure->sound))
        return STATUS_NOT_FOUND;
    struct exposure_state state = {.at_reference_db = NAN};
    fill_counts(exposure, item, now_ns, &state);
    struct exposure_level placed;
    if (c->metric == METRIC_SEL_CUMULATIVE) {
        const struct bucket *sum = exposure_sum(exposure, c->window, false, now_ns);
        state.level_db =
            units_power_db(item->quiet >= 0 ? sum->quiet[item->quiet] : exposure_energy(item, sum, NULL));
    } else
        state.level_db = item->loudest.received_db;
    if (c->metric != METRIC_POSITIVE_IMPULSE)
        state.at_reference_db =
            exposure_get_at(exposure, criterion, exposure->reference_m, 0, now_ns, &placed) == STATUS_OK
                ? placed.level_db
                : -INFINITY;
    state.reached = state.level_db >= c->value;
    *out = state;
    return STATUS_OK;
}
