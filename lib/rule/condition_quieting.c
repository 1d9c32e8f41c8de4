/* A quieting measure must be at work before the first impulse. */
#include "rule/condition.h"
#include <string.h>

static bool holds(const struct watch *watch, struct why *why, int64_t *until_ns)
{
    const struct permit_quieting *quieting = &watch->permit->quieting;
    if (!quieting->stated || watch->quieting.on)
        return false;
    why_reset(why, quieting->clause, "the quieting measure is not at work");
    why_add_cause(why, watch->quieting.id);
    *until_ns = -1;
    return true;
}

static void take_note(struct watch *watch, const struct note *note)
{
    if (note->kind != NOTE_QUIETING)
        return;
    bool was_on = watch->quieting.on;
    watch->quieting.on = strcmp(note->answer, "on") == 0;
    memcpy(watch->quieting.id, watch->recent.causes[0], sizeof watch->quieting.id);
    if (!was_on || watch->quieting.on || !watch->permit->quieting.stated || !source_sounds(watch->phase))
        return;
    struct why why;
    why_reset(&why, watch->permit->quieting.clause, "the quieting measure ends while the source sounds");
    why_add_cause(&why, watch->quieting.id);
    why_add_cause(&why, watch->phase_id);
    watch_say_finding(watch, "quieting ended", "firm", &why);
}

const struct condition condition_quieting = {
    .finding = "quieting missing", .holds = holds, .take_note = take_note};
