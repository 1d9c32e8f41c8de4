/* Exposure at other ranges than where it was heard: levels, distances, and what is left. See exposure.h. */
#include "base/time.h"
#include "base/units.h"
#include "level/exposure_inner.h"
#include "level/strikes.h"
#include <math.h>

#define STEP 1.25 /* of range, in the search for a distance */

/* A question about a criterion at a moment. */
struct question {
    struct exposure *exposure;
    const struct prepared *item;
    double flee_m_s;
    int64_t now_ns;
    double spreads; /* of the level to add */
};

double exposure_between_db(const struct exposure *exposure, uint32_t band, double from_m, double to_m,
                           double *out_spread_db)
{
    const struct exposure_loss *loss = &exposure->loss;
    double db = loss->n_db * log10(to_m / from_m);
    *out_spread_db = loss->n_spread_db * fabs(log10(to_m / from_m));
    if (loss->between)
        loss->between(loss->context, exposure->centre_hz[band], from_m, to_m, &db, out_spread_db);
    return db;
}

double exposure_loudest_db(const struct exposure *exposure, const struct prepared *item,
                           const struct loudest *loudest, double range_m, double *out_spread_db)
{
    double sum = 0, moved = 0, spread = 0;
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
        if (loudest->energy[b] > 0) {
            double spread_db;
            double t =
                units_power_ratio(-exposure_between_db(exposure, b, loudest->range_m, range_m, &spread_db));
            double part = loudest->energy[b] * t * (item->criterion.weighting ? item->factor[b] : 1);
            sum += loudest->energy[b];
            moved += part;
            spread += part * spread_db;
        }
    if (sum == 0)
        return loudest->level_db -
               exposure_between_db(exposure, BARE_BAND, loudest->range_m, range_m, out_spread_db);
    *out_spread_db = moved > 0 ? spread / moved : 0;
    return loudest->level_db + units_power_db(moved / sum);
}

/* Transmission of every band from the reference to a range. */
static void transmission(const struct exposure *exposure, double range_m, double t[LEVEL_MAX_BANDS])
{
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++) {
        double spread_db;
        t[b] =
            units_power_ratio(-exposure_between_db(exposure, b, exposure->reference_m, range_m, &spread_db));
    }
}

/* The same from the table, linear between its ranges: within 0.001 dB of N lg r. */
static void looked_up(const struct exposure *exposure, double range_m, double t[LEVEL_MAX_BANDS])
{
    double x = log10(range_m > EXPOSURE_NEAREST_M ? range_m : EXPOSURE_NEAREST_M) * TABLE_A_DECADE;
    double whole = fmin(floor(x), TABLE_N - 2), part = fmin(x - whole, 1);
    const double *row = &exposure->table[(size_t)whole * LEVEL_MAX_BANDS];
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
        t[b] = row[b] + part * (row[LEVEL_MAX_BANDS + b] - row[b]);
}

/* Energy that the receiver took from one bucket; 0 where its mean sound was below quiet_db. */
static double taken(const struct prepared *item, const struct bucket *bucket, const double *t,
                    double quiet_db)
{
    double energy = exposure_energy(item, bucket, t);
    return item->quiet >= 0 && energy / bucket->amount < units_power_ratio(quiet_db) ? 0 : energy;
}

/* Energy in the window of a receiver that stays at range_m, or flees from there. */
static double window_energy(const struct question *q, double range_m, double quiet_db)
{
    struct exposure *exposure = q->exposure;
    const struct prepared *item = q->item;
    double flee_m_s = q->flee_m_s;
    double t[LEVEL_MAX_BANDS], energy = 0;
    const struct bucket *sum = exposure_sum(exposure, item->criterion.window, true, q->now_ns);
    if (flee_m_s == 0)
        transmission(exposure, range_m, t);
    if (flee_m_s == 0 && item->quiet < 0)
        return exposure_energy(item, sum, t);
    struct window_span span = exposure_span(exposure, item->criterion.window, true, q->now_ns);
    for (int64_t i = span.from; i <= span.to; i++) {
        const struct bucket *bucket = buckets_find(span.buckets, i);
        if (!bucket)
            continue;
        double since_s = bucket->moment_s / bucket->energy - sum->first_s;
        if (flee_m_s > 0)
            looked_up(exposure, range_m + flee_m_s * (since_s > 0 ? since_s : 0), t);
        energy += taken(item, bucket, t, quiet_db);
    }
    return energy;
}

/* Spread of a level at range_m: the level's own, and the loss's since the sounds were heard. */
static double window_spread_db(const struct question *q, double range_m)
{
    struct exposure *exposure = q->exposure;
    const struct prepared *item = q->item;
    const struct bucket *sum = exposure_sum(exposure, item->criterion.window, true, q->now_ns);
    double heard_m = pow(10, sum->lg_range / sum->energy), weight = 0, spread = 0, spread_db;
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
        if (sum->band[b] > 0) {
            double db = exposure_between_db(exposure, b, exposure->reference_m, range_m, &spread_db);
            double part =
                sum->band[b] * units_power_ratio(-db) * (item->criterion.weighting ? item->factor[b] : 1);
            exposure_between_db(exposure, b, heard_m, range_m, &spread_db);
            weight += part;
            spread += part * spread_db;
        }
    if (weight > 0)
        return spread / weight;
    exposure_between_db(exposure, BARE_BAND, heard_m, range_m, &spread_db);
    return spread_db;
}

/* What the spread of levels and losses adds to a level at range_m. */
static double shift_db(const struct question *q, double loss_spread_db)
{
    return q->spreads * hypot(q->exposure->level_spread_db, loss_spread_db);
}

static double level_db(const struct question *q, double range_m)
{
    double loss_spread_db = 0;
    const struct criterion *c = &q->item->criterion;
    if (c->metric != METRIC_SEL_CUMULATIVE) {
        double db = exposure_loudest_db(q->exposure, q->item, &q->item->loudest, range_m, &loss_spread_db);
        return db + shift_db(q, loss_spread_db);
    }
    if (q->spreads != 0)
        loss_spread_db = window_spread_db(q, range_m);
    double shift = shift_db(q, loss_spread_db);
    return units_power_db(window_energy(q, range_m, c->quiet_db - shift)) + shift;
}

/* Where the sounds in question were heard. */
static double heard_m(const struct question *q)
{
    if (q->item->criterion.metric != METRIC_SEL_CUMULATIVE)
        return q->item->loudest.range_m;
    const struct bucket *sum = exposure_sum(q->exposure, q->item->criterion.window, true, q->now_ns);
    return pow(10, sum->lg_range / sum->energy);
}

static double distance_m(const struct question *q)
{
    double far_m = fmin(fmax(heard_m(q), EXPOSURE_NEAREST_M), EXPOSURE_FARTHEST_M), near_m = far_m;
    double value = q->item->criterion.value;
    if (level_db(q, far_m) >= value) {
        while (level_db(q, far_m) >= value) {
            near_m = far_m;
            far_m *= STEP;
            if (far_m > EXPOSURE_FARTHEST_M)
                return INFINITY;
        }
    } else {
        while (level_db(q, near_m) < value) {
            far_m = near_m;
            if (near_m <= EXPOSURE_NEAREST_M)
                return 0;
            near_m = fmax(near_m / STEP, EXPOSURE_NEAREST_M);
        }
    }
    for (int i = 0; i < 16; i++) { /* to 3e-6 of the range */
        double middle_m = sqrt(near_m * far_m);
        if (level_db(q, middle_m) >= value)
            near_m = middle_m;
        else
            far_m = middle_m;
    }
    return sqrt(near_m * far_m);
}

static void fill_table(struct exposure *exposure)
{
    for (uint32_t k = 0; k < TABLE_N; k++)
        for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++) {
            double spread_db, range_m = pow(10, (double)k / TABLE_A_DECADE);
            exposure->table[k * LEVEL_MAX_BANDS + b] = units_power_ratio(
                -exposure_between_db(exposure, b, exposure->reference_m, range_m, &spread_db));
        }
    exposure->table_ready = true;
}

/* Whether the question has an answer. */
static enum status check(struct exposure *exposure, uint32_t criterion, double range_m, double flee_m_s,
                         int64_t now_ns, struct question *out)
{
    if (criterion >= exposure->n || !(range_m >= EXPOSURE_NEAREST_M && range_m <= EXPOSURE_FARTHEST_M) ||
        !(flee_m_s >= 0 && flee_m_s <= 20))
        return STATUS_BAD_ARGUMENT;
    const struct prepared *item = &exposure->items[criterion];
    const struct criterion *c = &item->criterion;
    *out = (struct question){exposure, item, flee_m_s, now_ns, 0};
    if (!criterion_applies(c, exposure->sound) || c->metric == METRIC_POSITIVE_IMPULSE)
        return STATUS_NOT_FOUND;
    if (flee_m_s > 0 && !exposure->table_ready)
        fill_table(exposure);
    if (c->metric != METRIC_SEL_CUMULATIVE)
        return isfinite(item->loudest.placed_db) ? STATUS_OK : STATUS_NOT_FOUND;
    const struct bucket *sum = exposure_sum(exposure, c->window, true, now_ns);
    return sum->n > (c->weighting ? sum->n_unweighted : 0) ? STATUS_OK : STATUS_NOT_FOUND;
}

enum status exposure_get_at(struct exposure *exposure, uint32_t criterion, double range_m, double flee_m_s,
                            int64_t now_ns, struct exposure_level *out)
{
    struct question q;
    enum status status = check(exposure, criterion, range_m, flee_m_s, now_ns, &q);
    if (status != STATUS_OK)
        return status;
    out->level_db = level_db(&q, range_m);
    q.spreads = -EXPOSURE_SPREADS;
    out->low_db = level_db(&q, range_m);
    q.spreads = EXPOSURE_SPREADS;
    out->high_db = level_db(&q, range_m);
    return STATUS_OK;
}

enum status exposure_get_distance(struct exposure *exposure, uint32_t criterion, double flee_m_s,
                                  int64_t now_ns, struct exposure_distance *out)
{
    struct question q;
    enum status status = check(exposure, criterion, EXPOSURE_NEAREST_M, flee_m_s, now_ns, &q);
    if (status != STATUS_OK)
        return status;
    out->distance_m = distance_m(&q);
    q.spreads = -EXPOSURE_SPREADS;
    out->low_m = distance_m(&q);
    q.spreads = EXPOSURE_SPREADS;
    out->high_m = distance_m(&q);
    return STATUS_OK;
}

/* Sounds like `mean` (one of them, at the reference) until a budget of energy is used up. */
static uint32_t count_left(const struct question *q, const struct bucket *mean, double budget, double range_m,
                           double quiet_db, double swum_s, double interval_s)
{
    double t[LEVEL_MAX_BANDS];
    if (q->flee_m_s == 0) {
        transmission(q->exposure, range_m, t);
        double one = taken(q->item, mean, t, quiet_db);
        double left = budget <= 0 ? 0
                      : one > 0   ? strikes_possible(units_power_db(one), units_power_db(budget))
                                  : INFINITY;
        return left < EXPOSURE_MOST_LEFT ? (uint32_t)left : EXPOSURE_MOST_LEFT;
    }
    for (uint32_t i = 0; i < EXPOSURE_MOST_LEFT; i++) {
        double at_m = range_m + q->flee_m_s * (swum_s + (i + 1) * interval_s);
        if (at_m >= EXPOSURE_FARTHEST_M)
            return EXPOSURE_MOST_LEFT;
        looked_up(q->exposure, at_m, t);
        budget -= taken(q->item, mean, t, quiet_db);
        if (budget <= 0)
            return i;
    }
    return EXPOSURE_MOST_LEFT;
}

/* The mean of the last sounds, and how far apart they came. */
static void mean_recent(const struct exposure *exposure, struct bucket *mean, double *interval_s)
{
    int64_t first_ns = INT64_MAX, last_ns = INT64_MIN;
    *mean = (struct bucket){.n = 0};
    for (uint32_t i = 0; i < exposure->n_recent; i++) {
        bucket_add(mean, &exposure->recent[i]);
        first_ns = exposure->recent_ns[i] < first_ns ? exposure->recent_ns[i] : first_ns;
        last_ns = exposure->recent_ns[i] > last_ns ? exposure->recent_ns[i] : last_ns;
    }
    *interval_s = exposure->n_recent > 1 ? time_to_s(last_ns - first_ns) / (exposure->n_recent - 1) : 0;
    if (exposure->sound == SOUND_CONTINUOUS)
        *interval_s = 1;
    mean->energy /= mean->amount;
    for (uint32_t b = 0; b < LEVEL_MAX_BANDS; b++)
        mean->band[b] /= mean->amount;
    mean->amount = 1;
}

enum status exposure_get_left(struct exposure *exposure, uint32_t criterion, double range_m, double flee_m_s,
                              int64_t now_ns, struct exposure_left *out)
{
    struct question q;
    enum status status = check(exposure, criterion, range_m, flee_m_s, now_ns, &q);
    if (status != STATUS_OK)
        return status;
    if (q.item->criterion.metric != METRIC_SEL_CUMULATIVE || exposure->n_recent == 0)
        return STATUS_NOT_FOUND;
    struct bucket mean;
    double interval_s;
    mean_recent(exposure, &mean, &interval_s);
    const struct bucket *sum = exposure_sum(exposure, q.item->criterion.window, true, now_ns);
    struct window_span span = exposure_span(exposure, q.item->criterion.window, true, now_ns);
    int64_t moment_ns = now_ns > exposure->latest_ns ? now_ns : exposure->latest_ns;
    double swum_s = buckets_seconds(span.buckets, moment_ns) - sum->first_s;
    const struct criterion *c = &q.item->criterion;
    double loss_spread_db = window_spread_db(&q, range_m);
    uint32_t left[3];
    for (int k = 0; k < 3; k++) { /* a level that is higher by d is a criterion that is lower by d */
        q.spreads = (k - 1) * EXPOSURE_SPREADS;
        double shift = shift_db(&q, loss_spread_db), quiet_db = c->quiet_db - shift;
        double budget = units_power_ratio(c->value - shift) - window_energy(&q, range_m, quiet_db);
        left[k] = count_left(&q, &mean, budget, range_m, quiet_db, swum_s, interval_s);
    }
    *out = (struct exposure_left){.left = left[1], .low = left[2], .high = left[0]};
    return STATUS_OK;
}
