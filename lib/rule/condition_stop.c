/* What was heard after the crew was told to stop, and whether anybody answered. */
#include "base/time.h"
#include "rule/condition.h"
#include <stdio.h>
#include <string.h>

/* No text says how fast a stop must be carried out but 'immediately'. The last blows that are on their way
 * are no departure (common practice, no source). */
#define ON_ITS_WAY_NS (5 * TIME_NS_PER_S)
/* After so long without an answer that is found (own choice; the pages sound again much earlier). */
#define UNANSWERED_NS (120 * TIME_NS_PER_S)

static const struct watch_advice *crew_advice(const struct watch *watch)
{
    for (uint32_t i = 0; i < watch->n_advice; i++)
        if (watch->advice[i].in_force && strcmp(watch->advice[i].advice.station, "crew") == 0)
            return &watch->advice[i];
    return NULL;
}

static bool wants_answer(enum advice_word word)
{
    return word == ADVICE_PREPARE_TO_STOP || word == ADVICE_HOLD_POWER || word == ADVICE_REDUCE_POWER ||
           word == ADVICE_STOP;
}

/* ", 3 impulses and 12 s after it was passed" */
static void add_count(const struct watch *watch, const struct stop_count *count, const char *after,
                      char text[FLOW_TEXT_SIZE])
{
    size_t used = strlen(text);
    if (count->since_ns < 0)
        snprintf(text + used, FLOW_TEXT_SIZE - used, "; it was never %s", after);
    else
        snprintf(text + used, FLOW_TEXT_SIZE - used, "; %u and %.0f s after it was %s", count->n_impulses,
                 time_to_s(watch->stop.last_ns - count->since_ns), after);
}

static void find_late(struct watch *watch)
{
    const struct stop_state *stop = &watch->stop;
    struct why why;
    char text[FLOW_TEXT_SIZE];
    if (!stop->id[0] || stop->last_ns <= stop->given.since_ns + ON_ITS_WAY_NS)
        return;
    snprintf(text, sizeof text, "%u impulses until %.0f s after the stop was advised", stop->given.n_impulses,
             time_to_s(stop->last_ns - stop->given.since_ns));
    add_count(watch, &stop->passed, "passed by voice", text);
    add_count(watch, &stop->acknowledged, "acknowledged", text);
    why_reset(&why, stop->clause, "%s", text);
    why_add_cause(&why, stop->id);
    why_add_cause(&why, stop->impulse_id);
    watch_say_finding(watch, "source heard after a stop", "firm", &why);
}

static void end(struct watch *watch)
{
    find_late(watch);
    watch->stop = (struct stop_state){.passed.since_ns = -1, .acknowledged.since_ns = -1};
}

static void take_note(struct watch *watch, const struct note *note)
{
    struct stop_state *stop = &watch->stop;
    if (note->kind != NOTE_ACKNOWLEDGEMENT || !stop->id[0] || strcmp(note->advice, stop->id) != 0)
        return;
    struct stop_count *count = strcmp(note->answer, "passed") == 0 ? &stop->passed : &stop->acknowledged;
    if (count->since_ns < 0)
        count->since_ns = watch->now_ns;
}

static void count_one(struct stop_count *count, int64_t time_ns)
{
    count->n_impulses += count->since_ns >= 0 && time_ns > count->since_ns;
}

static void take_impulse(struct watch *watch, const struct event *event)
{
    struct stop_state *stop = &watch->stop;
    int64_t time_ns = event->as.impulse.time_ns;
    if (!stop->id[0] || time_ns <= stop->given.since_ns)
        return;
    stop->last_ns = time_ns;
    memcpy(stop->impulse_id, watch->source.impulse_id, sizeof stop->impulse_id);
    count_one(&stop->given, time_ns);
    count_one(&stop->passed, time_ns);
    count_one(&stop->acknowledged, time_ns);
}

static void find_unanswered(struct watch *watch, const struct watch_advice *advice)
{
    struct why why;
    if (!advice || !wants_answer(advice->advice.advice) || advice->acknowledged ||
        watch->now_ns < advice->since_ns + UNANSWERED_NS || strcmp(watch->unanswered, advice->id) == 0)
        return;
    memcpy(watch->unanswered, advice->id, sizeof watch->unanswered);
    why_reset(&why, advice->advice.clause, "nobody of the crew has answered '%s' for %g s",
              advice_text(advice->advice.advice), time_to_s(UNANSWERED_NS));
    why_add_cause(&why, advice->id);
    watch_say_finding(watch, "advice not acknowledged", "firm", &why);
}

/* After advice has been given: a new stop begins, or the one before is over. */
static void follow(struct watch *watch)
{
    struct stop_state *stop = &watch->stop;
    const struct watch_advice *advice = crew_advice(watch);
    bool told = advice && advice->advice.advice == ADVICE_STOP;
    find_unanswered(watch, advice);
    if (stop->id[0] && (!told || strcmp(stop->id, advice->id) != 0) && !source_sounds(watch->phase))
        end(watch);
    if (!told || stop->id[0])
        return;
    *stop = (struct stop_state){.given.since_ns = advice->since_ns,
                                .passed.since_ns = -1,
                                .acknowledged.since_ns = -1,
                                .last_ns = -1};
    memcpy(stop->id, advice->id, sizeof stop->id);
    memcpy(stop->clause, advice->advice.clause, sizeof stop->clause);
}

static int64_t due_ns(const struct watch *watch)
{
    const struct watch_advice *advice = crew_advice(watch);
    bool waits = advice && wants_answer(advice->advice.advice) && !advice->acknowledged &&
                 strcmp(watch->unanswered, advice->id) != 0;
    return waits ? advice->since_ns + UNANSWERED_NS : INT64_MAX;
}

static void enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    if (source_sounds(from) && !source_sounds(to) && watch->stop.id[0])
        end(watch);
}

const struct condition condition_stop = {.take_note = take_note,
                                         .take_impulse = take_impulse,
                                         .follow = follow,
                                         .due_ns = due_ns,
                                         .enter_phase = enter_phase};
