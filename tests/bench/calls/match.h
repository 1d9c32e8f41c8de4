/* What was found against what was there, one to one in time, group and form. */
#ifndef BENCH_CALLS_MATCH_H
#define BENCH_CALLS_MATCH_H

#include "bench/calls/chain.h"
#include "bench/calls/voices.h"

struct match {
    const struct voice *voices;
    uint32_t n_voices;
    uint32_t n_truths;
    struct truth_call *truths; /* in order of their start; `found` and `n_given` are written */
    const struct chain *chain;
    bool *right; /* [chain->n_calls]: a tone that is the one of its call; a train half of whose pulses are an
                    animal's of its group */
    uint32_t *n_right_pulses; /* [chain->n_calls]: of a train, clicks of its group */
    bool *of_group;           /* [chain->n_calls]: right, or a piece of a call of its group */
};

/* Decides. A tone is found when a call of its group covers half of it; each call and each truth is used once,
 * in order of time, the longest cover first. A click is given when a train of its group has a pulse that
 * arrives while it lasts. False without memory. */
bool match_make(struct match *match);
void match_free(struct match *match);

/* A row a voice: how many, found, recall, precision of its group's and form's calls. */
json_t *match_rows(const struct match *match);
/* What every class's calls truly were: class -> voice or "nothing" -> count. */
json_t *match_confusion(const struct match *match);
/* Every call of an animal's class: [class, form, right group 1 or 0, certainty, measures...]. `right` NULL:
 * none is. */
json_t *match_judged(const struct chain *chain, const bool *right);
/* A row a class: delays from the call's end to its entry. NULL without memory. */
json_t *match_delays(const struct match *match);

#endif
