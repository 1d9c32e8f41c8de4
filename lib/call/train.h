/* A train: pulses that are thought to be of one animal or machine, and what they look like together. */
#ifndef CALL_TRAIN_H
#define CALL_TRAIN_H

#include "call/catalogue.h"
#include "call/trigger.h"
#include <stdbool.h>
#include <stdint.h>

/* One piece of a train; `members` are the numbers of its pulses, counted from 0 in the order in which they
 * were pushed. */
struct train {
    bool machine;    /* its rhythm is too steady for an animal */
    uint32_t number; /* of the train: pieces of one train share it; from 1 */
    double start_frame, end_frame;
    double interval_frames; /* median between neighbouring pulses (a missed one accounted for) */
    double jitter;          /* root mean square of ln(interval ratio) */
    double excess;          /* nats by which it is more than chance than its class asks for */
    double strays;          /* pulses that come at random, as many as one interval has */
    double likeness;        /* mean of its neighbours' (pulse_shape.h), none below 0 */
    double snr_db;          /* medians of the pulses', as the rest */
    double centroid_hz, bandwidth_hz, length_s, sweep_hz_s;
    double start_energy, end_energy;
    uint32_t n_pulses;
    const uint64_t *members; /* [n_pulses], borrowed for the call */
    const double *arrivals;  /* [n_pulses], frames; likewise */
};

struct train_sink {
    void (*take)(void *context, const struct train *train);
    void *context;
};

/* Fills in all but number, interval, jitter and members from n (1 or more) pulses in order of arrival, given
 * one by one by `get`. scratch[n]; arrivals[n] is filled and borrowed. */
struct train_pulses {
    const struct pulse *(*get)(const void *context, uint32_t i);
    const void *context;
    uint32_t n;
};
void train_describe(const struct train_pulses *pulses, double *scratch, double *arrivals, struct train *out);

/* Whether pulses such as these can be of the class: centroid, length and sweep within its limits. */
bool train_fits(const struct train *train, const struct train_shape *shape);
/* Whether one pulse that looks so can be of the class: within the same limits, half as far again, of its
 * sweep by as much as the noise lets it be known. */
bool train_may_have(const struct pulse *pulse, const struct call_class *call_class);
/* Whether it is narrower in frequency than any pulse of the class: a ping. */
bool train_is_narrow(const struct pulse *pulse, const struct train_shape *shape);

/* What its certainty rests on (call/certainty.h); class: of its pulses. */
void train_measure(const struct train *train, const struct call_class *call_class, double out[CALL_MEASURES]);

#endif
