/* The words of the flow, each in one table, and the ids of entries. */
#include "flow.h"
#include <inttypes.h>
#include <stdio.h>

#define TEXT_OF(table, value)                                                                                \
    ((size_t)(value) < sizeof(table) / sizeof((table)[0]) ? (table)[(size_t)(value)] : "unknown")

static const char *const phase_words[] = {
    [PHASE_OFF] = "off",
    [PHASE_PRE_WATCH] = "pre-watch",
    [PHASE_READY] = "ready",
    [PHASE_DELAY] = "delay",
    [PHASE_DETERRENT] = "deterrent",
    [PHASE_SOFT_START] = "soft start",
    [PHASE_HOLD] = "hold",
    [PHASE_FULL_POWER] = "full power",
    [PHASE_REDUCED] = "reduced",
    [PHASE_VIBRO] = "vibro",
    [PHASE_DRILLING] = "drilling",
    [PHASE_LINE_TURN] = "line turn",
    [PHASE_TEST] = "test",
    [PHASE_BREAK] = "break",
    [PHASE_SHUTDOWN] = "shutdown",
    [PHASE_POST_WATCH] = "post-watch",
};

static const char *const advice_words[] = {
    [ADVICE_CARRY_ON] = "carry on",
    [ADVICE_MAY_START] = "may start",
    [ADVICE_RESUME] = "resume",
    [ADVICE_NEW_SOFT_START] = "new soft start",
    [ADVICE_DO_NOT_START] = "do not start",
    [ADVICE_PREPARE_TO_STOP] = "prepare to stop",
    [ADVICE_HOLD_POWER] = "hold power",
    [ADVICE_REDUCE_POWER] = "reduce power",
    [ADVICE_STOP] = "stop",
};

static const char *const grade_words[] = {[GRADE_NONE] = "", [GRADE_LOOK] = "look", [GRADE_ACT] = "act"};

static const char *const state_words[] = {
    [CONTACT_OPEN] = "open",
    [CONTACT_LEFT] = "left",
    [CONTACT_CLEARED] = "cleared",
    [CONTACT_DISMISSED] = "dismissed",
};

static const char *const cause_words[] = {
    [UNHEARD_GAP] = "gap",
    [UNHEARD_CLIPPING] = "clipping",
    [UNHEARD_OWN_SOURCE] = "own source",
    [UNHEARD_DEAD_CHANNEL] = "dead channel",
    [UNHEARD_TOO_QUIET] = "too quiet",
};

static const char *const whose_words[] = {
    [IMPULSE_OURS] = "ours",
    [IMPULSE_OTHERS] = "other",
    [IMPULSE_UNKNOWN] = "unknown",
};

static const char *const from_words[] = {
    [BEARING_NONE] = "", [BEARING_TRUE] = "true", [BEARING_AHEAD] = "ahead"};
static const char *const basis_words[] = {"by entry", "by sound", "by both"};
static const char *const form_words[] = {
    [CALL_TONE] = "tone", [CALL_TRAIN] = "train", [CALL_NOISE] = "noise"};

static const char *const event_kinds[] = {
    [EVENT_RUN] = "run",           [EVENT_UNHEARD] = "unheard", [EVENT_LEVEL] = "level",
    [EVENT_IMPULSE] = "impulse",   [EVENT_CALL] = "call",       [EVENT_NOTE] = "note",
    [EVENT_POSITION] = "position",
};

void flow_id(uint32_t run, uint32_t stream, const char *kind, uint64_t counter, char out[FLOW_ID_SIZE])
{
    snprintf(out, FLOW_ID_SIZE, "%" PRIu32 ".%" PRIu32 ".%s.%" PRIu64, run, stream, kind, counter);
}

const char *flow_event_kind_text(enum event_kind kind)
{
    return TEXT_OF(event_kinds, kind);
}

const char *flow_outcome_kind_text(const struct outcome *outcome)
{
    switch (outcome->kind) {
    case OUTCOME_EVENT:
        return flow_event_kind_text(outcome->as.event.kind);
    case OUTCOME_CONTACT:
        return "contact";
    case OUTCOME_PHASE:
        return "phase";
    case OUTCOME_ADVICE:
        return "advice";
    case OUTCOME_FINDING:
        return "finding";
    case OUTCOME_EXPOSURE:
        return "exposure";
    case OUTCOME_CORRECTION:
        return "correction";
    case OUTCOME_SOURCE:
        return "source";
    }
    return "unknown";
}

const char *phase_text(enum phase phase)
{
    return TEXT_OF(phase_words, phase);
}

const char *advice_text(enum advice_word advice)
{
    return TEXT_OF(advice_words, advice);
}

const char *grade_text(enum contact_grade grade)
{
    return TEXT_OF(grade_words, grade);
}

const char *contact_state_text(enum contact_state state)
{
    return TEXT_OF(state_words, state);
}

const char *unheard_cause_text(enum unheard_cause cause)
{
    return TEXT_OF(cause_words, cause);
}

const char *impulse_whose_text(enum impulse_whose whose)
{
    return TEXT_OF(whose_words, whose);
}

const char *bearing_from_text(enum bearing_from from)
{
    return TEXT_OF(from_words, from);
}

const char *call_form_text(enum call_form form)
{
    return TEXT_OF(form_words, form);
}

const char *finding_basis_text(enum finding_basis basis)
{
    return TEXT_OF(basis_words, basis);
}
