/* A watch that is less than the permit needs while the source sounds. Before a start the pre-watch waits for
 * it; what the acoustic watch may miss for a while is said by the permit's rule of outages where it has one.
 */
#include "base/time.h"
#include "rule/condition.h"
#include <stdio.h>

/* One who goes off and one who comes on need not do it in the same second (own choice). */
#define HANDOVER_NS (60 * TIME_NS_PER_S)

/* What is missing; NULL: nothing, or nobody needs it now. */
static const char *lacks(const struct watch *watch, const char **out_clause)
{
    const struct permit_pre_watch *need = effort_pre_watch(watch);
    struct why why;
    if (!source_sounds(watch->phase) || !contact_phase_asks(watch))
        return NULL;
    *out_clause = watch->permit->pre_watch_clause;
    if (need->visual && !effort_kept_as(watch, "visual"))
        return effort_missing_as(watch, "visual");
    if (!need->acoustic || (watch->permit->outage.stated && condition_outage.asks(watch, &why) == ACTION_LOG))
        return NULL;
    if (watch->permit->outage.stated)
        *out_clause = watch->permit->outage.clause;
    if (!effort_kept_as(watch, "acoustic"))
        return effort_missing_as(watch, "acoustic");
    return effort_deaf(watch) ? "no hydrophone is heard" : NULL;
}

static int64_t due_ns(const struct watch *watch)
{
    const struct quality_state *state = &watch->quality;
    return state->since_ns >= 0 && !state->found ? state->since_ns + HANDOVER_NS : INT64_MAX;
}

static void follow(struct watch *watch)
{
    struct quality_state *state = &watch->quality;
    const char *clause, *missing = lacks(watch, &clause);
    struct why why;
    if (!missing) {
        *state = (struct quality_state){.since_ns = -1};
        return;
    }
    if (state->since_ns < 0)
        state->since_ns = watch->now_ns;
    if (state->found || watch->now_ns < state->since_ns + HANDOVER_NS)
        return;
    state->found = true;
    why_reset(&why, clause, "the source sounds and %s, for %g s longer than the permit allows", missing,
              time_to_s(HANDOVER_NS));
    why_add_cause(&why, watch->phase_id);
    if (effort_deaf(watch))
        why_add_cause(&why, watch->effort.deaf_id);
    watch_say_finding(watch, "watch quality below the permit's", "firm", &why);
}

const struct condition condition_quality = {.due_ns = due_ns, .follow = follow};
