/* Stretches of watch time: union, intersection, difference. */
#include "rule/spans.h"
#include <string.h>

/* Makes room for one that stands behind all others, and takes it. */
static void fold_with(struct spans *spans, int64_t start_ns, int64_t end_ns)
{
    struct span all[SPANS_MAX + 1];
    memcpy(all, spans->all, sizeof spans->all);
    all[SPANS_MAX] = (struct span){start_ns, end_ns};
    uint32_t at = 0;
    for (uint32_t i = 1; i < SPANS_MAX; i++)
        if (all[i + 1].end_ns - all[i].start_ns < all[at + 1].end_ns - all[at].start_ns)
            at = i;
    int64_t rest_ns = all[at + 1].start_ns - all[at].end_ns;
    if (spans->full == SPANS_FOLD_LATER)
        all[at + 1].start_ns = all[at].start_ns + rest_ns;
    else
        all[at + 1] = (struct span){all[at].start_ns, all[at + 1].end_ns - rest_ns};
    memmove(all + at, all + at + 1, (SPANS_MAX - at) * sizeof all[0]);
    memcpy(spans->all, all, sizeof spans->all);
}

static void append(struct spans *spans, int64_t start_ns, int64_t end_ns)
{
    if (end_ns <= start_ns)
        return;
    if (spans->n == SPANS_MAX && spans->full != SPANS_FORGET) {
        fold_with(spans, start_ns, end_ns);
        return;
    }
    if (spans->n == SPANS_MAX)
        memmove(spans->all, spans->all + 1, --spans->n * sizeof spans->all[0]);
    spans->all[spans->n++] = (struct span){start_ns, end_ns};
}

void spans_add(struct spans *spans, int64_t start_ns, int64_t end_ns)
{
    if (end_ns <= start_ns)
        return;
    struct spans old = *spans;
    spans->n = 0;
    uint32_t i = 0;
    for (; i < old.n && old.all[i].end_ns < start_ns; i++)
        append(spans, old.all[i].start_ns, old.all[i].end_ns);
    for (; i < old.n && old.all[i].start_ns <= end_ns; i++) {
        start_ns = old.all[i].start_ns < start_ns ? old.all[i].start_ns : start_ns;
        end_ns = old.all[i].end_ns > end_ns ? old.all[i].end_ns : end_ns;
    }
    append(spans, start_ns, end_ns);
    for (; i < old.n; i++)
        append(spans, old.all[i].start_ns, old.all[i].end_ns);
}

void spans_common(const struct spans *a, const struct spans *b, struct spans *out)
{
    struct spans common = {.full = out->full};
    for (uint32_t i = 0, k = 0; i < a->n && k < b->n;) {
        const struct span *x = &a->all[i], *y = &b->all[k];
        append(&common, x->start_ns > y->start_ns ? x->start_ns : y->start_ns,
               x->end_ns < y->end_ns ? x->end_ns : y->end_ns);
        if (x->end_ns < y->end_ns)
            i++;
        else
            k++;
    }
    *out = common;
}

void spans_without(const struct spans *a, const struct spans *b, struct spans *out)
{
    struct spans rest = {.full = out->full};
    for (uint32_t i = 0; i < a->n; i++) {
        int64_t from = a->all[i].start_ns;
        for (uint32_t k = 0; k < b->n; k++) {
            if (b->all[k].end_ns <= from || b->all[k].start_ns >= a->all[i].end_ns)
                continue;
            append(&rest, from, b->all[k].start_ns);
            from = b->all[k].end_ns;
        }
        append(&rest, from, a->all[i].end_ns);
    }
    *out = rest;
}

void spans_forget_before(struct spans *spans, int64_t time_ns)
{
    uint32_t gone = 0;
    while (gone < spans->n && spans->all[gone].end_ns <= time_ns)
        gone++;
    spans->n -= gone;
    memmove(spans->all, spans->all + gone, spans->n * sizeof spans->all[0]);
    if (spans->n > 0 && spans->all[0].start_ns < time_ns)
        spans->all[0].start_ns = time_ns;
}

int64_t spans_total_ns(const struct spans *spans)
{
    int64_t total = 0;
    for (uint32_t i = 0; i < spans->n; i++)
        total += spans->all[i].end_ns - spans->all[i].start_ns;
    return total;
}

void spans_newest(struct spans *spans, int64_t total_ns)
{
    uint32_t first = spans->n;
    while (first > 0 && total_ns > 0) {
        struct span *span = &spans->all[--first];
        if (span->end_ns - span->start_ns > total_ns)
            span->start_ns = span->end_ns - total_ns;
        total_ns -= span->end_ns - span->start_ns;
    }
    spans->n -= first;
    memmove(spans->all, spans->all + first, spans->n * sizeof spans->all[0]);
}

int64_t spans_since_ns(const struct spans *spans, int64_t time_ns)
{
    int64_t total = 0;
    for (uint32_t i = spans->n; i > 0 && spans->all[i - 1].end_ns > time_ns; i--)
        total += spans->all[i - 1].end_ns -
                 (spans->all[i - 1].start_ns > time_ns ? spans->all[i - 1].start_ns : time_ns);
    return total;
}
