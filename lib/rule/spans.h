/* A short list of stretches of watch time, in order and apart from each other. */
#ifndef RULE_SPANS_H
#define RULE_SPANS_H

#include <stdint.h>

#define SPANS_MAX 24

struct span {
    int64_t start_ns, end_ns;
};

/* When it is full the oldest stretch is forgotten: sums over 24 h (outages, watch hours, good watch) miss
 * what came before the newest SPANS_MAX stretches. */
struct spans {
    uint32_t n;
    struct span all[SPANS_MAX];
};

/* Adds a stretch and joins those that touch. An empty one changes nothing. */
void spans_add(struct spans *spans, int64_t start_ns, int64_t end_ns);
/* What a and b have in common; out may be a or b. */
void spans_common(const struct spans *a, const struct spans *b, struct spans *out);
/* What is in a and not in b; out may be a or b. */
void spans_without(const struct spans *a, const struct spans *b, struct spans *out);
/* The sum of all stretches. */
int64_t spans_total_ns(const struct spans *spans);

#endif
