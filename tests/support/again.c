/* Writes outcomes down as entries and derives them again; see again.h. */
#include "support/again.h"

#include "base/time.h"
#include "record/entry.h"
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define ZERO_NS (INT64_C(1772366400) * TIME_NS_PER_S)

struct kept {
    char kind[24];
    int64_t watch_ns; /* as the entry's utc says it */
    bool input;
    char *body;
};

struct again {
    size_t n, capacity;
    struct kept *all;
};

struct again *again_create(void)
{
    return calloc(1, sizeof(struct again));
}

void again_destroy(struct again *again)
{
    for (size_t i = 0; again && i < again->n; i++)
        free(again->all[i].body);
    if (again)
        free(again->all);
    free(again);
}

void again_take(struct again *again, const struct outcome *outcome)
{
    struct text body = {0};
    if (outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_LEVEL)
        return;
    if (again->n == again->capacity) {
        again->capacity = again->capacity ? 2 * again->capacity : 256;
        again->all = realloc(again->all, again->capacity * sizeof again->all[0]);
    }
    if (!again->all || entry_body(outcome, ZERO_NS, &body) != STATUS_OK)
        abort();
    struct kept *kept = &again->all[again->n++];
    *kept = (struct kept){.watch_ns = time_round_us(outcome->watch_ns),
                          .input = outcome->kind == OUTCOME_EVENT,
                          .body = body.data};
    snprintf(kept->kind, sizeof kept->kind, "%s", flow_outcome_kind_text(outcome));
}

static void take(void *context, const struct outcome *outcome)
{
    again_take(context, outcome);
}

static enum status derive(const struct kept *kept, struct watch *watch, const struct outcome_sink *sink,
                          int64_t *now_ns)
{
    struct event event;
    enum status status = STATUS_OK;
    if (kept->input) {
        status = entry_event(kept->kind, kept->body, kept->watch_ns, &event);
        if (status == STATUS_OK)
            status = watch_push(watch, &event, sink);
    } else if (kept->watch_ns > *now_ns)
        status = watch_advance(watch, kept->watch_ns, sink);
    *now_ns = kept->watch_ns > *now_ns ? kept->watch_ns : *now_ns;
    return status;
}

static bool same(const struct again *was, const struct again *is, char *problem, size_t problem_size)
{
    for (size_t i = 0; i < was->n || i < is->n; i++) {
        const struct kept *a = i < was->n ? &was->all[i] : NULL, *b = i < is->n ? &is->all[i] : NULL;
        if (a && b && strcmp(a->kind, b->kind) == 0 && a->watch_ns == b->watch_ns &&
            strcmp(a->body, b->body) == 0)
            continue;
        snprintf(problem, problem_size, "derived again it is not the same:\n%s\n%s",
                 a ? a->body : "(nothing)", b ? b->body : "(nothing)");
        return false;
    }
    return true;
}

bool again_same(const struct again *again, const struct watch_setup *setup, bool has_clock,
                int64_t zero_unix_ns, char *problem, size_t problem_size)
{
    struct again *is = again_create();
    const struct outcome_sink sink = {take, is};
    struct watch *watch;
    int64_t now_ns = 0;
    bool good = true;
    if (!is || watch_create(setup, &watch) != STATUS_OK)
        abort();
    if (has_clock)
        watch_set_clock(watch, zero_unix_ns);
    for (size_t i = 0; i < again->n && good; i++) {
        good = derive(&again->all[i], watch, &sink, &now_ns) == STATUS_OK;
        if (!good)
            snprintf(problem, problem_size, "cannot be taken again: %s", again->all[i].body);
    }
    good = good && same(again, is, problem, problem_size);
    watch_destroy(watch);
    again_destroy(is);
    return good;
}
