/* Whether a chain of pulses is more than chance. */
#include "base/units.h"
#include "call/trains_inside.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

/* Pulses that compete with a chain: within its time all that are not its own; before, all of no train (a
 * train that was given is no chance). */
struct competitors { /* counted in competing[] */
    double time_s;   /* over which they were counted */
};

static uint32_t competing_step(double level_db)
{
    return (uint32_t)fmin(COMPETING_STEPS - 1, fmax(0, level_db / COMPETING_STEP_DB));
}

static struct competitors gather_competitors(struct trains *trains, uint32_t n)
{
    double end = trains_node(trains, trains->members[0])->time_s;
    double start = trains_node(trains, trains->members[n - 1])->time_s;
    double span = fmax(end - start, RATE_INTERVALS * trains->call_class.train.max_interval_s), reached = 0;
    struct competitors found = {0};
    uint32_t member = 0;
    const struct node *one = trains_node(trains, trains->members[0]);
    const struct node *other = trains_node(trains, trains->members[n / 2]);
    double least_db = INFINITY;
    for (uint32_t i = 0; i < n; i++)
        least_db = fmin(least_db, trains_node(trains, trains->members[i])->level_db - LEVEL_STEP_DB);
    memset(trains->competing, 0, sizeof trains->competing);
    for (uint64_t k = trains->n_pulses; k > 0 && trains_remember(trains, k - 1) && reached <= span; k--) {
        const struct node *node = trains_node(trains, k - 1);
        reached = end - node->time_s;
        bool within = node->time_s >= start;
        if (member < n && trains->members[member] == k - 1) {
            member++;
        } else if (node->owner != HIDDEN && reached <= span && (within || node->owner == 0) &&
                   node->level_db > least_db &&
                   (trains_may_be_one(node, one) || trains_may_be_one(node, other))) {
            trains->competing[competing_step(node->level_db)]++;
        }
    }
    for (uint32_t i = COMPETING_STEPS - 1; i > 0; i--)
        trains->competing[i - 1] += trains->competing[i];
    if (trains->n_pulses <= RING)
        reached = end; /* nothing is forgotten: the time before the first pulse was heard too */
    found.time_s = fmax(fmin(reached, span), trains->call_class.train.max_interval_s);
    return found;
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

/* The rate at which stray pulses compete with one of the chain's n: those that noise does not explain. A
 * chain picked out of many strays has taken some of them for its own, which is made good: the share that
 * strays have among all; and since they are counted over a short time, one more and a standard deviation are
 * added. */
static double competing_strays(const struct trains *trains, const struct node *node,
                               const struct competitors *found, uint32_t n)
{
    double limit_db = node->level_db - LEVEL_STEP_DB;
    double least_snr = units_power_ratio(trains->call_class.train.min_snr_db);
    double noise =
        fmin(trains_noise_rate(trains, least_snr), trains_noise_rate(trains, units_power_ratio(limit_db)));
    double around = trains->competing[competing_step(limit_db)];
    double excess = fmax(0, around - noise * found->time_s);
    return (excess * (1 + n / (around + n)) + 1 + sqrt(around)) / found->time_s;
}

/* The ratio of the chain is held against how often pulses such as its first come; of one that stands, the
 * earliest pulses may be chance that happened to lead to it, so it is given from where it stands best. */
uint32_t trains_find_certain(struct trains *trains, uint32_t n, uint32_t least)
{
    double rates = 0, best = 0, false_s = 3600 / trains->call_class.false_per_hour;
    double least_snr = units_power_ratio(trains->call_class.train.min_snr_db);
    struct competitors found = gather_competitors(trains, n);
    uint32_t surest = 0;
    bool whole = false;
    for (uint32_t i = 0; i < n; i++) {
        const struct node *node = trains_node(trains, trains->members[i]);
        double noise = noise_rate_competing(&trains->noise, node->pulse.snr, least_snr, LEVEL_DEVIATION_DB);
        double rate = competing_strays(trains, node, &found, n) + noise + RATE_FLOOR;
        if (i + 1 >= least && i > 0) {
            double over = walked_score(trains, i + 1) - rates - log(false_s * rate);
            whole = over > 0; /* at last, of all */
            if (over > best) {
                best = over;
                surest = i + 1;
            }
        }
        rates += log(rate);
    }
    return whole ? surest : 0;
}

bool trains_may_be_certain(const struct trains *trains, const struct node *node, const struct link *link)
{
    double steps = fmin(link->n, JUDGED_PULSES) - 1;
    double score = fmax(link->score[NARROW], link->score[WIDE]) * fmin(1, JUDGED_PULSES / (double)link->n);
    double within = (double)(trains->n_pulses - link->first) - link->n;
    double low_rate = within / (node->time_s - link->first_time_s) / 10 + RATE_FLOOR;
    return score - steps * log(low_rate) > log(3600 * low_rate / trains->call_class.false_per_hour);
}
