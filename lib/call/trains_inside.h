/* What the files of call/trains share: the pulses remembered, the chains that reach each, and the open
 * trains. For lib/call/trains*.c only. */
#ifndef CALL_TRAINS_INSIDE_H
#define CALL_TRAINS_INSIDE_H

#include "call/hidden.h"
#include "call/trains.h"
#include <math.h>
#include <stdbool.h>

#define RING 1024 /* pulses remembered */
#define LINKS 8   /* chains kept for each pulse */
#define MAX_OPEN 16
#define MAX_STEP 3 /* intervals between neighbours of a chain: two missed pulses */
#define GATE_DEVIATIONS 2.5
#define DETECTED 0.8            /* chance that a pulse of a train is found at all */
#define LEVEL_DEVIATION_DB 6.0  /* between neighbours: a beam that sweeps past changes it by up to 8 dB */
#define STEADY_DEVIATION_DB 2.5 /* likewise, of a beam that does not sweep */
#define LEVEL_GATE_DB 15        /* no neighbours beyond */
#define LEAST_FIT 0.02          /* a stray that fits a member less is not looked at: beyond 17 dB */
#define JUDGED_PULSES 64        /* the last ones of a chain decide whether it is a train */
#define RATE_FLOOR 0.01     /* stray pulses a second that are expected everywhere; a judgement, no source */
#define RATE_INTERVALS 20   /* longest intervals over which the rate of stray pulses is counted */
#define SAMPLED 48          /* pulses before one, from which it is told how often such pulses come */
#define COMPETING_STEPS 128 /* of COMPETING_STEP_DB, from 0 dB */
#define COMPETING_STEP_DB 0.5
#define NOISE_STEPS 64 /* of NOISE_STEP_DB, from the class's least level */
#define NOISE_STEP_DB 1.0
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
    double ln_rates;    /* sum of ln of the rate of pulses that look so, to compare chains by */
    double ln_fewest;   /* likewise of a rate of strays that is surely too low */
    double alike;       /* sum of the likenesses above 0 */
    double rank;        /* the better score and `alike` less ln_rates: which chains are kept */
};

struct node {
    struct pulse pulse;
    double time_s, level_db;
    double ln_rate;   /* of the rate at which pulses such as this come, by which chains are compared */
    double ln_fewest; /* of what noise alone gives of them */
    uint32_t owner;   /* train that has claimed it; 0 none, HIDDEN */
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
    double excess, strays_hz; /* when it was opened */
    bool machine;
};

/* What came before the newest pulse and looks like it. */
struct around {
    uint32_t n;
    double likeness[SAMPLED]; /* [n], the latest first; 0 of those far from its level */
};

struct trains {
    struct call_class call_class;
    double rate_hz;
    struct noise_rate noise;
    double ln_peak[2], deviation[2]; /* of ln(interval ratio): a quarter of max_jitter, and max_jitter */
    double ln_steps[MAX_STEP + 1];   /* ln p_d (1 - p_d)^(m - 1) */
    double ln_unmissed;              /* that a beat which nobody could hear is no miss */
    double ln_m[MAX_STEP + 1];
    double ln_limit[MAX_STEP]; /* ln of an interval's ratio from which m + 1 steps are likelier than m */
    double ln_range;           /* ln of ln(max / min interval) */
    struct around around;
    uint64_t n_pulses; /* taken */
    uint32_t n_trains;
    struct hidden hidden; /* s */
    struct node *ring;
    struct open_train open[MAX_OPEN];
    uint64_t members[TRAINS_MAX_MEMBERS];
    float competing[COMPETING_STEPS]; /* strays by level, by how well they could take a member's place */
    double noise_in[NOISE_STEPS];     /* [n_noise]: pulses a second that noise gives in each step of level */
    uint32_t n_noise;
    double sorted[TRAINS_MAX_MEMBERS], arrivals[TRAINS_MAX_MEMBERS];
    uint32_t chain_link[TRAINS_MAX_MEMBERS];
    double certain_excess, certain_strays_hz; /* of what trains_find_certain found last */
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

/* How well a stray pulse could stand in a chain beside a member: what the step from one to the other would
 * cost the chain, as a factor. Strays are counted with the very weights with which pulses are tied, so that
 * whatever levels and shapes the strays of a sea have, a step by chance has an expected ratio near 1. */
double trains_fit_level(double difference_db, double spread_db);
static inline double trains_likeness(const struct node *a, const struct node *b)
{
    if (a->pulse.foreign != b->pulse.foreign)
        return -INFINITY;
    return pulse_shape_likeness(&a->pulse.shape, &b->pulse.shape);
}
static inline double trains_fit_shape(const struct node *a, const struct node *b)
{
    return exp(fmin(0, trains_likeness(a, b)));
}

/* Remembers a pulse and finds the chains that reach it, and how often pulses of its level come.
 * trains_chains.c */
void trains_add_node(struct trains *trains, const struct pulse *pulse, uint64_t *rejections);
/* Walks a chain back from its end into members[] and chain_link[], at most until after pulse `until`
 * (UINT64_MAX: to its start) or for `most` pulses. Gives the number of pulses, the last first. */
uint32_t trains_walk(struct trains *trains, uint64_t number, uint32_t link, uint64_t until, uint32_t most);
/* Root mean square of d over the first n pulses that trains_walk gave. */
double trains_walked_jitter(const struct trains *trains, uint32_t n);

/* trains_chance.c: spares most chains the walk: false when a rate of stray pulses that is surely too low
 * would not do. */
bool trains_may_be_certain(const struct trains *trains, const struct link *link);
/* How many of the chain in members[0..n), the last first and `least` or more, are most surely more than
 * chance; 0 where they are not. Uses competing[]. */
uint32_t trains_find_certain(struct trains *trains, uint32_t n, uint32_t least);

#endif
