/* Random days at sea for one permit: what people enter, what is heard, faults, a lost link, restarts. */
#ifndef SUPPORT_RANDOM_DAY_H
#define SUPPORT_RANDOM_DAY_H

#include "base/random.h"
#include "flow.h"
#include "rule/permit.h"
#include <stdbool.h>
#include <stdint.h>

#define RANDOM_PEOPLE 6

struct random_day {
    struct random random;
    const struct permit *permit; /* borrowed */
    double pace_s;               /* mean time between events */
    int64_t now_ns;
    uint32_t run, n_jobs;
    unsigned lost_link; /* pieces of 10 s that are still to come */
    uint64_t counters[EVENT_POSITION + 1];
};

extern const char *const random_people[RANDOM_PEOPLE];

void random_day_reset(struct random_day *day, const struct permit *permit, uint64_t seed);
/* The next event, with its time, run and counter. One in a hundred is the start of a new run. */
void random_day_next(struct random_day *day, struct event *out);
/* Its run and counter; for events of the caller's own. */
void random_day_number(struct random_day *day, struct event *event);

#endif
