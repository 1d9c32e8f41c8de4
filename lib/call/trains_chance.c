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

static struct competitors gather_competitors(struct trains *trains, uint32_t n, uint32_t least)
{
    double end = trains_node(trains, trains->members[0])->time_s;
    double start = trains_node(trains, trains->members[n - 1])->time_s;
    double span = fmax(end - start, RATE_INTERVALS * trains->call_class.train.max_interval_s), reached = 0;
    struct competitors found = {0};
    uint32_t member = 0;
    const struct node *one = trains_node(trains, trains->members[0]);
    const struct node *other = trains_node(trains, trains->members[least / 2]); /* the first may be chance */
    double least_db = INFINITY, most_db = -INFINITY;
    for (uint32_t i = 0; i < n; i++) {
        double level_db = trains_node(trains, trains->members[i])->level_db;
        least_db = fmin(least_db, level_db - LEVEL_GATE_DB);
        most_db = fmax(most_db, level_db + LEVEL_GATE_DB);
    }
    memset(trains->competing, 0, sizeof trains->competing);
    for (uint64_t k = trains->n_pulses; k > 0 && trains_remember(trains, k - 1) && reached <= span; k--) {
        const struct node *node = trains_node(trains, k - 1);
        reached = end - node->time_s;
        bool within = node->time_s >= start;
        if (member < n && trains->members[member] == k - 1) {
            member++;
        } else if (node->owner != HIDDEN && reached <= span && (within || node->owner == 0) &&
                   node->level_db > least_db && node->level_db < most_db) {
            double fit = fmax(trains_fit_shape(node, one), trains_fit_shape(node, other));
            trains->competing[competing_step(node->level_db)] += (float)fit;
        }
    }
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

/* How many of the strays could have stood in the place of a pulse of that level, in a chain whose levels
 * spread so. */
static double competing_about(const struct trains *trains, double level_db, double spread_db)
{
    double sum = 0, reach_db = GATE_DEVIATIONS * spread_db;
    uint32_t last = competing_step(level_db + reach_db);
    for (uint32_t s = competing_step(level_db - reach_db); s <= last; s++)
        if (trains->competing[s] > 0)
            sum += (double)trains->competing[s] *
                   trains_fit_level((s + 0.5) * COMPETING_STEP_DB - level_db, spread_db);
    return sum;
}

/* How many pulses a second noise gives within each step of level: looked up once for a chain, whose members
 * ask for the same ones. Ends where noise gives no more that matter. */
static void gather_noise(struct trains *trains)
{
    const double least_db = trains->call_class.train.min_snr_db;
    double above = trains_noise_rate(trains, units_power_ratio(least_db));
    trains->n_noise = 0;
    while (trains->n_noise < NOISE_STEPS && above > 1e-6) {
        const double next_db = least_db + (trains->n_noise + 1) * NOISE_STEP_DB;
        const double next = trains_noise_rate(trains, units_power_ratio(next_db));
        trains->noise_in[trains->n_noise++] = above - next;
        above = next;
    }
}

/* How many of them a second noise explains. */
static double noise_about(const struct trains *trains, double level_db, double spread_db)
{
    const double least_db = trains->call_class.train.min_snr_db;
    const double last_db = level_db + GATE_DEVIATIONS * spread_db;
    double sum = 0;
    for (uint32_t i = 0; i < trains->n_noise && least_db + i * NOISE_STEP_DB < last_db; i++)
        sum += trains->noise_in[i] *
               trains_fit_level(least_db + (i + 0.5) * NOISE_STEP_DB - level_db, spread_db);
    return sum;
}

/* The rate at which stray pulses compete with one of the chain's n: noise, and those that noise does not
 * explain. A chain picked out of many strays has taken some of them for its own, which is made good: the
 * share that strays have among all; and since they are counted over a short time, one more and a standard
 * deviation of theirs are added (not of the noise, which is known). */
static double competing_rate(const struct trains *trains, const struct node *node, double spread_db,
                             const struct competitors *found, uint32_t n)
{
    double least_snr = units_power_ratio(trains->call_class.train.min_snr_db);
    double noise = noise_rate_competing(&trains->noise, node->pulse.snr, least_snr, spread_db);
    double around = competing_about(trains, node->level_db, spread_db);
    double excess = fmax(0, around - noise_about(trains, node->level_db, spread_db) * found->time_s);
    return (excess * (1 + n / (around + n)) + 1 + sqrt(excess)) / found->time_s + noise + RATE_FLOOR;
}

/* How many of the chain's n are most surely more than chance, if its levels spread so, and how surely. */
static uint32_t find_surest(const struct trains *trains, const struct competitors *found, uint32_t n,
                            uint32_t least, double spread_db, double *out_over)
{
    double rates = 0, changes = 0, false_s = 3600 / trains->call_class.false_per_hour;
    /* The links' scores have the wide spread's cost in them. */
    double cost = 0.5 / (spread_db * spread_db) - 0.5 / (LEVEL_DEVIATION_DB * LEVEL_DEVIATION_DB);
    uint32_t surest = 0;
    for (uint32_t i = 0; i < n; i++) {
        const struct node *node = trains_node(trains, trains->members[i]);
        double rate = competing_rate(trains, node, spread_db, found, n);
        if (i > 0)
            changes += pow(node->level_db - trains_node(trains, trains->members[i - 1])->level_db, 2);
        if (i + 1 >= least && i > 0) {
            double over = walked_score(trains, i + 1) - cost * changes - rates - log(false_s * rate);
            if (over > *out_over) {
                *out_over = over;
                surest = i + 1;
            }
        }
        rates += log(rate);
    }
    return surest;
}

/* The ratio of the chain is held against how often pulses such as its first come. Its earliest pulses may be
 * chance that happened to lead to it, so it is given from where it stands best: the bound is on all starts
 * together. Levels are steady or sweep, at even odds. */
uint32_t trains_find_certain(struct trains *trains, uint32_t n, uint32_t least)
{
    struct competitors found = gather_competitors(trains, n, least);
    gather_noise(trains);
    double over = log(2);
    uint32_t wide = find_surest(trains, &found, n, least, LEVEL_DEVIATION_DB, &over);
    uint32_t steady = find_surest(trains, &found, n, least, STEADY_DEVIATION_DB, &over);
    if (steady == 0 && wide == 0)
        return 0;
    const struct node *newest = trains_node(trains, trains->members[0]);
    double spread_db = steady ? STEADY_DEVIATION_DB : LEVEL_DEVIATION_DB;
    trains->certain_excess = over - log(2);
    trains->certain_strays_hz = competing_rate(trains, newest, spread_db, &found, n);
    return steady ? steady : wide;
}

bool trains_may_be_certain(const struct trains *trains, const struct link *link)
{
    double judged = fmin(1, JUDGED_PULSES / (double)link->n);
    double score = fmax(link->score[NARROW], link->score[WIDE]);
    return judged * (score - link->ln_fewest) > log(3600 / trains->call_class.false_per_hour);
}
