/* What the source does, as said and as heard, and what departs from the permit. */
#include "base/time.h"
#include "rule/watch_inner.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

/* The last blows before somebody enters 'stopped' contradict nobody. */
#define GRACE_NS (5 * TIME_NS_PER_S)
/* An impulse is known at most 1.3 s after its onset, and seldom a second later on one channel than on
 * another: what reaches a channel by this much later than the reference is known of the reference. */
#define REFERENCE_LEAD_S 1.0

bool source_sounds(enum phase phase)
{
    switch (phase) {
    case PHASE_SOFT_START:
    case PHASE_HOLD:
    case PHASE_FULL_POWER:
    case PHASE_REDUCED:
    case PHASE_VIBRO:
    case PHASE_DRILLING:
    case PHASE_LINE_TURN:
    case PHASE_TEST:
        return true;
    default:
        return false;
    }
}

void source_reset(struct source *source)
{
    source->said = PHASE_OFF;
    source->said_ns = source->impulse_ns = source->on_ns = -1;
    source->soft_start_ns = source->quiet_ns = -1;
    memset(&source->blows, 0, sizeof source->blows);
    memset(source->reference, 0, sizeof source->reference);
    memset(source->reference_m, 0, sizeof source->reference_m);
    for (size_t i = 0; i < WATCH_MAX_CHANNELS; i++)
        whose_reset(&source->whose[i]);
}

void source_note(struct watch *watch, const struct note *note)
{
    static const struct {
        const char *word;
        enum phase said;
        enum trigger trigger;
    } states[] = {
        {"off", PHASE_OFF, TRIGGER_SAID_OFF},
        {"stopped", PHASE_BREAK, TRIGGER_SAID_STOPPED},
        {"soft start", PHASE_SOFT_START, TRIGGER_SAID_SOUND},
        {"full power", PHASE_FULL_POWER, TRIGGER_SAID_SOUND},
        {"hold", PHASE_HOLD, TRIGGER_SAID_SOUND},
        {"reduced", PHASE_REDUCED, TRIGGER_SAID_SOUND},
        {"vibro", PHASE_VIBRO, TRIGGER_SAID_SOUND},
        {"drilling", PHASE_DRILLING, TRIGGER_SAID_SOUND},
        {"line turn", PHASE_LINE_TURN, TRIGGER_SAID_SOUND},
        {"test", PHASE_TEST, TRIGGER_SAID_SOUND},
    };
    struct source *source = &watch->source;
    for (size_t i = 0; i < sizeof states / sizeof states[0]; i++)
        if (strcmp(note->source_state, states[i].word) == 0) {
            if (source_sounds(states[i].said) && !source_sounds(source->said))
                source->on_ns = watch->now_ns;
            source->said = states[i].said;
            source->said_ns = watch->now_ns;
            source->contradicted = false;
            snprintf(source->said_id, sizeof source->said_id, "%s", watch->recent.causes[0]);
            phase_take(watch, states[i].trigger, &watch->recent);
            return;
        }
    note_without_effect(watch, "'%.40s' is no state of the source", note->source_state);
}

void source_job(struct watch *watch, const struct note *note)
{
    struct source *source = &watch->source;
    if (strcmp(note->answer, "open") == 0 && strcmp(source->job, note->job) == 0)
        note_without_effect(watch, "job %.31s is open already", note->job);
    else if (strcmp(note->answer, "open") == 0) {
        if (*source->job && strcmp(source->job, note->job) != 0) {
            struct why why;
            why_reset(&why, "", "job %.31s is opened while job %.31s is open: that one ends here", note->job,
                      source->job);
            why_add_cause(&why, watch->recent.causes[0]);
            watch_say_finding(watch, "job not closed", "firm", &why);
        }
        snprintf(source->job, sizeof source->job, "%.31s", note->job);
        source->n_impulses = 0;
        watch->job_heard = watch->n_heard;
    } else if (strcmp(source->job, note->job) == 0 && strcmp(note->answer, "close") == 0) {
        source->job[0] = '\0';
        ranges_end_job(&watch->ranges);
    } else if (strcmp(source->job, note->job) != 0)
        note_without_effect(watch, "job %.31s is not open", note->job);
}

/* By its energy, or by its peak where that is all there is. */
static double level_of(const struct impulse *impulse)
{
    return isfinite(impulse->sel_db) ? impulse->sel_db : isfinite(impulse->peak_db) ? impulse->peak_db : NAN;
}

static bool is_placed(uint32_t stream, const struct impulse *impulse)
{
    return stream >= 1 && stream <= WATCH_MAX_STREAMS && impulse->channel >= 1 &&
           impulse->channel <= FLOW_MAX_CHANNELS;
}

double watch_range_m(const struct watch *watch, uint32_t stream, const struct impulse *impulse)
{
    if (impulse->range_from != RANGE_UNSET)
        return impulse->range_m;
    return is_placed(stream, impulse) ? watch->setup.range_m[stream - 1][impulse->channel - 1] : NAN;
}

/* The reference channel decides for those beside it: it has heard the blow, or must have if it were ours. */
static void follow_reference(struct watch *watch, uint32_t stream, struct impulse *impulse)
{
    struct source *source = &watch->source;
    double range_m = watch_range_m(watch, stream, impulse), speed_m_s = watch->setup.sound_speed_m_s;
    int64_t struck_ns = blow_struck_ns(impulse->time_ns, range_m, speed_m_s);
    if (!is_placed(stream, impulse))
        return;
    if (!impulse->beside) {
        source->reference_m[stream - 1] = range_m;
        blows_add(&source->reference[stream - 1], struck_ns, impulse->whose);
        return;
    }
    double lead_m = range_m - source->reference_m[stream - 1];
    if (!blows_find(&source->reference[stream - 1], struck_ns, &impulse->whose) &&
        impulse->whose == IMPULSE_OURS && lead_m > REFERENCE_LEAD_S * speed_m_s)
        impulse->whose = IMPULSE_UNKNOWN;
}

void source_mark_impulse(struct watch *watch, struct event *event)
{
    struct source *source = &watch->source;
    struct impulse *impulse = &event->as.impulse;
    /* Levels of channels cannot be compared: each has its own trains. */
    struct whose *whose = &source->whose[whose_place(event->stream, impulse->channel)];
    const struct whose_said said = {.on = source_sounds(source->said),
                                    .job = *source->job != '\0',
                                    .on_ns = source->on_ns,
                                    .said_ns = source->said_ns};
    const struct whose_impulse heard = {
        .time_ns = impulse->time_ns, .level_db = level_of(impulse), .expected_ns = -1};
    impulse->whose = whose_take(whose, &said, &heard);
    follow_reference(watch, event->stream, impulse);
    whose_keep(watch, event, heard.level_db,
               blow_struck_ns(impulse->time_ns, watch_range_m(watch, event->stream, impulse),
                              watch->setup.sound_speed_m_s));
    snprintf(impulse->job, sizeof impulse->job, "%s", source->job);
}

/* A person may say later that the impulse was another's. */
static void keep_contradiction(struct watch *watch)
{
    struct source *source = &watch->source;
    memcpy(source->contradiction, watch->finding_id, sizeof source->contradiction);
    memcpy(source->contradicting, source->impulse_id, sizeof source->contradicting);
}

static void find_contradiction(struct watch *watch, bool of_job)
{
    struct source *source = &watch->source;
    if (source->contradicted)
        return;
    source->contradicted = true;
    const char *said = source->said == PHASE_OFF ? "off" : "stopped";
    char what[64];
    snprintf(what, sizeof what,
             source->said_ns < 0 ? "nobody has said that the source sounds" : "the source is said to be %s",
             said);
    char code[NOTE_NAME_SIZE];
    struct why why;
    why_reset(&why, watch->permit->soft_start.clause,
              of_job ? "impulses are heard and job %.31s is open, but %s"
                     : "impulses are heard%.0s and no job is open: they may be another project's; %s",
              source->job, what);
    why_add_cause(&why, source->impulse_id);
    why_add_cause(&why, source->said_id);
    snprintf(code, sizeof code, "source heard while %s", said);
    watch_say_finding(watch, code, of_job ? "firm" : "indicative", &why);
    keep_contradiction(watch);
}

static void find_during_stop(struct watch *watch)
{
    struct source *source = &watch->source;
    const struct contact *lead = contact_lead(watch, true);
    if (source->contradicted)
        return;
    source->contradicted = true;
    struct why why;
    why_reset(&why, watch->phase_why.clause, "impulses of job %.31s are heard during a shutdown",
              source->job);
    why_add_cause(&why, source->impulse_id);
    why_add_cause(&why, watch->phase_id);
    if (lead)
        why_add_contact(&why, lead);
    watch_say_finding(watch, "source heard during a stop", "firm", &why);
    keep_contradiction(watch);
}

void source_take_impulse(struct watch *watch, const struct event *event)
{
    struct source *source = &watch->source;
    const struct impulse *impulse = &event->as.impulse;
    bool of_job = *source->job != '\0', quiet_said = !source_sounds(source->said);
    if (impulse->beside)
        return; /* the reference channel hears it too, and speaks for the stream */
    if (impulse->whose == IMPULSE_OTHERS)
        return; /* another's hammer neither starts our work nor hides that ours has stopped */
    bool late = source->said_ns >= 0 && impulse->time_ns <= source->said_ns + GRACE_NS;
    source->heard = true;
    if (impulse->time_ns > source->impulse_ns)
        source->impulse_ns = impulse->time_ns < watch->now_ns ? impulse->time_ns : watch->now_ns;
    flow_id(event->run, event->stream, "impulse", event->counter, source->impulse_id);
    double range_m = watch_range_m(watch, event->stream, impulse);
    int64_t struck_ns = blow_struck_ns(impulse->time_ns, range_m, watch->setup.sound_speed_m_s);
    bool first = blows_add(&source->blows, struck_ns, impulse->whose);
    source->n_impulses += impulse->whose == IMPULSE_OURS && first;
    if (impulse->whose == IMPULSE_OURS && first)
        conditions_take_impulse(watch, event);
    source->n_unsaid = source_sounds(watch->phase) || (quiet_said && late) ? 0 : source->n_unsaid + first;
    /* One bang is no source, but for a charge. */
    uint32_t enough = watch->permit->activity == ACTIVITY_EXPLOSIVES ? 1 : 2;
    if (source->n_unsaid >= enough) {
        if (of_job && watch->phase == PHASE_SHUTDOWN)
            find_during_stop(watch);
        else if (quiet_said)
            find_contradiction(watch, of_job);
        if (of_job && watch->permit->break_watch != BREAK_WATCH_STANDS)
            effort_begin_anew(watch);
        struct why why;
        why_reset(&why, watch->permit->soft_start.clause, "impulses of job %.31s are heard", source->job);
        why_add_cause(&why, source->impulse_id);
        if (of_job)
            phase_take(watch, TRIGGER_HEARD, &why);
    }
    source->heard_in_phase = source->heard_in_phase || source_sounds(watch->phase);
}

const struct permit_break *source_break(const struct watch *watch)
{
    return permit_last_break(watch->permit, surroundings_dark(&watch->surroundings));
}

static int64_t row_over_ns(const struct watch *watch, const struct permit_break *row)
{
    return watch->source.quiet_ns + time_from_minutes(row->minutes) +
           (row->limit_included ? TIME_NS_PER_US : 0);
}

const struct permit_break *source_break_row(const struct watch *watch)
{
    const struct permit *permit = watch->permit;
    bool dark = surroundings_dark(&watch->surroundings);
    for (uint32_t i = 0; i < permit->n_breaks; i++)
        if (watch->now_ns < row_over_ns(watch, &permit->breaks[i]) && !(dark && permit->breaks[i].daylight))
            return &permit->breaks[i];
    return source_break(watch);
}

int64_t source_break_over_ns(const struct watch *watch)
{
    if (watch->phase == PHASE_POST_WATCH && watch->permit->post_watch_minutes > 0)
        return watch->source.quiet_ns + time_from_minutes(watch->permit->post_watch_minutes);
    return row_over_ns(watch, source_break(watch));
}

/* When what the source may do in a break changes next. */
static int64_t break_due_ns(const struct watch *watch)
{
    int64_t due = source_break_over_ns(watch), row_ns = row_over_ns(watch, source_break_row(watch));
    return row_ns > watch->now_ns && row_ns < due ? row_ns : due;
}

/* The pauses between the bursts of a soft start are no silence. */
static int64_t silence_ns(const struct watch *watch)
{
    const struct permit_soft_start *rule = &watch->permit->soft_start;
    double pause_s = watch->phase == PHASE_SOFT_START && rule->bursts > 0 ? rule->pause_s : 0;
    return watch->source.impulse_ns + time_from_s(watch->setup.silence_s + pause_s);
}

static int64_t too_long_ns(const struct watch *watch)
{
    double minutes = watch->permit->soft_start.longest_minutes;
    bool limited = watch->phase == PHASE_SOFT_START && watch->source.soft_start_ns >= 0 && minutes < 1e6 &&
                   !watch->source.too_long;
    return limited ? watch->source.soft_start_ns + time_from_s(minutes * 60) + TIME_NS_PER_US : INT64_MAX;
}

static bool in_break(const struct watch *watch)
{
    return watch->phase == PHASE_BREAK || watch->phase == PHASE_POST_WATCH;
}

int64_t source_due_ns(const struct watch *watch)
{
    int64_t due = too_long_ns(watch);
    if (watch->source.heard && silence_ns(watch) < due)
        due = silence_ns(watch);
    if (in_break(watch) && break_due_ns(watch) > watch->now_ns && break_due_ns(watch) < due)
        due = break_due_ns(watch);
    return due;
}

static void fall_silent(struct watch *watch)
{
    struct source *source = &watch->source;
    source->heard = source->contradicted = false;
    source->n_unsaid = 0;
    if (!source->heard_in_phase || !source_sounds(watch->phase))
        return;
    struct why why;
    why_reset(&why, watch->permit->break_clause, "no impulse has been heard for %g s",
              watch->setup.silence_s);
    why_add_cause(&why, source->impulse_id);
    source->quiet_ns = source->impulse_ns;
    phase_take(watch, TRIGGER_SILENT, &why);
    if (source_sounds(watch->phase))
        source->quiet_ns = -1;
}

void source_settle(struct watch *watch)
{
    struct source *source = &watch->source;
    if (source->heard && watch->now_ns >= silence_ns(watch))
        fall_silent(watch);
    if (watch->now_ns >= too_long_ns(watch)) {
        source->too_long = true;
        struct why why;
        why_reset(&why, watch->permit->soft_start.clause, "the soft start has lasted longer than %g min",
                  watch->permit->soft_start.longest_minutes);
        why_add_cause(&why, watch->phase_id);
        watch_say_finding(watch, "soft start too long", "firm", &why);
    }
}

void source_keep_stop(struct watch *watch, const struct contact *contact)
{
    struct source *source = &watch->source;
    if (contact->order != ACTION_STOP || !source_sounds(watch->phase) || source->unallowed == ACTION_STOP)
        return;
    source->unallowed = ACTION_STOP;
    source->unallowed_contact = contact->number;
    snprintf(source->unallowed_why, sizeof source->unallowed_why,
             "the stop for contact %u, %s, was not followed: the source still sounds", contact->number,
             group_text(contact->group));
}

/* The source begins to sound: was it allowed to? */
static void judge_start(struct watch *watch, enum phase from)
{
    const struct permit *permit = watch->permit;
    const struct contact *holder = contact_holder(watch, true);
    struct why why;
    const char *code = NULL, *missing = "";
    enum permit_action unallowed = ACTION_STOP;
    if (from == PHASE_BREAK) {
        code = effort_kept(watch, &missing) ? NULL : "resumed without a watch";
        unallowed = ACTION_LOG;
        why_reset(&why, permit->break_clause, "the source resumes after a break and %s", missing);
    } else if (from == PHASE_DELAY || from == PHASE_SHUTDOWN || (from == PHASE_READY && holder)) {
        code = from == PHASE_SHUTDOWN ? "start during a stop" : "start during a delay";
        char text[FLOW_TEXT_SIZE] = "";
        if (holder)
            contact_describe(holder, permit, watch->now_ns, text);
        why_reset(&why, watch->phase_why.clause, "the source starts: %.200s", text);
        if (holder)
            why_add_contact(&why, holder);
    } else if (from == PHASE_READY) {
        code = *watch->released_by ? NULL : "start without release";
        unallowed = ACTION_HOLD; /* all is ready: a release makes it good */
        why_reset(&why, permit->pre_watch_clause, "the source starts and no observer has released the start");
    } else if (effort_complete(watch)) { /* conditions hold it back: conditions_judge_start says which */
        code = "start without release";
        why_reset(&why, permit->pre_watch_clause, "the source starts and no observer has released the start");
    } else {
        code = "start without a complete pre-watch";
        why_reset(&why, permit->pre_watch_clause, "the source starts after %.1f of %g min of pre-watch",
                  time_to_s(watch->effort.credit_ns) / 60, effort_pre_watch(watch)->minutes);
    }
    if (!code)
        return;
    watch->source.unallowed = unallowed;
    memcpy(watch->source.unallowed_why, why.text, sizeof watch->source.unallowed_why);
    why_add_cause(&why, watch->phase_id);
    watch_say_finding(watch, code, "firm", &why);
}

/* After the shortest break the source may only come back by a soft start. */
static void judge_resumption(struct watch *watch, enum phase to)
{
    struct why why;
    if (to == PHASE_SOFT_START || !source_break_row(watch)->soft_start)
        return;
    why_reset(&why, watch->permit->break_clause,
              "the source resumes after %.1f min of silence without a soft start",
              time_to_s(watch->now_ns - watch->source.quiet_ns) / 60);
    why_add_cause(&why, watch->phase_id);
    watch_say_finding(watch, "soft start missing", "firm", &why);
}

static void judge_full_power(struct watch *watch, enum phase from)
{
    struct source *source = &watch->source;
    const struct permit *permit = watch->permit;
    enum phase before = from == PHASE_BREAK ? source->before_break : from;
    bool after_soft_start = source->soft_start_ns >= 0 &&
                            (before == PHASE_SOFT_START || before == PHASE_HOLD || before == PHASE_REDUCED);
    int64_t lasted = watch->now_ns - source->soft_start_ns;
    struct why why;
    if (after_soft_start && lasted < time_from_s(permit->soft_start.least_minutes * 60)) {
        why_reset(&why, permit->soft_start.clause, "full power after %.1f of at least %g min",
                  time_to_s(lasted) / 60, permit->soft_start.least_minutes);
        why_add_cause(&why, watch->phase_id);
        watch_say_finding(watch, "soft start too short", "firm", &why);
    } else if (!source_sounds(before) && permit->soft_start.least_minutes > 0) {
        why_reset(&why, permit->soft_start.clause, "full power without a soft start");
        why_add_cause(&why, watch->phase_id);
        watch_say_finding(watch, "soft start missing", "firm", &why);
    }
    source->soft_start_ns = -1;
}

void source_enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    struct source *source = &watch->source;
    bool begins = source_sounds(to) && !source_sounds(from), ends = source_sounds(from) && !source_sounds(to);
    if (begins || ends) {
        source->unallowed = ACTION_LOG;
        source->unallowed_contact = 0;
    }
    if (begins && conditions_need_pre_watch(watch, to)) {
        judge_start(watch, from);
        if (from == PHASE_BREAK)
            judge_resumption(watch, to);
        else
            conditions_judge_start(watch);
    }
    if (to == PHASE_FULL_POWER)
        judge_full_power(watch, from);
    bool goes_on =
        from == PHASE_HOLD || from == PHASE_REDUCED || (from == PHASE_BREAK && source->soft_start_ns >= 0);
    /* At the end of a line turn the power goes up as the turn's rule says: that is no soft start. */
    bool steps_up = from == PHASE_LINE_TURN && watch->permit->turn.step_up_minutes > 0;
    if (to == PHASE_SOFT_START && !steps_up && !(goes_on && source->soft_start_ns >= 0)) {
        source->soft_start_ns = watch->now_ns;
        source->too_long = false;
    }
    if (begins) {
        source->quiet_ns = -1;
        if (watch->permit->break_watch != BREAK_WATCH_STANDS)
            effort_begin_anew(watch);
    }
    if (ends) {
        if (source->quiet_ns < 0)
            source->quiet_ns = watch->now_ns;
        source->before_break = from;
        source->heard_in_phase = false;
    }
    if (!source_sounds(to) && to != PHASE_BREAK)
        source->soft_start_ns = -1;
    conditions_enter_phase(watch, from, to);
}
