/* Chains of pulses, by dynamic programming over pairs. */
#include "base/units.h"
#include "call/trains_inside.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

double trains_fit_level(double difference_db, double spread_db)
{
    double scaled = difference_db / spread_db;
    return exp(-scaled * scaled / 2);
}

/* Looks how often pulses of the newest one's level and look come: the density of those before it, each spread
 * as the steps of a chain are. */
static void look_around(struct trains *trains, struct node *node)
{
    double span_s = RATE_INTERVALS * trains->call_class.train.max_interval_s, sum = 0;
    uint64_t last = trains->n_pulses - 1;
    struct around *around = &trains->around;
    around->n = 0;
    for (uint64_t k = last; k > 0 && around->n < SAMPLED && trains_remember(trains, k - 1); k--) {
        const struct node *other = trains_node(trains, k - 1);
        double difference_db = other->level_db - node->level_db;
        if (node->time_s - other->time_s > span_s)
            break;
        bool near = fabs(difference_db) <= LEVEL_GATE_DB;
        double likeness = near ? trains_likeness(node, other) : 0;
        around->likeness[around->n++] = likeness;
        if (around->n == SAMPLED)
            span_s = node->time_s - other->time_s;
        if (near && other->owner == 0)
            sum += trains_fit_level(difference_db, LEVEL_DEVIATION_DB) * exp(likeness);
    }
    double rate = sum / fmax(span_s, trains->call_class.train.min_interval_s);
    double least_snr = units_power_ratio(trains->call_class.train.min_snr_db);
    double noise = noise_rate_competing(&trains->noise, node->pulse.snr, least_snr, STEADY_DEVIATION_DB);
    node->ln_fewest =
        log(noise + 1 / (RATE_INTERVALS * trains->call_class.train.max_interval_s) + RATE_FLOOR);
    node->ln_rate = log(fmax(rate, noise) + RATE_FLOOR);
}

/* Takes a link into a pulse's list, which keeps the best few. */
static void keep(struct node *node, const struct link *link)
{
    uint32_t place = node->n_links;
    if (place == LINKS) {
        place = 0;
        for (uint32_t i = 1; i < LINKS; i++)
            if (node->links[i].rank < node->links[place].rank)
                place = i;
        if (node->links[place].rank >= link->rank)
            return;
    } else {
        node->n_links++;
    }
    node->links[place] = *link;
}

/* Takes a link. Of what two pulses look like only what speaks against the pair counts in the score: no factor
 * above 1 that chance could earn. */
static void add_likeness(struct link *link, double likeness)
{
    link->alike += fmax(0, likeness);
    link->gain += fmin(0, likeness);
    link->score[NARROW] += fmin(0, likeness);
    link->score[WIDE] += fmin(0, likeness);
}

static double ln_density(const struct trains *trains, int spread, double d)
{
    double scaled = d / trains->deviation[spread];
    return trains->ln_peak[spread] - scaled * scaled / 2;
}

/* How many intervals an interval so much longer (ln) than the one before most likely is. */
static uint32_t likeliest_steps(const struct trains *trains, double ratio)
{
    uint32_t m = 1;
    while (m < MAX_STEP && ratio > trains->ln_limit[m])
        m++;
    return m;
}

/* A chain of two pulses. */
static struct link first_pair(uint64_t number, const struct node *from, const struct node *node,
                              double ln_interval, double score)
{
    return (struct link){.previous = number,
                         .first = number,
                         .first_time_s = from->time_s,
                         .n = 2,
                         .steps = 1,
                         .ln_interval = ln_interval,
                         .gain = score,
                         .score = {score, score},
                         .ln_rates = from->ln_rate + node->ln_rate,
                         .ln_fewest = from->ln_fewest + node->ln_fewest,
                         .rank = score - from->ln_rate - node->ln_rate};
}

static double level_cost(double change_db)
{
    return change_db * change_db / (2.0 * LEVEL_DEVIATION_DB * LEVEL_DEVIATION_DB);
}

/* How many of the m - 1 beats that were missed after `from` the own source covers, or its echo: nobody could
 * have heard them. */
static uint32_t hidden_beats(const struct trains *trains, const struct node *from, double step_s, uint32_t m)
{
    uint32_t n = 0;
    for (uint32_t i = 1; i < m && trains->hidden.n > 0; i++)
        n += hidden_is_near(&trains->hidden, from->time_s + i * step_s, trains->call_class.train.echo_s);
    return n;
}

/* The number of intervals and what it costs; where beats are hidden more of them may be likelier than where
 * each that is missed speaks against the train. */
static uint32_t choose_steps(const struct trains *trains, const struct node *from, double interval,
                             double ratio, double *ln_steps)
{
    uint32_t m = likeliest_steps(trains, ratio), best = m;
    double most = -INFINITY;
    for (uint32_t k = m; k == m || (trains->hidden.n > 0 && k <= MAX_STEP); k++) {
        double d = ratio - trains->ln_m[k];
        double missed =
            trains->ln_steps[k] + hidden_beats(trains, from, interval / k, k) * trains->ln_unmissed;
        double fit = missed + fmax(ln_density(trains, NARROW, d), ln_density(trains, WIDE, d));
        if (fit > most) {
            most = fit;
            best = k;
            *ln_steps = missed;
        }
    }
    return best;
}

/* What a chain that ends with pulse `number` becomes when `node` follows, its rank and their likeness left
 * out; false where it may not. */
static bool extend(const struct trains *trains, const struct node *node, uint64_t number, uint32_t index,
                   struct link *out)
{
    const struct train_shape *shape = &trains->call_class.train;
    const struct node *from = trains_node(trains, number);
    const struct link *link = &from->links[index];
    double interval = node->time_s - from->time_s, change = node->level_db - from->level_db;
    double ln_interval = log(interval), ratio = ln_interval - link->ln_interval, ln_steps = 0;
    uint32_t m = choose_steps(trains, from, interval, ratio, &ln_steps);
    double d = ratio - trains->ln_m[m];
    double step_s = interval / m; /* a chain may drift, but not out of its class */
    if (fabs(d) > GATE_DEVIATIONS * trains->deviation[WIDE] || step_s < shape->min_interval_s ||
        step_s > shape->max_interval_s)
        return false;
    double common = ln_steps - ln_interval - level_cost(change);
    double gain[2] = {ln_density(trains, NARROW, d) + common, ln_density(trains, WIDE, d) + common};
    *out = (struct link){.previous = number,
                         .previous_link = index,
                         .first = link->first,
                         .first_time_s = link->first_time_s,
                         .train = link->train,
                         .n = link->n + 1,
                         .steps = m,
                         .ln_interval = ln_interval - trains->ln_m[m],
                         .ln_ratio = d,
                         .gain = fmax(gain[NARROW], gain[WIDE]),
                         .score = {link->score[NARROW] + gain[NARROW], link->score[WIDE] + gain[WIDE]},
                         .ln_rates = link->ln_rates + node->ln_rate,
                         .ln_fewest = link->ln_fewest + node->ln_fewest,
                         .alike = link->alike};
    return true;
}

static double rank_of(const struct link *link, int spread)
{
    return link->score[spread] + link->alike - link->ln_rates;
}

/* The best chains that reach `node` from pulse `number`, pairs of their own or extensions: for either spread
 * one, since what is best by the wide one says nothing of where a steady rhythm began. */
static void link_from(const struct trains *trains, struct node *node, uint64_t number, double likeness)
{
    const struct train_shape *shape = &trains->call_class.train;
    const struct node *from = trains_node(trains, number);
    double interval = node->time_s - from->time_s, ln_interval = log(interval);
    struct link best[2], next;
    double rank[2] = {-INFINITY, -INFINITY};
    if (interval <= shape->max_interval_s && from->owner == 0) {
        double cost = level_cost(node->level_db - from->level_db);
        best[NARROW] = best[WIDE] =
            first_pair(number, from, node, ln_interval, -ln_interval - trains->ln_range - cost);
        rank[NARROW] = rank[WIDE] = best[WIDE].rank;
    }
    for (uint32_t i = 0; i < from->n_links; i++) {
        if ((from->owner && from->links[i].train != from->owner) || !extend(trains, node, number, i, &next))
            continue;
        for (int spread = NARROW; spread <= WIDE; spread++)
            if (rank_of(&next, spread) > rank[spread]) {
                rank[spread] = rank_of(&next, spread);
                best[spread] = next;
            }
    }
    if (rank[WIDE] == -INFINITY)
        return;
    bool same = best[NARROW].n == best[WIDE].n && best[NARROW].previous_link == best[WIDE].previous_link;
    for (int spread = same ? WIDE : NARROW; spread <= WIDE; spread++) {
        struct link *link = &best[spread];
        add_likeness(link, likeness);
        link->rank = fmax(rank_of(link, NARROW), rank_of(link, WIDE));
        keep(node, link);
    }
}

uint32_t trains_walk(struct trains *trains, uint64_t number, uint32_t link, uint64_t until, uint32_t most)
{
    uint32_t n = 0;
    while (n < most && trains_remember(trains, number) && (until == UINT64_MAX || number > until)) {
        const struct node *node = trains_node(trains, number);
        trains->members[n] = number;
        trains->chain_link[n++] = link;
        if (link == UINT32_MAX)
            break;
        const struct link *step = &node->links[link];
        number = step->previous;
        link = step->n == 2 ? UINT32_MAX : step->previous_link;
    }
    return n;
}

double trains_walked_jitter(const struct trains *trains, uint32_t n)
{
    double sum = 0;
    uint32_t count = 0;
    for (uint32_t i = 0; i < n; i++) {
        if (trains->chain_link[i] == UINT32_MAX)
            continue;
        const struct link *link = &trains_node(trains, trains->members[i])->links[trains->chain_link[i]];
        if (link->n < 3)
            continue;
        sum += link->ln_ratio * link->ln_ratio;
        count++;
    }
    return count ? sqrt(sum / count) : 0;
}

/* Links the newest pulse to those before. */
static void link_back(struct trains *trains, struct node *node)
{
    const struct train_shape *shape = &trains->call_class.train;
    uint64_t last = trains->n_pulses - 1;
    look_around(trains, node);
    for (uint64_t k = last; k > 0 && trains_remember(trains, k - 1); k--) {
        const struct node *from = trains_node(trains, k - 1);
        double gap = node->time_s - from->time_s;
        if (gap > MAX_STEP * shape->max_interval_s)
            break;
        if (gap >= shape->min_interval_s && from->owner != HIDDEN &&
            from->pulse.foreign == node->pulse.foreign &&
            fabs(node->level_db - from->level_db) <= LEVEL_GATE_DB)
            link_from(trains, node, k - 1,
                      last - k < trains->around.n ? trains->around.likeness[last - k]
                                                  : trains_likeness(node, from));
    }
}

void trains_add_node(struct trains *trains, const struct pulse *pulse, uint64_t *rejections)
{
    struct node *node = trains_node(trains, trains->n_pulses);
    if (trains->n_pulses >= RING && node->owner == 0)
        rejections[node->pulse.foreign ? REJECT_SHAPE : REJECT_NO_RHYTHM]++;
    double time_s = pulse->frame / trains->rate_hz;
    node->time_s = time_s;
    node->pulse = *pulse;
    node->level_db = units_power_db(pulse->snr);
    node->owner = 0;
    node->n_links = 0;
    trains->n_pulses++;
    link_back(trains, node);
}
