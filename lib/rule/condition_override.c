/* Working on for the sake of safety against a stop: with a reason that the permit allows; no timer stops. */
#include "rule/condition.h"
#include <string.h>

static const struct {
    const char *word;
    uint32_t reason;
} reasons[] = {{"life", OVERRIDE_LIFE}, {"refusal", OVERRIDE_REFUSAL}, {"instability", OVERRIDE_INSTABILITY}};

static uint32_t reason_of(const char *word)
{
    for (size_t i = 0; i < sizeof reasons / sizeof reasons[0]; i++)
        if (strcmp(reasons[i].word, word) == 0)
            return reasons[i].reason;
    return 0;
}

enum permit_action override_limit(const struct watch *watch, enum permit_action action)
{
    const struct permit_override *rule = &watch->permit->override;
    return watch->override.allowed && action > rule->leaves ? rule->leaves : action;
}

static void take_note(struct watch *watch, const struct note *note)
{
    const struct permit_override *rule = &watch->permit->override;
    struct override_state *state = &watch->override;
    struct why why;
    if (note->kind != NOTE_OVERRIDE)
        return;
    if (strcmp(note->answer, "off") == 0) {
        if (!state->on)
            note_without_effect(watch, "no override is in force");
        state->on = state->allowed = false;
        return;
    }
    state->on = true;
    state->allowed = (reason_of(note->reason) & (rule->reasons | OVERRIDE_LIFE)) != 0;
    memcpy(state->id, watch->recent.causes[0], sizeof state->id);
    why_reset(&why, rule->clause, "%.60s works on for safety (%.20s): %.120s%s", note->person, note->reason,
              note->text, state->allowed ? "" : "; the permit does not allow that reason");
    why_add_cause(&why, state->id);
    why_add_cause(&why, watch->phase_id);
    watch_say_finding(watch, state->allowed ? "safety override" : "override not allowed", "firm", &why);
}

/* It ends with the source. */
static void enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    if (source_sounds(from) && !source_sounds(to))
        watch->override.on = watch->override.allowed = false;
}

const struct condition condition_override = {.take_note = take_note, .enter_phase = enter_phase};
