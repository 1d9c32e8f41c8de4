/* What the files of call/trains share: the pulses remembered, the chains that reach each, and the open
 * trains. For lib/call/trains*.c only. */
#ifndef CALL_TRAINS_INSIDE_H
#define CALL_TRAINS_INSIDE_H

#include "call/trains.h"
#include <stdbool.h>

#define RING 1024 /* pulses remembered */
#define LINKS 8   /* chains kept for each pulse */
#define MAX_OPEN 16
#define MAX_STEP 3 /* intervals between neighbours of a chain: two missed pulses */
#define GATE_DEVIATIONS 2.5
#define DETECTED 0.8         /* chance that a pulse of a train is found at all */
#define LEVEL_DEVIATION_DB 6 /* between neighbours: a beam that sweeps past changes it by up to 8 dB */
#define LEVEL_GATE_DB 15     /* no neighbours beyond */
#define JUDGED_PULSES 64     /* the last ones of a chain decide whether it is a train */
#define LEVELS 24            /* steps of 3 dB in which pulses are counted */
#define LEVEL_STEP_DB 3
#define RATE_FLOOR 0.01     /* stray pulses a second that are expected everywhere; a judgement, no source */
#define RATE_INTERVALS 20   /* longest intervals over which the rate of stray pulses is counted */
#define COMPETING_STEPS 128 /* of COMPETING_STEP_DB, from 0 dB */
#define COMPETING_STEP_DB 0.5
#define UNLIKE -2.0 /* pulse_shape_likeness; a judgement, no source */
#define HIDDEN UINT32_MAX

/* A train is either steady or free in its rhythm; a chain is scored as both. */
enum { NARROW, WIDE };

/* A chain that ends with this pulse, by its last pair. */
struct link {
    uint64_t previous; /* number of the pulse before */
    uint32_t previous_link;
    uint64_t first; /* pulse of the chain */
    double first_time_s;
    uint32_t train;     /* 0: none yet */
    uint32_t n;         /* pulses */
    uint32_t steps;     /* intervals in the last pair */
    double ln_interval; /* of the last pair, per step, s */
    double ln_ratio;    /* d of the last pair */
    double gain;        /* what the last pair added, at best */
    double score[2];    /* sum of ln densities, the rate of stray pulses left out, for either spread */
    double ln_rates;    /* sum of ln of the common rate, to compare chains by */
    double alike;       /* sum of the likenesses above 0 */
    double rank;        /* the better score and `alike` less ln_rates: which chains are kept */
};

struct node {
    struct pulse pulse;
    double time_s, level_db;
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
    double strays, strays_s;  /* that came between its last pulses, and in what time; fading */
    double evidence;          /* running, of its last steps: below 0 the rhythm is lost (Page 1954) */
    double total, best_total; /* the same without limits, and where it was greatest: */
    uint64_t best;            /* pulse and link there: what follows, if the train ends, was chance */
    uint32_t best_link;
    bool machine;
};

struct trains {
    struct call_class call_class;
    double rate_hz;
    struct noise_rate noise;
    double ln_peak[2], deviation[2]; /* of ln(interval ratio): a quarter of max_jitter, and max_jitter */
    double ln_steps[MAX_STEP + 1];   /* ln p_d (1 - p_d)^(m - 1) */
    double ln_m[MAX_STEP + 1];
    double ln_limit[MAX_STEP]; /* ln of an interval's ratio from which m + 1 steps are likelier than m */
    double ln_range;           /* ln of ln(max / min interval) */
    double rate_above[LEVELS]; /* running, of pulses at each level or more, a second */
    uint64_t n_pulses;         /* taken */
    uint32_t n_trains;
    struct node *ring;
    struct open_train open[MAX_OPEN];
    uint64_t members[TRAINS_MAX_MEMBERS];
    uint32_t competing[COMPETING_STEPS]; /* strays by level, each step with those above it */
    double sorted[TRAINS_MAX_MEMBERS], arrivals[TRAINS_MAX_MEMBERS];
    uint32_t chain_link[TRAINS_MAX_MEMBERS];
};

static inline struct node *trains_node(const struct trains *trains, uint64_t number)
{
    return &trains->ring[number % RING];
}

static inline double trains_noise_rate(const struct trains *trains, double snr)
{
    return trains->noise.get(trains->noise.context, snr);
}

static inline bool trains_remember(const struct trains *trains, uint64_t number)
{
    return number + RING > trains->n_pulses;
}

/* False when two pulses look too different to be of one animal: neither can take the other's place. */
static inline bool trains_may_be_one(const struct node *a, const struct node *b)
{
    return pulse_shape_likeness(&a->pulse.shape, &b->pulse.shape) > UNLIKE;
}

/* Remembers a pulse and finds the chains that reach it, and how often pulses of its level come.
 * trains_chains.c */
void trains_add_node(struct trains *trains, const struct pulse *pulse, uint64_t *rejections);
/* Walks a chain back from its end into members[] and chain_link[], at most until after pulse `until`
 * (UINT64_MAX: to its start) or for `most` pulses. Gives the number of pulses, the last first. */
uint32_t trains_walk(struct trains *trains, uint64_t number, uint32_t link, uint64_t until, uint32_t most);
/* Root mean square of d over the first n pulses that trains_walk gave. */
double trains_walked_jitter(const struct trains *trains, uint32_t n);
/* The step of level from which pulses compete with a pulse: one below its own. */
int trains_level_index(const struct node *node);

/* trains_chance.c: spares most chains the walk: false when a rate of stray pulses that is surely too low
 * would not do. */
bool trains_may_be_certain(const struct trains *trains, const struct node *node, const struct link *link);
/* How many of the chain in members[0..n), the last first and `least` or more, are most surely more than
 * chance; 0 where they are not. Uses competing[]. */
uint32_t trains_find_certain(struct trains *trains, uint32_t n, uint32_t least);

#endif
