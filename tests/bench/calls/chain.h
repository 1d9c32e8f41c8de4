/* The whole of one stream's hearing: blocks, listen, watch; remembers the calls, the impulses and the grades
 * of contacts. An event does not tell when each pulse of a train arrived; where that is asked for, a second
 * pulse finder takes the same samples and the same masks in the same order, and what it gives is the same
 * trains, with their pulses. */
#ifndef BENCH_CALLS_CHAIN_H
#define BENCH_CALLS_CHAIN_H

#include "bench/calls/calls.h"
#include "call/pulses.h"
#include "listen/blocks.h"
#include "listen/listen.h"
#include "rule/permit.h"
#include "rule/watch.h"

#define CHAIN_MAX_CONTACTS 4096

struct chain_call {
    uint32_t class_index, n_pulses;
    uint32_t n_sounds; /* of what is no animal's; 0: an animal's */
    enum group group;
    enum call_form form;
    double start_s, end_s, low_hz, high_hz, snr_db;
    double delay_s; /* from its end to its entry */
    double certainty;
    double measures[CALL_MEASURES];
};

/* A train with the arrivals of its pulses, in seconds: arrivals[first .. first + n_pulses). */
struct chain_train {
    uint32_t class_index, n_pulses, first;
    double start_s, end_s;
};

struct chain {
    const struct catalogue *catalogue;
    struct permit permit;
    struct blocks *blocks;
    struct listen *listen;
    struct watch *watch;
    uint32_t n_calls, room;
    struct chain_call *calls;
    double *impulses_s; /* [n_impulses] */
    uint32_t n_impulses, impulses_room;
    double rate_hz, pa_per_unit;
    uint32_t n_channels;
    struct pulses *second; /* NULL: not asked for */
    float *pascals;        /* of a block */
    uint32_t n_trains, trains_room, n_arrivals, arrivals_room;
    struct chain_train *trains;
    double *arrivals;
    uint8_t grades[CHAIN_MAX_CONTACTS]; /* the highest that each contact reached */
};

/* Calibrated channels (1 or 2) that listen and measure, as chain_hydrophone has them; the site settings are
 * the defaults, the permit that of the demonstration. `arrivals`, of one channel only: when each pulse of a
 * train arrived is wanted. False where anything fails. */
bool chain_create(struct chain *chain, const struct catalogue *catalogue, double rate_hz, uint32_t n_channels,
                  bool arrivals);
void chain_destroy(struct chain *chain);
void chain_push(struct chain *chain, const float *frames, uint32_t n);
void chain_finish(struct chain *chain);
/* The arrivals of the call's pulses, [call->n_pulses], borrowed; NULL for a tone, or where the second finder
 * has not that train. */
const double *chain_get_arrivals(const struct chain *chain, const struct chain_call *call);
/* How many contacts reached at least this grade. */
uint32_t chain_count_contacts(const struct chain *chain, enum contact_grade grade);
/* Where and how channel `channel` (from 0) listens: 10 m apart. */
struct scene_hydrophone chain_hydrophone(uint32_t channel);

#endif
