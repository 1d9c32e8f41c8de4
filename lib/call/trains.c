/* Trains of one class: chains of pulses by dynamic programming. */
#include "call/trains.h"
#include "base/units.h"
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define RING 1024 /* pulses remembered */
#define LINKS 8   /* chains kept for each pulse */
#define MAX_OPEN 16
#define MAX_STEP 3 /* intervals between neighbours of a chain: two missed pulses */
#define GATE_DEVIATIONS 2.5
#define DETECTED 0.8         /* chance that a pulse of a train is found at all */
#define LEVEL_DEVIATION_DB 4 /* between neighbours; a beam that sweeps past changes it slowly */
#define LEVEL_GATE_DB 12     /* no neighbours beyond */
#define LEVEL_LIKE_DB 3      /* pulses weaker than a chain's weakest by more than this did not compete */
#define JUDGED_PULSES 64     /* the last ones of a chain decide whether it is a train */
#define LEVELS 24            /* steps of 3 dB in which pulses are counted */
#define LEVEL_STEP_DB 3
#define RANK_SHARE                                                                                           \
    0.25                /* of the pulses around count as strays where chains are only compared: most may be  \
                           the chain's own */
#define RATE_FLOOR 0.01 /* stray pulses a second that are expected everywhere; a judgement, no source */
#define RATE_INTERVALS 20 /* longest intervals over which the rate of stray pulses is counted */
#define MACHINE_PULSES 10 /* pulses that a rhythm without jitter needs to be called a machine's */
#define END_INTERVALS 3.3 /* a train ends after so many intervals without a pulse */
#define MOST_EVIDENCE 8.0 /* so much ill-fitting is forgiven a train that has long fitted well, nats */
#define PIECE_S 10.0
#define PIECE_PULSES 200
#define MIN_PIECE 3
#define HIDDEN UINT32_MAX

/* A train is either steady or free in its rhythm; a chain is scored as both. */
enum { NARROW, WIDE };

/* A chain that ends with this pulse, by its last pair. */
struct link {
    uint64_t previous; /* number of the pulse before */
    uint32_t previous_link;
    uint32_t train;     /* 0: none yet */
    uint32_t n;         /* pulses */
    uint32_t steps;     /* intervals in the last pair */
    double ln_interval; /* of the last pair, per step, s */
    double ln_ratio;    /* d of the last pair */
    double gain;        /* what the last pair added, at best */
    double score[2];    /* sum of ln densities, the rate of stray pulses left out, for either spread */
    double ln_rates;    /* sum of ln of the common rate, to compare chains by */
    double rank;        /* the better score less ln_rates: which chains are kept */
};

struct node {
    double time_s, frame, level_db, snr, energy;
    uint32_t owner; /* train that has claimed it; 0 none, HIDDEN */
    uint32_t n_links;
    struct link links[LINKS];
};

struct open_train {
    uint32_t number; /* 0: free */
    uint64_t last;   /* pulse and link of its best end */
    uint32_t last_link;
    uint64_t given; /* last pulse that was given */
    double given_time_s;
    double evidence; /* running, of its last steps: below 0 the rhythm is lost (Page 1954) */
    bool machine;
};

struct trains {
    struct call_class call_class;
    double rate_hz;
    struct noise_rate noise;
    double all_noise;                /* pulses a second that noise gives at min_snr_db */
    double ln_peak[2], deviation[2]; /* of ln(interval ratio): a quarter of max_jitter, and max_jitter */
    double ln_steps[MAX_STEP + 1];   /* ln p_d (1 - p_d)^(m - 1) */
    double ln_m[MAX_STEP + 1];
    double ln_range;           /* ln of ln(max / min interval) */
    double rate_above[LEVELS]; /* running, of pulses at each level or more, a second */
    uint64_t n_pulses;         /* taken */
    uint32_t n_trains;
    struct node *ring;
    struct open_train open[MAX_OPEN];
    uint64_t members[TRAINS_MAX_MEMBERS];
    double sorted[RING];
    uint32_t chain_link[TRAINS_MAX_MEMBERS];
};

static struct node *node_of(const struct trains *trains, uint64_t number)
{
    return &trains->ring[number % RING];
}

static double noise_rate(const struct trains *trains, double snr)
{
    return trains->noise.get(trains->noise.context, snr);
}

static bool remembered(const struct trains *trains, uint64_t number)
{
    return number + RING > trains->n_pulses;
}

enum status trains_create(const struct call_class *call_class, double rate_hz, struct noise_rate noise,
                          struct trains **out)
{
    struct trains *trains = calloc(1, sizeof *trains);
    if (!trains)
        return STATUS_NO_MEMORY;
    trains->ring = calloc(RING, sizeof *trains->ring);
    if (!trains->ring) {
        trains_destroy(trains);
        return STATUS_NO_MEMORY;
    }
    const struct train_shape *shape = &call_class->train;
    trains->call_class = *call_class;
    trains->rate_hz = rate_hz;
    trains->noise = noise;
    trains->all_noise = noise_rate(trains, units_power_ratio(shape->min_snr_db));
    trains->deviation[NARROW] = shape->max_jitter / 4;
    trains->deviation[WIDE] = shape->max_jitter;
    for (int spread = NARROW; spread <= WIDE; spread++)
        trains->ln_peak[spread] = -log(sqrt(2 * M_PI) * trains->deviation[spread]);
    for (int m = 1; m <= MAX_STEP; m++) {
        trains->ln_m[m] = log(m);
        trains->ln_steps[m] = log(DETECTED) + (m - 1) * log(1 - DETECTED);
    }
    trains->ln_range = log(log(shape->max_interval_s / shape->min_interval_s));
    trains_reset(trains);
    *out = trains;
    return STATUS_OK;
}

void trains_reset(struct trains *trains)
{
    memset(trains->open, 0, sizeof trains->open);
    trains->n_pulses = 0;
    memset(trains->rate_above, 0, sizeof trains->rate_above);
}

/* The step of level from which pulses compete with a pulse: one below its own. */
static int level_index(const struct node *node)
{
    return (int)fmin(LEVELS - 1, fmax(0, node->level_db / LEVEL_STEP_DB - 1));
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

static double ln_density(const struct trains *trains, int spread, double d)
{
    double scaled = d / trains->deviation[spread];
    return trains->ln_peak[spread] - scaled * scaled / 2;
}

/* How many intervals an interval so much longer (ln) than the one before most likely is. */
static uint32_t likeliest_steps(const struct trains *trains, double ratio)
{
    if (ratio < 0.4) /* far below ln 2 for every jitter */
        return 1;
    uint32_t best = 1;
    double most = -INFINITY;
    for (uint32_t m = 1; m <= MAX_STEP; m++) {
        double ln = ln_density(trains, WIDE, ratio - trains->ln_m[m]) + trains->ln_steps[m];
        if (ln > most) {
            most = ln;
            best = m;
        }
    }
    return best;
}

static bool train_is_open(const struct trains *trains, uint32_t number)
{
    for (int i = 0; i < MAX_OPEN; i++)
        if (number && trains->open[i].number == number)
            return true;
    return false;
}

/* The best chain that reaches `node` from pulse `number`, a pair of its own or the extension of one. */
static void link_from(const struct trains *trains, struct node *node, uint64_t number, double ln_rate)
{
    const struct train_shape *shape = &trains->call_class.train;
    const struct node *from = node_of(trains, number);
    double interval = node->time_s - from->time_s, change = node->level_db - from->level_db;
    double ln_interval = log(interval);
    double level_cost = change * change / (2.0 * LEVEL_DEVIATION_DB * LEVEL_DEVIATION_DB);
    struct link best = {.rank = -INFINITY};
    if (interval <= shape->max_interval_s && from->owner == 0) {
        double score = -ln_interval - trains->ln_range - level_cost;
        best = (struct link){.previous = number,
                             .n = 2,
                             .steps = 1,
                             .ln_interval = ln_interval,
                             .gain = score,
                             .score = {score, score},
                             .ln_rates = ln_rate,
                             .rank = score - ln_rate};
    }
    for (uint32_t i = 0; i < from->n_links; i++) {
        const struct link *link = &from->links[i];
        if (from->owner && link->train != from->owner)
            continue;
        double ratio = ln_interval - link->ln_interval;
        uint32_t m = likeliest_steps(trains, ratio);
        double d = ratio - trains->ln_m[m];
        if (fabs(d) > GATE_DEVIATIONS * trains->deviation[WIDE])
            continue;
        double common = trains->ln_steps[m] - ln_interval - level_cost;
        double gain[2] = {ln_density(trains, NARROW, d) + common, ln_density(trains, WIDE, d) + common};
        double score[2] = {link->score[NARROW] + gain[NARROW], link->score[WIDE] + gain[WIDE]};
        double rank = fmax(score[NARROW], score[WIDE]) - link->ln_rates - ln_rate;
        if (rank <= best.rank)
            continue;
        best = (struct link){.previous = number,
                             .previous_link = i,
                             .train = link->train,
                             .n = link->n + 1,
                             .steps = m,
                             .ln_interval = ln_interval - trains->ln_m[m],
                             .ln_ratio = d,
                             .gain = fmax(gain[NARROW], gain[WIDE]),
                             .score = {score[NARROW], score[WIDE]},
                             .ln_rates = link->ln_rates + ln_rate,
                             .rank = rank};
    }
    if (best.rank > -INFINITY)
        keep(node, &best);
}

/* Walks a chain back from its end into members[] and chain_link[], at most until after pulse `until`
 * (UINT64_MAX: to its start) or for `most` pulses. Gives the number of pulses, the last first. */
static uint32_t walk(struct trains *trains, uint64_t number, uint32_t link, uint64_t until, uint32_t most)
{
    uint32_t n = 0;
    while (n < most && remembered(trains, number) && (until == UINT64_MAX || number > until)) {
        const struct node *node = node_of(trains, number);
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

/* Root mean square of d over the first n pulses that walk() gave. */
static double walked_jitter(const struct trains *trains, uint32_t n)
{
    double sum = 0;
    uint32_t count = 0;
    for (uint32_t i = 0; i < n; i++) {
        if (trains->chain_link[i] == UINT32_MAX)
            continue;
        const struct link *link = &node_of(trains, trains->members[i])->links[trains->chain_link[i]];
        if (link->n < 3)
            continue;
        sum += link->ln_ratio * link->ln_ratio;
        count++;
    }
    return count ? sqrt(sum / count) : 0;
}

static int compare_doubles(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static double median(double *values, uint32_t n)
{
    qsort(values, n, sizeof *values, compare_doubles);
    return n % 2 ? values[n / 2] : (values[n / 2 - 1] + values[n / 2]) / 2;
}

/* Levels of the pulses that compete with the chain in members[0..n), sorted, into sorted[]: of no train, not
 * its own, near it in time. Gives their number and the time over which they were counted. */
static uint32_t gather_strays(struct trains *trains, uint32_t n, double *out_span_s)
{
    double end = node_of(trains, trains->members[0])->time_s;
    double start = node_of(trains, trains->members[n - 1])->time_s;
    double span = fmax(end - start, RATE_INTERVALS * trains->call_class.train.max_interval_s), reached = 0;
    uint32_t strays = 0, member = 0;
    for (uint64_t k = trains->n_pulses; k > 0 && remembered(trains, k - 1) && reached <= span; k--) {
        const struct node *node = node_of(trains, k - 1);
        reached = end - node->time_s;
        if (member < n && trains->members[member] == k - 1)
            member++;
        else if (node->owner != HIDDEN && reached <= span)
            trains->sorted[strays++] = node->level_db;
    }
    qsort(trains->sorted, strays, sizeof *trains->sorted, compare_doubles);
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
    const struct link *last = &node_of(trains, trains->members[0])->links[trains->chain_link[0]];
    double score[2] = {last->score[NARROW], last->score[WIDE]};
    if (trains->chain_link[n - 1] != UINT32_MAX) {
        const struct link *first = &node_of(trains, trains->members[n - 2])->links[trains->chain_link[n - 2]];
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
    double rate = noise_rate(trains, snr), next = noise_rate(trains, snr * units_power_ratio(step_db));
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
    double noise = fmin(trains->all_noise, noise_rate(trains, units_power_ratio(limit_db))) * span_s;
    double excess = fmax(0, strays - noise);
    return (excess * (1 + n / (strays + n)) + 1 + sqrt(strays)) / span_s;
}

/* Whether the chain in members[0..n) is more than chance. */
static bool certain(struct trains *trains, uint32_t n, double score)
{
    double span_s, ratio = score, first = 0;
    uint32_t n_strays = gather_strays(trains, n, &span_s);
    for (uint32_t i = 0; i < n; i++) {
        const struct node *node = node_of(trains, trains->members[i]);
        double rate = competing_strays(trains, node, n_strays, span_s, n) +
                      competing_noise(trains, node->snr) + RATE_FLOOR;
        if (i + 1 < n)
            ratio -= log(rate);
        else
            first = rate;
    }
    return ratio > log(3600 * first / trains->call_class.false_per_hour);
}

static struct open_train *free_place(struct trains *trains)
{
    for (int i = 0; i < MAX_OPEN; i++)
        if (!trains->open[i].number)
            return &trains->open[i];
    return NULL;
}

/* Gives what is new of a train. */
static void give(struct trains *trains, struct open_train *open, const struct train_sink *sink,
                 uint64_t *rejections)
{
    uint32_t n = walk(trains, open->last, open->last_link, open->given, TRAINS_MAX_MEMBERS);
    if (n == 0)
        return;
    const struct node *last = node_of(trains, trains->members[0]);
    const struct node *first = node_of(trains, trains->members[n - 1]);
    double jitter = walked_jitter(trains, n);
    bool steady = n >= MACHINE_PULSES ? jitter < trains->call_class.train.min_jitter : open->machine;
    if (steady && !open->machine)
        rejections[REJECT_MACHINE_RHYTHM]++;
    open->machine = steady;
    uint32_t n_intervals = 0;
    for (uint32_t i = 0; i < n; i++)
        if (trains->chain_link[i] != UINT32_MAX)
            trains->sorted[n_intervals++] =
                exp(node_of(trains, trains->members[i])->links[trains->chain_link[i]].ln_interval);
    struct train train = {.number = open->number,
                          .start_frame = first->frame,
                          .end_frame = last->frame,
                          .interval_frames =
                              n_intervals ? median(trains->sorted, n_intervals) * trains->rate_hz : 0,
                          .jitter = jitter,
                          .start_energy = first->energy,
                          .end_energy = last->energy,
                          .n_pulses = n,
                          .members = trains->members};
    for (uint32_t i = 0; i < n; i++) {
        node_of(trains, trains->members[i])->owner = open->number;
        trains->sorted[i] = node_of(trains, trains->members[i])->snr;
    }
    train.snr_db = units_power_db(median(trains->sorted, n));
    for (uint32_t i = 0; i < n / 2; i++) {
        uint64_t swap = trains->members[i];
        trains->members[i] = trains->members[n - 1 - i];
        trains->members[n - 1 - i] = swap;
    }
    open->given = open->last;
    open->given_time_s = last->time_s;
    if (!steady)
        sink->take(sink->context, &train);
}

/* Stray pulses a second that compete with a pulse of a train: all that came lately at its level, less the
 * train's own. */
static double running_strays(const struct trains *trains, const struct node *node, const struct link *link)
{
    double memory_s = RATE_INTERVALS * trains->call_class.train.max_interval_s;
    double own = fmin(link->n / memory_s, exp(-link->ln_interval));
    return fmax(0, trains->rate_above[level_index(node)] - own) + noise_rate(trains, node->snr) + RATE_FLOOR;
}

/* Spares most chains the walk: false when a rate of stray pulses that is surely too low would not do. */
static bool may_be_certain(const struct trains *trains, const struct node *node, const struct link *link)
{
    double steps = fmin(link->n, JUDGED_PULSES) - 1;
    double score = fmax(link->score[NARROW], link->score[WIDE]) * fmin(1, JUDGED_PULSES / (double)link->n);
    double low_rate = fmax(0, running_strays(trains, node, link) - trains->all_noise) / 3 + RATE_FLOOR;
    return score - steps * log(low_rate) > log(3600 * low_rate / trains->call_class.false_per_hour);
}

/* Opens a train for the chain that ends with link `best` of the newest pulse, if it is one. */
static void try_to_open(struct trains *trains, uint32_t best, const struct train_sink *sink,
                        uint64_t *rejections)
{
    const struct train_shape *shape = &trains->call_class.train;
    uint64_t number = trains->n_pulses - 1;
    struct node *node = node_of(trains, number);
    struct link *link = &node->links[best];
    if (!may_be_certain(trains, node, link))
        return;
    uint32_t n = walk(trains, number, best, UINT64_MAX, JUDGED_PULSES), taken = 0, hidden = 0;
    for (uint32_t i = 0; i < n; i++) {
        uint32_t owner = node_of(trains, trains->members[i])->owner;
        hidden += owner == HIDDEN;
        taken += owner != 0 && owner != HIDDEN;
    }
    if (n - hidden < shape->min_pulses || 2 * hidden > n || 3 * taken > n)
        return;
    double jitter = walked_jitter(trains, n);
    if (jitter > shape->max_jitter || (jitter < shape->min_jitter && n < MACHINE_PULSES))
        return;
    if (!certain(trains, n, walked_score(trains, n)))
        return;
    struct open_train *open = free_place(trains);
    if (!open) {
        rejections[REJECT_TOO_MANY]++;
        return;
    }
    *open = (struct open_train){
        .number = ++trains->n_trains, .last = number, .last_link = best, .evidence = MOST_EVIDENCE};
    open->given = UINT64_MAX; /* walks to the start */
    link->train = open->number;
    give(trains, open, sink, rejections);
}

static void end_train(struct trains *trains, struct open_train *open, const struct train_sink *sink,
                      uint64_t *rejections)
{
    uint32_t n = walk(trains, open->last, open->last_link, open->given, TRAINS_MAX_MEMBERS);
    if (n >= MIN_PIECE)
        give(trains, open, sink, rejections);
    else
        for (uint32_t i = 0; i < n; i++)
            node_of(trains, trains->members[i])->owner = open->number;
    open->number = 0;
}

/* The pulse two before a train's end is settled enough to be the train's alone. */
static void claim(struct trains *trains, const struct open_train *open)
{
    uint64_t number = open->last;
    uint32_t link = open->last_link;
    for (int back = 0; back < 2; back++) {
        if (link == UINT32_MAX || !remembered(trains, number))
            return;
        const struct link *step = &node_of(trains, number)->links[link];
        number = step->previous;
        link = step->n == 2 ? UINT32_MAX : step->previous_link;
    }
    if (remembered(trains, number) && node_of(trains, number)->owner == 0)
        node_of(trains, number)->owner = open->number;
}

/* Makes the newest pulse, with that link, the end of a train. */
static void lengthen(struct trains *trains, struct open_train *open, uint32_t link,
                     const struct train_sink *sink, uint64_t *rejections)
{
    uint64_t number = trains->n_pulses - 1;
    const struct node *node = node_of(trains, number);
    double gain = node->links[link].gain - log(running_strays(trains, node, &node->links[link]));
    open->evidence = fmin(MOST_EVIDENCE, open->evidence + gain);
    if (open->evidence < 0) {
        end_train(trains, open, sink, rejections);
        return;
    }
    open->last = number;
    open->last_link = link;
    claim(trains, open);
    if (node->time_s - open->given_time_s >= PIECE_S || number - open->given >= PIECE_PULSES)
        give(trains, open, sink, rejections);
}

/* Lets the newest pulse carry on the open trains that reach it; a chain that fits better than a train's
 * present end takes its place. */
static void carry_on(struct trains *trains, const struct train_sink *sink, uint64_t *rejections)
{
    const struct node *node = node_of(trains, trains->n_pulses - 1);
    for (int t = 0; t < MAX_OPEN; t++) {
        struct open_train *open = &trains->open[t];
        uint32_t best = UINT32_MAX;
        for (uint32_t i = 0; i < node->n_links; i++)
            if (open->number && node->links[i].train == open->number &&
                (best == UINT32_MAX || node->links[i].rank > node->links[best].rank))
                best = i;
        if (best == UINT32_MAX)
            continue;
        bool follows = node->links[best].previous == open->last;
        if (follows || !remembered(trains, open->last) ||
            node->links[best].rank > node_of(trains, open->last)->links[open->last_link].rank)
            lengthen(trains, open, best, sink, rejections);
    }
}

static void take_node(struct trains *trains, const struct pulse *pulse, uint64_t *rejections)
{
    struct node *node = node_of(trains, trains->n_pulses);
    if (trains->n_pulses >= RING && node->owner == 0)
        rejections[REJECT_NO_RHYTHM]++;
    double time_s = pulse->frame / trains->rate_hz;
    double memory_s = RATE_INTERVALS * trains->call_class.train.max_interval_s;
    double gap = trains->n_pulses ? time_s - node_of(trains, trains->n_pulses - 1)->time_s : 0;
    double keep_share = exp(-gap / memory_s), level_db = units_power_db(pulse->snr);
    for (int l = 0; l < LEVELS; l++)
        trains->rate_above[l] =
            trains->rate_above[l] * keep_share + (level_db >= l * LEVEL_STEP_DB ? 1 / memory_s : 0);
    node->time_s = time_s;
    node->frame = pulse->frame;
    node->snr = pulse->snr;
    node->level_db = level_db;
    node->energy = pulse->energy;
    node->owner = 0;
    node->n_links = 0;
    trains->n_pulses++;
}

void trains_push(struct trains *trains, const struct pulse *pulse, const struct train_sink *sink,
                 uint64_t *rejections)
{
    take_node(trains, pulse, rejections);
    const struct train_shape *shape = &trains->call_class.train;
    uint64_t number = trains->n_pulses - 1;
    struct node *node = node_of(trains, number);
    double ln_rate =
        log(noise_rate(trains, node->snr) + RANK_SHARE * trains->rate_above[level_index(node)] + RATE_FLOOR);
    for (uint64_t k = number; k > 0 && remembered(trains, k - 1); k--) {
        const struct node *from = node_of(trains, k - 1);
        double gap = node->time_s - from->time_s;
        if (gap > MAX_STEP * shape->max_interval_s)
            break;
        if (gap >= shape->min_interval_s && from->owner != HIDDEN &&
            fabs(node->level_db - from->level_db) <= LEVEL_GATE_DB)
            link_from(trains, node, k - 1, ln_rate);
    }
    for (uint32_t i = 0; i < node->n_links; i++)
        if (!train_is_open(trains, node->links[i].train))
            node->links[i].train = 0;
    carry_on(trains, sink, rejections);
    uint32_t best = UINT32_MAX;
    for (uint32_t i = 0; i < node->n_links; i++)
        if (node->links[i].train == 0 && node->links[i].n >= shape->min_pulses &&
            (best == UINT32_MAX || node->links[i].rank > node->links[best].rank))
            best = i;
    if (best != UINT32_MAX)
        try_to_open(trains, best, sink, rejections);
}

void trains_advance(struct trains *trains, double frame, const struct train_sink *sink, uint64_t *rejections)
{
    for (int t = 0; t < MAX_OPEN; t++) {
        struct open_train *open = &trains->open[t];
        if (!open->number)
            continue;
        const struct node *end = node_of(trains, open->last);
        double interval = exp(end->links[open->last_link].ln_interval);
        if (!remembered(trains, open->last) ||
            frame / trains->rate_hz - end->time_s > END_INTERVALS * interval)
            end_train(trains, open, sink, rejections);
    }
}

void trains_finish(struct trains *trains, const struct train_sink *sink, uint64_t *rejections)
{
    for (int t = 0; t < MAX_OPEN; t++)
        if (trains->open[t].number)
            end_train(trains, &trains->open[t], sink, rejections);
    for (uint64_t k = trains->n_pulses; k > 0 && remembered(trains, k - 1); k--)
        rejections[REJECT_NO_RHYTHM] += node_of(trains, k - 1)->owner == 0;
    trains_reset(trains);
}

void trains_hide(struct trains *trains, double start_frame, double end_frame, uint64_t *rejections)
{
    for (uint64_t k = trains->n_pulses; k > 0 && remembered(trains, k - 1); k--) {
        struct node *node = node_of(trains, k - 1);
        if (node->frame < start_frame)
            return;
        if (node->frame > end_frame || node->owner != 0)
            continue;
        node->owner = HIDDEN;
        rejections[REJECT_OWN_SOURCE]++;
    }
}

void trains_destroy(struct trains *trains)
{
    if (!trains)
        return;
    free(trains->ring);
    free(trains);
}
