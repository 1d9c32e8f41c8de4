/* A short list of stretches of watch time, in order and apart from each other. */
#ifndef RULE_SPANS_H
#define RULE_SPANS_H

#include <stdint.h>

#define SPANS_MAX 64

struct span {
    int64_t start_ns, end_ns;
};

/* What becomes of the stretches where one more finds no room. Folding takes the two neighbours that lie
 * within the least time and moves one against the other. It changes no total; the sum over the time since any
 * moment is never too short (SPANS_FOLD_LATER) or never too long (SPANS_FOLD_EARLIER), and errs only where
 * that moment cuts through what was folded. */
enum spans_full {
    SPANS_FORGET,      /* the oldest goes: for what only the newest is wanted of */
    SPANS_FOLD_LATER,  /* the earlier one moves on: for what is bound from above, as outages */
    SPANS_FOLD_EARLIER /* the later one moves back: for what is wanted, as good watch */
};

struct spans {
    enum spans_full full;
    uint32_t n;
    struct span all[SPANS_MAX];
};

/* Adds a stretch and joins those that touch. An empty one changes nothing. */
void spans_add(struct spans *spans, int64_t start_ns, int64_t end_ns);
/* What a and b have in common; out may be a or b, and folds as it did. */
void spans_common(const struct spans *a, const struct spans *b, struct spans *out);
/* What is in a and not in b; out may be a or b, and folds as it did. */
void spans_without(const struct spans *a, const struct spans *b, struct spans *out);
/* Forgets what was before that time. */
void spans_forget_before(struct spans *spans, int64_t time_ns);
/* Leaves only the newest total_ns of them. */
void spans_newest(struct spans *spans, int64_t total_ns);
/* The sum of what lies after that time. */
int64_t spans_since_ns(const struct spans *spans, int64_t time_ns);
/* The sum of all stretches. */
int64_t spans_total_ns(const struct spans *spans);

#endif
