/* Trains of one class: opened, carried on, given in pieces, ended. */
#include "base/median.h"
#include "base/units.h"
#include "call/trains_inside.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define MACHINE_PULSES 10 /* pulses that a rhythm without jitter needs to be called a machine's */
#define END_INTERVALS 3.3 /* a train ends after so many intervals without a pulse */
#define FADING 0.9        /* of a count, with each pulse of a train */
#define MOST_EVIDENCE 8.0 /* so much ill-fitting is forgiven a train that has long fitted well, nats */
#define PIECE_S 10.0
#define PIECE_INTERVALS 4 /* longest ones, where that lasts longer */
#define PIECE_PULSES 200
#define MIN_PIECE 3
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
    trains->deviation[NARROW] = shape->max_jitter / 4;
    trains->deviation[WIDE] = shape->max_jitter;
    for (int spread = NARROW; spread <= WIDE; spread++)
        trains->ln_peak[spread] = -log(sqrt(2 * M_PI) * trains->deviation[spread]);
    trains->ln_unmissed = -log(1 - DETECTED);
    for (int m = 1; m <= MAX_STEP; m++) {
        trains->ln_m[m] = log(m);
        trains->ln_steps[m] = log(DETECTED) + (m - 1) * log(1 - DETECTED);
    }
    /* Where the densities of m and m + 1 steps, both with the wide spread, are equal; never below 0.4, which
       is far below ln 2 for every jitter. */
    for (int m = 1; m < MAX_STEP; m++) {
        double apart = trains->ln_m[m + 1] - trains->ln_m[m], spread = trains->deviation[WIDE];
        double middle = (trains->ln_m[m + 1] + trains->ln_m[m]) / 2;
        trains->ln_limit[m] =
            fmax(0.4, middle + spread * spread * (trains->ln_steps[m] - trains->ln_steps[m + 1]) / apart);
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
    trains->hidden = (struct hidden){0};
}

static bool train_is_open(const struct trains *trains, uint32_t number)
{
    for (int i = 0; i < MAX_OPEN; i++)
        if (number && trains->open[i].number == number)
            return true;
    return false;
}

static struct open_train *free_place(struct trains *trains)
{
    for (int i = 0; i < MAX_OPEN; i++)
        if (!trains->open[i].number)
            return &trains->open[i];
    return NULL;
}

static const struct pulse *member_of(const void *context, uint32_t i)
{
    const struct trains *trains = context;
    return &trains_node(trains, trains->members[i])->pulse;
}

/* How far from chance a train is by now. */
static void describe_chance(const struct trains *trains, const struct open_train *open, struct train *out)
{
    const struct link *link = &trains_node(trains, open->last)->links[open->last_link];
    double rate = open->strays_s > 0 ? open->strays / open->strays_s : open->strays_hz;
    out->excess = open->excess + open->best_total;
    out->strays = rate * out->interval_frames / trains->rate_hz;
    out->likeness = link->n > 1 ? link->alike / (link->n - 1) : 0;
}

/* Gives what is new of a train. */
static void give(struct trains *trains, struct open_train *open, const struct train_sink *sink,
                 uint64_t *rejections)
{
    uint32_t n = trains_walk(trains, open->last, open->last_link, open->given, TRAINS_MAX_MEMBERS);
    if (n == 0)
        return;
    double jitter = trains_walked_jitter(trains, n);
    bool steady = n >= MACHINE_PULSES ? jitter < trains->call_class.train.min_jitter : open->machine;
    if (steady && !open->machine)
        rejections[REJECT_MACHINE_RHYTHM]++;
    open->machine = steady;
    uint32_t n_intervals = 0;
    for (uint32_t i = 0; i < n; i++)
        if (trains->chain_link[i] != UINT32_MAX)
            trains->sorted[n_intervals++] =
                exp(trains_node(trains, trains->members[i])->links[trains->chain_link[i]].ln_interval);
    struct train train = {.number = open->number,
                          .interval_frames =
                              n_intervals ? median_of(trains->sorted, n_intervals) * trains->rate_hz : 0,
                          .jitter = jitter,
                          .members = trains->members};
    for (uint32_t i = 0; i < n; i++)
        trains_node(trains, trains->members[i])->owner = open->number;
    for (uint32_t i = 0; i < n / 2; i++) {
        uint64_t swap = trains->members[i];
        trains->members[i] = trains->members[n - 1 - i];
        trains->members[n - 1 - i] = swap;
    }
    struct train_pulses pulses = {member_of, trains, n};
    train_describe(&pulses, trains->sorted, trains->arrivals, &train);
    open->given = open->last;
    open->given_time_s = trains_node(trains, open->last)->time_s;
    train.machine = steady;
    describe_chance(trains, open, &train);
    sink->take(sink->context, &train);
}

/* Opens a train for the chain that ends with link `best` of the newest pulse, if it is one. */
static void try_to_open(struct trains *trains, uint32_t best, const struct train_sink *sink,
                        uint64_t *rejections)
{
    const struct train_shape *shape = &trains->call_class.train;
    uint64_t number = trains->n_pulses - 1;
    struct node *node = trains_node(trains, number);
    struct link *link = &node->links[best];
    if (!trains_may_be_certain(trains, link))
        return;
    uint32_t n = trains_walk(trains, number, best, UINT64_MAX, JUDGED_PULSES), hidden = 0;
    for (uint32_t i = 0; i < n; i++) {
        uint32_t owner = trains_node(trains, trains->members[i])->owner;
        hidden += owner == HIDDEN;
        if (owner != 0 && owner != HIDDEN)
            n = i; /* what lies before belongs to another train */
    }
    if (n < shape->min_pulses + hidden || 2 * hidden > n)
        return;
    double jitter = trains_walked_jitter(trains, n);
    if (jitter > shape->max_jitter || (jitter < shape->min_jitter && n < MACHINE_PULSES))
        return;
    if (node->pulse.foreign && jitter >= shape->min_jitter)
        return;
    n = trains_find_certain(trains, n, shape->min_pulses + hidden);
    if (n == 0)
        return;
    struct open_train *open = free_place(trains);
    if (!open) {
        rejections[REJECT_TOO_MANY]++;
        return;
    }
    *open = (struct open_train){.number = ++trains->n_trains,
                                .last = number,
                                .last_link = best,
                                .evidence = MOST_EVIDENCE,
                                .best = number,
                                .best_link = best,
                                .excess = trains->certain_excess,
                                .strays_hz = trains->certain_strays_hz};
    open->given = trains->members[n - 1] - 1; /* wraps to "none" before the very first pulse */
    link->train = open->number;
    give(trains, open, sink, rejections);
}

static void end_train(struct trains *trains, struct open_train *open, const struct train_sink *sink,
                      uint64_t *rejections)
{
    open->last = open->best;
    open->last_link = open->best_link;
    uint32_t n = trains_walk(trains, open->last, open->last_link, open->given, TRAINS_MAX_MEMBERS);
    if (n >= MIN_PIECE)
        give(trains, open, sink, rejections);
    else
        for (uint32_t i = 0; i < n; i++)
            trains_node(trains, trains->members[i])->owner = open->number;
    open->number = 0;
}

/* The pulse two before a train's end is settled enough to be the train's alone. */
static void claim(struct trains *trains, const struct open_train *open)
{
    uint64_t number = open->last;
    uint32_t link = open->last_link;
    for (int back = 0; back < 2; back++) {
        if (link == UINT32_MAX || !trains_remember(trains, number))
            return;
        const struct link *step = &trains_node(trains, number)->links[link];
        number = step->previous;
        link = step->n == 2 ? UINT32_MAX : step->previous_link;
    }
    if (trains_remember(trains, number) && trains_node(trains, number)->owner == 0)
        trains_node(trains, number)->owner = open->number;
}

/* Stray pulses a second that came between the last pulses of a train and could have been the newest. */
static double fading_strays(struct trains *trains, struct open_train *open)
{
    const struct node *node = trains_node(trains, trains->n_pulses - 1);
    if (!trains_remember(trains, open->last))
        return 1;
    open->strays *= FADING;
    open->strays_s = open->strays_s * FADING + node->time_s - trains_node(trains, open->last)->time_s;
    for (uint64_t k = open->last + 1; k + 1 < trains->n_pulses; k++) {
        const struct node *stray = trains_node(trains, k);
        double fit = trains_fit_level(stray->level_db - node->level_db, LEVEL_DEVIATION_DB);
        open->strays += fit > LEAST_FIT ? fit * trains_fit_shape(stray, node) : 0;
    }
    return open->strays / fmax(open->strays_s, 1e-3) + trains_noise_rate(trains, node->pulse.snr) +
           RATE_FLOOR;
}

/* Makes the newest pulse, with that link, the end of a train. */
static void lengthen(struct trains *trains, struct open_train *open, uint32_t link,
                     const struct train_sink *sink, uint64_t *rejections)
{
    uint64_t number = trains->n_pulses - 1;
    const struct node *node = trains_node(trains, number);
    double gain = node->links[link].gain - log(fading_strays(trains, open));
    open->evidence = fmin(MOST_EVIDENCE, open->evidence + gain);
    if (open->evidence < 0) {
        end_train(trains, open, sink, rejections);
        return;
    }
    open->last = number;
    open->last_link = link;
    open->total += gain;
    if (open->total >= open->best_total) {
        open->best_total = open->total;
        open->best = number;
        open->best_link = link;
    }
    claim(trains, open);
    double piece_s = fmax(PIECE_S, PIECE_INTERVALS * trains->call_class.train.max_interval_s);
    if (node->time_s - open->given_time_s >= piece_s || number - open->given >= PIECE_PULSES)
        give(trains, open, sink, rejections);
}

/* Lets the newest pulse carry on the open trains that reach it; a chain that fits better than a train's
 * present end takes its place. */
static void carry_on(struct trains *trains, const struct train_sink *sink, uint64_t *rejections)
{
    const struct node *node = trains_node(trains, trains->n_pulses - 1);
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
        if (follows || !trains_remember(trains, open->last) ||
            node->links[best].rank > trains_node(trains, open->last)->links[open->last_link].rank)
            lengthen(trains, open, best, sink, rejections);
    }
}

void trains_push(struct trains *trains, const struct pulse *pulse, const struct train_sink *sink,
                 uint64_t *rejections)
{
    trains_add_node(trains, pulse, rejections);
    const struct train_shape *shape = &trains->call_class.train;
    uint64_t number = trains->n_pulses - 1;
    struct node *node = trains_node(trains, number);
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

/* Whether a train has been silent too long since that pulse of it. */
static bool is_silent_since(const struct trains *trains, uint64_t number, uint32_t link, double time_s)
{
    const struct node *node = trains_node(trains, number);
    return !trains_remember(trains, number) ||
           time_s - node->time_s > END_INTERVALS * exp(node->links[link].ln_interval);
}

/* What has added nothing to a train for as long as silence ends it is chance, and does not hold it back. */
void trains_advance(struct trains *trains, double frame, const struct train_sink *sink, uint64_t *rejections)
{
    for (int t = 0; t < MAX_OPEN; t++) {
        struct open_train *open = &trains->open[t];
        if (open->number && is_silent_since(trains, open->best, open->best_link, frame / trains->rate_hz))
            end_train(trains, open, sink, rejections);
    }
}

void trains_finish(struct trains *trains, const struct train_sink *sink, uint64_t *rejections)
{
    for (int t = 0; t < MAX_OPEN; t++)
        if (trains->open[t].number)
            end_train(trains, &trains->open[t], sink, rejections);
    for (uint64_t k = trains->n_pulses; k > 0 && trains_remember(trains, k - 1); k--)
        rejections[trains_node(trains, k - 1)->pulse.foreign ? REJECT_SHAPE : REJECT_NO_RHYTHM] +=
            trains_node(trains, k - 1)->owner == 0;
    trains_reset(trains);
}

void trains_hide(struct trains *trains, double start_frame, double end_frame, uint64_t *rejections)
{
    hidden_add(&trains->hidden, start_frame / trains->rate_hz, end_frame / trains->rate_hz);
    for (uint64_t k = trains->n_pulses; k > 0 && trains_remember(trains, k - 1); k--) {
        struct node *node = trains_node(trains, k - 1);
        if (node->pulse.frame < start_frame)
            return;
        if (node->pulse.frame > end_frame || node->owner != 0)
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
