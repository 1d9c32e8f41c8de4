/* Whether a chain of pulses is more than chance. */
#include "base/units.h"
#include "call/trains_inside.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

int trains_compare_doubles(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Levels of the pulses that compete with the chain in members[0..n), sorted, into sorted[]: of no train, not
 * its own, near it in time. Gives their number and the time over which they were counted. */
static uint32_t gather_strays(struct trains *trains, uint32_t n, double *out_span_s)
{
    double end = trains_node(trains, trains->members[0])->time_s;
    double start = trains_node(trains, trains->members[n - 1])->time_s;
    double span = fmax(end - start, RATE_INTERVALS * trains->call_class.train.max_interval_s), reached = 0;
    uint32_t strays = 0, member = 0;
    for (uint64_t k = trains->n_pulses; k > 0 && trains_remember(trains, k - 1) && reached <= span; k--) {
        const struct node *node = trains_node(trains, k - 1);
        reached = end - node->time_s;
        if (member < n && trains->members[member] == k - 1)
            member++;
        else if (node->owner != HIDDEN && reached <= span)
            trains->sorted[strays++] = node->level_db;
    }
    qsort(trains->sorted, strays, sizeof *trains->sorted, trains_compare_doubles);
    if (trains->n_pulses <= RING)
        reached = end; /* nothing is forgotten: the time before the first pulse was heard too */
    *out_span_s = fmax(fmin(reached, span), trains->call_class.train.max_interval_s);
    return strays;
}

/* How many of the n sorted values are above a limit. */
static uint32_t count_above(const double *sorted, uint32_t n, double limit)
{
    uint32_t low = 0, high = n;
    while (low < high) {
        uint32_t middle = (low + high) / 2;
        if (sorted[middle] > limit)
            high = middle;
        else
            low = middle + 1;
    }
    return n - low;
}

/* Score of the chain in members[0..n) as if it began there, however long it is, for the better of the two
 * spreads (each has even odds). */
static double walked_score(const struct trains *trains, uint32_t n)
{
    const struct link *last = &trains_node(trains, trains->members[0])->links[trains->chain_link[0]];
    double score[2] = {last->score[NARROW], last->score[WIDE]};
    if (trains->chain_link[n - 1] != UINT32_MAX) {
        const struct link *first =
            &trains_node(trains, trains->members[n - 2])->links[trains->chain_link[n - 2]];
        for (int spread = NARROW; spread <= WIDE; spread++)
            score[spread] -= first->score[spread] + first->ln_interval + trains->ln_range;
    }
    return fmax(score[NARROW], score[WIDE]) - log(2);
}

/* The rate of noise pulses that compete with one of this snr. Its level speaks against noise, of which ever
 * fewer reach it, as far as the spread of a train's own levels lets it: the rate per dB there, over that
 * spread; or all of the noise's pulses where that is less. Twice, for the choice between the two. */
static double competing_noise(const struct trains *trains, double snr)
{
    const double step_db = 0.25;
    double rate = trains_noise_rate(trains, snr),
           next = trains_noise_rate(trains, snr * units_power_ratio(step_db));
    double per_db = log(rate / fmax(next, 1e-300)) / step_db;
    return fmin(trains->all_noise, rate * per_db * LEVEL_DEVIATION_DB * sqrt(2 * M_PI));
}

/* The rate at which stray pulses compete with one, given the n_strays levels in sorted[], counted over
 * span_s, and the chain's n pulses: those that noise does not explain. A chain picked out of many strays has
 * taken some of them for its own, which is made good: the share that strays have among all; and since they
 * are counted over a short time, one more and a standard deviation are added. */
static double competing_strays(const struct trains *trains, const struct node *node, uint32_t n_strays,
                               double span_s, uint32_t n)
{
    double limit_db = node->level_db - LEVEL_STEP_DB;
    double strays = count_above(trains->sorted, n_strays, limit_db);
    double noise = fmin(trains->all_noise, trains_noise_rate(trains, units_power_ratio(limit_db))) * span_s;
    double excess = fmax(0, strays - noise);
    return (excess * (1 + n / (strays + n)) + 1 + sqrt(strays)) / span_s;
}

/* Whether the chain in members[0..n) is more than chance. */
bool trains_are_certain(struct trains *trains, uint32_t n)
{
    double span_s, ratio = walked_score(trains, n), first = 0;
    uint32_t n_strays = gather_strays(trains, n, &span_s);
    for (uint32_t i = 0; i < n; i++) {
        const struct node *node = trains_node(trains, trains->members[i]);
        double rate = competing_strays(trains, node, n_strays, span_s, n) +
                      competing_noise(trains, node->snr) + RATE_FLOOR;
        if (i + 1 < n)
            ratio -= log(rate);
        else
            first = rate;
    }
    return ratio > log(3600 * first / trains->call_class.false_per_hour);
}

double trains_running_strays(const struct trains *trains, const struct node *node, const struct link *link)
{
    double memory_s = RATE_INTERVALS * trains->call_class.train.max_interval_s;
    double own = fmin(link->n / memory_s, exp(-link->ln_interval));
    return fmax(0, trains->rate_above[trains_level_index(node)] - own) +
           trains_noise_rate(trains, node->snr) + RATE_FLOOR;
}

bool trains_may_be_certain(const struct trains *trains, const struct node *node, const struct link *link)
{
    double steps = fmin(link->n, JUDGED_PULSES) - 1;
    double score = fmax(link->score[NARROW], link->score[WIDE]) * fmin(1, JUDGED_PULSES / (double)link->n);
    double low_rate = fmax(0, trains_running_strays(trains, node, link) - trains->all_noise) / 3 + RATE_FLOOR;
    return score - steps * log(low_rate) > log(3600 * low_rate / trains->call_class.false_per_hour);
}
