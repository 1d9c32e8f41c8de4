/* What must always hold of the watch, whatever happens, kept from the events and the permit alone, by other
 * means than the watch's: the last sure detections, who is on watch, the last release. */
#ifndef SUPPORT_PROMISES_H
#define SUPPORT_PROMISES_H

#include "flow.h"
#include "rule/permit.h"
#include "support/random_day.h"
#include <stdbool.h>
#include <stdint.h>

struct promises {
    const struct permit *permit;
    bool visual[RANDOM_PEOPLE], acoustic[RANDOM_PEOPLE];
    int64_t kept_ns, mark_ns; /* for how long all whom the permit needs were on watch, all in all */
    /* Until when a group holds by a detection that is inside a zone whatever one thinks of distances, and
     * from when the crew must know of it. */
    int64_t seen_until_ns[PERMIT_MAX_ZONES][GROUP_COUNT], told_from_ns[PERMIT_MAX_ZONES][GROUP_COUNT];
    /* The same by a sure call, while nobody has said where anything is. */
    int64_t heard_until_ns[GROUP_COUNT], heard_told_ns[GROUP_COUNT];
    int64_t placed_ns;
    int64_t released_ns; /* by somebody on watch; -1 when the source sounded since */
    bool overridden;     /* since the source last began */
};

void promises_reset(struct promises *promises, const struct permit *permit);
/* Time passes, then the event comes. */
void promises_take(struct promises *promises, const struct event *event);
/* What the crew is told (-1: nothing yet) in a phase that began at since_ns, after all that is known: false,
 * with a sentence, where that must not be. The observer is asked anew where a phase begins to ask for
 * something. */
bool promises_kept(const struct promises *promises, enum phase phase, int64_t since_ns, int crew_word,
                   int64_t now_ns, char problem[256]);
/* Whether the event is a fault, or somebody's leaving: nothing of that takes a restraint away. */
bool promises_is_fault(const struct event *event);
/* Whether the word restrains the crew. */
bool promises_restrains(int word);

#endif
