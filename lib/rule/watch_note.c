/* What people enter, and what comes of it. */
#include "base/time.h"
#include "rule/watch_inner.h"
#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

void note_without_effect(struct watch *watch, const char *format, ...)
{
    char text[FLOW_TEXT_SIZE];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(text, sizeof text, format, arguments);
    va_end(arguments);
    struct why why;
    why_reset(&why, "", "%s", text);
    why_add_cause(&why, watch->recent.causes[0]);
    watch_say_finding(watch, "note without effect", "firm", &why);
}

static void take_release(struct watch *watch, const struct note *note)
{
    const char *missing;
    if (effort_on_watch(watch, note->person) && watch->source.unallowed == ACTION_HOLD)
        watch->source.unallowed = ACTION_LOG; /* late, and the finding stays */
    else if (!effort_on_watch(watch, note->person))
        note_without_effect(watch, "%.60s is not on watch as an observer and cannot release the start",
                            note->person);
    else if (watch->phase != PHASE_READY)
        note_without_effect(watch, "there is nothing to release: the phase is %s", phase_text(watch->phase));
    else if (contact_holder(watch, true))
        note_without_effect(watch, "contact %u holds the start back: say first where it is",
                            contact_holder(watch, true)->number);
    else if (effort_deaf(watch) || !effort_kept(watch, &missing))
        note_without_effect(watch, "the watch cannot hear, or is not kept: nothing can be released");
    else {
        snprintf(watch->released_by, sizeof watch->released_by, "%s", note->person);
        snprintf(watch->release_id, sizeof watch->release_id, "%s", watch->recent.causes[0]);
    }
}

static void take_position(struct watch *watch, const struct note *note)
{
    const struct position position = {.of = POSITION_OF_SOURCE,
                                      .from = POSITION_FROM_NOTE,
                                      .latitude_deg = note->latitude_deg,
                                      .longitude_deg = note->longitude_deg,
                                      .heading_deg = NAN,
                                      .course_deg = NAN,
                                      .speed_m_s = NAN,
                                      .accuracy_m = NAN,
                                      .occurred_ns = note->occurred_ns < watch->now_ns ? note->occurred_ns
                                                                                       : watch->now_ns};
    ranges_take(&watch->ranges, &position);
}

/* The note as a reason for what follows from it. */
static void describe(const struct note *note, char out[FLOW_TEXT_SIZE])
{
    const char *who = *note->person ? note->person : "the crew";
    switch (note->kind) {
    case NOTE_SOURCE:
        snprintf(out, FLOW_TEXT_SIZE, "%.60s says that the source is: %.60s", who, note->source_state);
        break;
    case NOTE_SIGN_ON:
        snprintf(out, FLOW_TEXT_SIZE, "%.60s signs on (%.20s)", who, note->watch);
        break;
    case NOTE_SIGN_OFF:
        snprintf(out, FLOW_TEXT_SIZE, "%.60s signs off (%.20s)", who, note->watch);
        break;
    default:
        snprintf(out, FLOW_TEXT_SIZE, "%s by %.60s", note_kind_text(note->kind), who);
    }
}

/* A finding is answered by words, and stays. Of this run's findings it is known which there are. */
static void answer_take(struct watch *watch, const struct note *note)
{
    unsigned run, stream;
    unsigned long long counter;
    int used = 0;
    bool good = sscanf(note->finding, "%u.%u.finding.%llu%n", &run, &stream, &counter, &used) == 3 &&
                note->finding[used] == '\0' && run >= 1 && run <= watch->run;
    if (good && run == watch->run && stream == 0)
        good = counter >= 1 && counter <= watch->counters[OUTCOME_FINDING];
    if (!good)
        note_without_effect(watch, "no finding %.40s is known to be answered", note->finding);
}

/* Clocks of people differ by so much (own choice). */
#define AHEAD_NS (60 * TIME_NS_PER_S)

/* Every note counts from when it becomes known; a time before that is kept beside it, one after it is said.
 */
static void find_ahead(struct watch *watch, const struct note *note)
{
    struct why why;
    if (note->occurred_ns <= watch->now_ns + AHEAD_NS)
        return;
    why_reset(&why, "", "the note '%s' states a time %.0f min ahead: it counts from now",
              note_kind_text(note->kind), time_to_s(note->occurred_ns - watch->now_ns) / 60);
    why_add_cause(&why, watch->recent.causes[0]);
    watch_say_finding(watch, "note ahead of time", "firm", &why);
}

void note_take(struct watch *watch, const struct note *note)
{
    const char *lacks;
    char text[FLOW_TEXT_SIZE], id[FLOW_ID_SIZE];
    snprintf(id, sizeof id, "%s", watch->recent.causes[0]);
    describe(note, text);
    why_reset(&watch->recent, "", "%s", text);
    why_add_cause(&watch->recent, id);
    if (note_check(note, &lacks) != STATUS_OK) {
        note_without_effect(watch, "the note '%s' lacks a good '%s'", note_kind_text(note->kind), lacks);
        return;
    }
    find_ahead(watch, note);
    conditions_take_note(watch, note);
    switch (note->kind) {
    case NOTE_SIGN_ON:
        effort_sign_on(watch, note);
        break;
    case NOTE_SIGN_OFF:
        effort_sign_off(watch, note);
        break;
    case NOTE_SIGHTING:
        contact_take_sighting(watch, note);
        break;
    case NOTE_DISTANCE:
        contact_take_distance(watch, note);
        break;
    case NOTE_VERDICT:
        contact_take_verdict(watch, note);
        break;
    case NOTE_RELEASE:
        take_release(watch, note);
        break;
    case NOTE_ACKNOWLEDGEMENT:
        advice_acknowledge(watch, note);
        break;
    case NOTE_SOURCE:
        source_note(watch, note);
        break;
    case NOTE_JOB:
        source_job(watch, note);
        break;
    case NOTE_WHOSE:
        whose_note(watch, note);
        break;
    case NOTE_PLAN:
        plan_take(watch, note);
        break;
    case NOTE_ANSWER:
        answer_take(watch, note);
        break;
    case NOTE_POSITION:
        take_position(watch, note);
        break;
    case NOTE_CHECK:
        watch_check_put(watch->effort.checks, &watch->effort.n_checks, note, watch->now_ns);
        break;
    case NOTE_HAND_OVER:
    case NOTE_WEATHER:
    case NOTE_DETERRENT:
    case NOTE_OVERRIDE:
    case NOTE_QUIETING: /* the conditions' and the tally's */
    case NOTE_OTHER:
    case NOTE_MARK:
    case NOTE_CORRECTION:
    case NOTE_REMARK:
    case NOTE_KIND_COUNT:
        break; /* recorded; no rule reads them yet */
    }
}
