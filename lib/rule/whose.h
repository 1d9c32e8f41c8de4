/* Whose impulse it is: ours, another's, or unknown; for the impulses of one channel, in the order of their
 * times. Plain data without pointers: a function of what was taken, so a rerun of a ledger rebuilds it.
 *
 * Method, the project's own: impulses are tied into trains, each with a slowly varying interval and a level,
 * and each new one goes to the train under which its time and level are most likely, or to none. What a crew
 * says decides whose a train is: one that was heard before the source was said to sound is another's, and so
 * is one that appears between the blows of ours and goes on beside them. In doubt it counts as ours, so that
 * the job's sums are rather too great than too small; only what is far weaker than ours is unknown.
 *
 * Call order: whose_reset, then whose_take for every impulse. */
#ifndef RULE_WHOSE_H
#define RULE_WHOSE_H

#include "level/impulse.h"
#include <stdbool.h>
#include <stdint.h>

#define WHOSE_MAX_TRAINS 4 /* beyond them the one that was heard longest ago is forgotten */
#define WHOSE_KEPT 8       /* last impulses of a train */
#define WHOSE_MAX_LOOSE 32 /* last impulses that fit no train */
/* An impulse that fits no train is ours when its level lies between these about ours, in dB. A soft start's
 * energy steps are several dB upwards; the lower end keeps out what adds less than a quarter of the energy.
 */
#define WHOSE_BELOW_DB 6.0
#define WHOSE_ABOVE_DB 12.0

enum whose_owner {
    OWNER_NONE,      /* no train stands here */
    OWNER_OURS,      /* heard first while the source was said to sound */
    OWNER_OTHERS,    /* another project's */
    OWNER_RIVAL,     /* beside ours, and it cannot be said which of the two is ours: both count */
    OWNER_UNSETTLED, /* heard first while a job was open and the source said to be silent */
};

struct whose_train {
    enum whose_owner owner;
    bool told;                   /* a person has said whose it is: what is heard changes it no more */
    bool adopted;                /* ours only because nothing else was heard when ours should have been */
    uint32_t n;                  /* impulses taken in all */
    int64_t time_ns[WHOSE_KEPT]; /* the newest first */
    double level_db[WHOSE_KEPT]; /* NAN where the impulse had none */
    double slow_s;               /* its interval over some twenty impulses; NAN before it is a train */
    double slow_spread;          /* of it, as a share; NAN likewise */
    double slow_db;              /* its level over some twenty impulses; NAN before the first with one */
    double first_db;             /* its level when it was found; NAN where that does not matter */
    double ours_then_db;         /* and ours at that time */
};

/* What the crew has said. */
struct whose_said {
    bool on;         /* the source is said to sound */
    bool job;        /* a job is open */
    int64_t on_ns;   /* when it was last said to sound after silence; -1 never */
    int64_t said_ns; /* when anything was last said of the source; -1 never */
};

struct whose_impulse {
    int64_t time_ns;
    double level_db; /* NAN where there is none */
    /* From a feed: the time at which our blow must arrive, nearest to this impulse, and one standard
     * deviation of it. expected_ns -1: there is no feed. Within three deviations it is ours, whatever the
     * rhythm. */
    int64_t expected_ns;
    double expected_spread_s;
};

struct whose {
    struct whose_train trains[WHOSE_MAX_TRAINS];
    uint32_t n_loose;
    int64_t loose_ns[WHOSE_MAX_LOOSE]; /* the newest first */
    double loose_db[WHOSE_MAX_LOOSE];
    int64_t on_ns; /* of the work that the trains belong to */
};

void whose_reset(struct whose *whose);
/* Decides and learns. Impulses whose times run backwards are decided by level alone. */
enum impulse_whose whose_take(struct whose *whose, const struct whose_said *said,
                              const struct whose_impulse *impulse);

/* A person has said whose these impulses of one train are, the last n of them, oldest first: they make a
 * train of their own and belong to no other. Another train that is ours goes on to count, as nobody has said
 * that it is not. (whose_train.c) */
void whose_tell(struct whose *whose, uint32_t n, const int64_t *times_ns, const double *levels_db, bool ours);
/* A free place, or that of the train, not ours, that was heard longest ago; with nothing in it. */
struct whose_train *whose_new_train(struct whose *whose, enum whose_owner owner);

/* ---- one train (whose_train.c) */
/* How an impulse fits a train: the logarithm of the likelihood of its time and level (per second and dB), and
 * whether the time alone fits the rhythm. A train that has been silent for long has no phase to fit. */
enum whose_phase { WHOSE_IN_RHYTHM, WHOSE_OFF_RHYTHM, WHOSE_NO_RHYTHM };
struct whose_fit {
    double log_likelihood;
    enum whose_phase phase;
};
struct whose_fit whose_train_fit(const struct whose_train *train, int64_t time_ns, double level_db);
void whose_train_add(struct whose_train *train, int64_t time_ns, double level_db);
/* Robust; of another's train over long, since a few of ours may pass for its own. NAN before two impulses. */
double whose_train_interval_s(const struct whose_train *train);
/* What it is expected to be: of another's train over long, since ours may pass through its level. */
double whose_train_expected_db(const struct whose_train *train);
double whose_train_level_db(const struct whose_train *train); /* of the last five, median; NAN for none */
/* Ties the newest loose impulse to earlier ones at its level in equal steps; one in two steps may be missing.
 * Gives how many and their places, the newest first; fewer than four are no train. */
uint32_t whose_find_train(const struct whose *whose, uint32_t places[WHOSE_MAX_LOOSE]);

#endif
