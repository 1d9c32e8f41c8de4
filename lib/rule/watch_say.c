/* Outcomes: counters, ids, reasons with their causes. */
#include "rule/watch_inner.h"
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

/* Thousands of times a day: without the price of a format. */
static void copy_text(char *out, size_t size, const char *text)
{
    size_t length = strnlen(text, size - 1);
    memmove(out, text, length);
    out[length] = '\0';
}

void why_reset(struct why *why, const char *clause, const char *format, ...)
{
    /* The text may come from the reason that is being replaced. */
    char text[FLOW_TEXT_SIZE];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(text, sizeof text, format, arguments);
    va_end(arguments);
    why->n_causes = 0;
    why->causes[0][0] = '\0';
    memcpy(why->text, text, sizeof why->text);
    copy_text(why->clause, sizeof why->clause, clause);
}

void why_set(struct why *why, const char *clause, const char *text)
{
    why->n_causes = 0;
    why->causes[0][0] = '\0';
    copy_text(why->text, sizeof why->text, text);
    copy_text(why->clause, sizeof why->clause, clause);
}

void why_add_cause(struct why *why, const char *id)
{
    if (!*id || why->n_causes == FLOW_MAX_CAUSES)
        return;
    for (uint32_t i = 0; i < why->n_causes; i++)
        if (strcmp(why->causes[i], id) == 0)
            return;
    copy_text(why->causes[why->n_causes++], FLOW_ID_SIZE, id);
}

void why_add_contact(struct why *why, const struct contact *contact)
{
    why_add_cause(why, contact->id);
    for (uint32_t i = 0; i < contact->n_causes; i++)
        why_add_cause(why, contact->causes[i]);
}

static void start_outcome(struct watch *watch, enum outcome_kind kind, struct outcome *outcome)
{
    memset(outcome, 0, sizeof *outcome);
    outcome->kind = kind;
    outcome->run = watch->run;
    outcome->counter = ++watch->counters[kind];
    outcome->watch_ns = watch->now_ns;
}

static void give(struct watch *watch, const struct outcome *outcome, char id[FLOW_ID_SIZE])
{
    flow_id(outcome->run, outcome->stream, flow_outcome_kind_text(outcome), outcome->counter, id);
    watch->sink->take(watch->sink->context, outcome);
}

void watch_say_event(struct watch *watch, const struct event *event)
{
    struct outcome outcome; /* what an event does not fill is not touched: there is one for each */
    outcome.kind = OUTCOME_EVENT;
    outcome.run = event->run;
    outcome.stream = event->stream;
    outcome.counter = event->counter;
    outcome.watch_ns = watch->now_ns;
    outcome.as.event = *event;
    watch->sink->take(watch->sink->context, &outcome);
}

void watch_say_contact(struct watch *watch, struct contact *contact)
{
    struct outcome outcome;
    start_outcome(watch, OUTCOME_CONTACT, &outcome);
    outcome.as.contact = contact_outcome(contact, watch->permit, watch->now_ns);
    contact->said_ns = watch->now_ns;
    give(watch, &outcome, contact->id);
}

/* Outcomes that carry a reason keep it in members of the same names. */
#define FILL_WHY(into, why)                                                                                  \
    do {                                                                                                     \
        memcpy((into)->clause, (why)->clause, sizeof(into)->clause);                                         \
        memcpy((into)->job, watch->source.job, sizeof(into)->job);                                           \
        (into)->n_causes = (why)->n_causes;                                                                  \
        memcpy((into)->causes, (why)->causes, sizeof(into)->causes);                                         \
    } while (0)

/* What kind of entry an id names: "run.stream.kind.counter". */
static bool is_kind(const char *id, const char *kind)
{
    const char *at = strchr(id, '.');
    at = at ? strchr(at + 1, '.') : NULL;
    size_t n = strlen(kind);
    return at && strncmp(at + 1, kind, n) == 0 && at[1 + n] == '.';
}

#define ON_ENTRY 1U
#define ON_SOUND 2U

/* What people entered, what was heard; phases and contacts rest on what they came from. */
static unsigned rests_on(const struct watch *watch, uint32_t n_causes, const char (*causes)[FLOW_ID_SIZE])
{
    static const char *const sounds[] = {"impulse", "call", "unheard", "level"};
    unsigned on = 0;
    for (uint32_t i = 0; i < n_causes; i++) {
        if (is_kind(causes[i], "note"))
            on |= ON_ENTRY;
        for (size_t k = 0; k < sizeof sounds / sizeof sounds[0]; k++)
            if (is_kind(causes[i], sounds[k]))
                on |= ON_SOUND;
        if (is_kind(causes[i], "phase") && strcmp(causes[i], watch->phase_id) == 0)
            on |= watch->phase_on;
    }
    return on;
}

void watch_say_phase(struct watch *watch, enum phase phase, const struct why *why)
{
    struct outcome outcome;
    start_outcome(watch, OUTCOME_PHASE, &outcome);
    outcome.as.phase.phase = phase;
    memcpy(outcome.as.phase.reason, why->text, sizeof why->text);
    FILL_WHY(&outcome.as.phase, why);
    give(watch, &outcome, watch->phase_id);
    watch->phase_on = rests_on(watch, why->n_causes, why->causes);
}

void watch_say_finding(struct watch *watch, const char *code, const char *grade, const struct why *why)
{
    struct outcome outcome;
    start_outcome(watch, OUTCOME_FINDING, &outcome);
    unsigned on = rests_on(watch, why->n_causes, why->causes);
    outcome.as.finding.basis = on == ON_SOUND                ? BASIS_SOUND
                               : on == (ON_SOUND | ON_ENTRY) ? BASIS_BOTH
                                                             : BASIS_ENTRY;
    snprintf(outcome.as.finding.code, sizeof outcome.as.finding.code, "%s", code);
    snprintf(outcome.as.finding.grade, sizeof outcome.as.finding.grade, "%s", grade);
    memcpy(outcome.as.finding.detail, why->text, sizeof why->text);
    FILL_WHY(&outcome.as.finding, why);
    give(watch, &outcome, watch->finding_id);
}

void watch_say_correction(struct watch *watch, const struct correction_outcome *correction)
{
    struct outcome outcome;
    char id[FLOW_ID_SIZE];
    start_outcome(watch, OUTCOME_CORRECTION, &outcome);
    outcome.as.correction = *correction;
    give(watch, &outcome, id);
}

/* Room for one more at the front: an advice that is in force is never forgotten. */
static struct watch_advice *room_for_advice(struct watch *watch)
{
    uint32_t last = watch->n_advice;
    if (watch->n_advice < WATCH_MAX_ADVICE)
        watch->n_advice++;
    else
        for (last = WATCH_MAX_ADVICE - 1; watch->advice[last].in_force; last--)
            ;
    memmove(&watch->advice[1], &watch->advice[0], last * sizeof watch->advice[0]);
    return &watch->advice[0];
}

void watch_say_advice(struct watch *watch, const struct advice_outcome *advice)
{
    struct outcome outcome;
    start_outcome(watch, OUTCOME_ADVICE, &outcome);
    outcome.as.advice = *advice;
    for (uint32_t i = 0; i < watch->n_advice; i++)
        if (strcmp(watch->advice[i].advice.station, advice->station) == 0)
            watch->advice[i].in_force = false;
    struct watch_advice *kept = room_for_advice(watch);
    memset(kept, 0, sizeof *kept);
    kept->advice = *advice;
    kept->since_ns = watch->now_ns;
    kept->in_force = true;
    give(watch, &outcome, kept->id);
}
