/* What each station is told: one advice in force for each, given again only when the situation is another. */
#include "base/time.h"
#include "rule/watch_inner.h"
#include <stdio.h>
#include <string.h>

static const char *const station_names[STATION_COUNT] = {
    [STATION_OBSERVER] = "observer", [STATION_CREW] = "crew"};

struct wanted {
    struct advice_key key;
    struct why why;
    int64_t until_ns;
    char needs[FLOW_TEXT_SIZE];
};

static void need(struct wanted *wanted, const char *what)
{
    size_t used = strlen(wanted->needs), room = sizeof wanted->needs - 1 - used;
    size_t gap = used == 0 ? 0 : room < 2 ? room : 2, length = strnlen(what, 120);
    memcpy(wanted->needs + used, "; ", gap);
    length = length < room - gap ? length : room - gap;
    memcpy(wanted->needs + used + gap, what, length);
    wanted->needs[used + gap + length] = '\0';
}

/* What a start needs from now: the clearance, the pre-watch, the release. */
static void need_start(const struct watch *watch, struct wanted *wanted)
{
    char text[FLOW_TEXT_SIZE];
    int64_t clear_ns = contact_all_clear_ns(watch, true), ready_ns = effort_ready_ns(watch);
    const struct contact *holder = contact_holder(watch, true);
    if (holder) {
        snprintf(text, sizeof text, "no detection of contact %u inside until its clearance time is over",
                 holder->number);
        need(wanted, text);
    }
    if (!effort_complete(watch)) {
        snprintf(text, sizeof text, "a complete pre-watch of %g min", effort_pre_watch(watch)->minutes);
        need(wanted, text);
    }
    struct why why;
    int64_t until_ns = -1, last_ns = watch->now_ns;
    for (unsigned i = 0; (i = conditions_hold(watch, i, &why, &until_ns)) != 0;) {
        snprintf(text, sizeof text, "an end of this: %.120s", why.text);
        need(wanted, text);
        last_ns = until_ns < 0 || last_ns < 0 ? -1 : until_ns > last_ns ? until_ns : last_ns;
    }
    need(wanted, "a release by a named observer");
    need(wanted, "a soft start");
    if (watch->phase == PHASE_POST_WATCH && ready_ns >= 0 && source_break_over_ns(watch) > ready_ns)
        ready_ns = source_break_over_ns(watch);
    bool known = ready_ns >= 0 && last_ns >= 0 && effort_kept(watch, NULL);
    if (last_ns > ready_ns)
        ready_ns = last_ns;
    wanted->until_ns = !known ? -1 : clear_ns > ready_ns ? clear_ns : ready_ns;
}

int64_t advice_earliest_start_ns(const struct watch *watch)
{
    struct wanted wanted = {.until_ns = -1};
    need_start(watch, &wanted);
    return wanted.until_ns;
}

static void ground_contact(const struct watch *watch, struct wanted *wanted, const struct contact *contact)
{
    char text[FLOW_TEXT_SIZE];
    const struct permit_zone *zone = contact_zone(contact, watch->permit, watch->now_ns);
    wanted->key.ground = GROUND_CONTACT;
    wanted->key.contact = contact->number;
    wanted->key.confirmed = contact_is_vouched(contact);
    contact_describe(contact, watch->permit, watch->now_ns, text);
    bool or_hold =
        wanted->key.word == ADVICE_HOLD_POWER && watch->permit->soft_start.stop_if_possible_else_hold;
    why_reset(&wanted->why, zone ? zone->clause : "", "%s%s",
              or_hold ? "stop if possible, otherwise do not increase power: " : "", text);
    if (!contact->where.known && zone)
        snprintf(wanted->why.clause, sizeof wanted->why.clause, "%.120s; %.120s", zone->clause,
                 watch->permit->unknown_clause);
    why_add_contact(&wanted->why, contact);
    why_add_cause(&wanted->why, watch->phase_id);
}

static enum advice_word word_of(enum permit_action action)
{
    switch (action) {
    case ACTION_PREPARE:
        return ADVICE_PREPARE_TO_STOP;
    case ACTION_HOLD:
        return ADVICE_HOLD_POWER;
    case ACTION_REDUCE:
        return ADVICE_REDUCE_POWER;
    case ACTION_STOP:
        return ADVICE_STOP;
    default:
        return ADVICE_DO_NOT_START;
    }
}

static void ground(struct wanted *wanted, const struct watch *watch, enum advice_word word,
                   enum advice_ground why_so, const char *clause, const char *text)
{
    wanted->key.word = word;
    wanted->key.ground = why_so;
    why_set(&wanted->why, clause, text);
    why_add_cause(&wanted->why, watch->phase_id);
}

/* Nobody looks, or nothing is heard: what may go on only under watch may not. */
static bool is_blind(const struct watch *watch, struct wanted *wanted, enum advice_word word)
{
    const char *missing;
    if (effort_deaf(watch)) {
        ground(wanted, watch, word, GROUND_DEAF, watch->permit->pre_watch_clause,
               "the watch cannot hear: silence says nothing now");
        why_add_cause(&wanted->why, watch->effort.deaf_id);
        need(wanted, "hydrophones that are heard again");
    } else if (!effort_kept(watch, &missing)) {
        ground(wanted, watch, word, GROUND_UNWATCHED, watch->permit->pre_watch_clause, missing);
        need(wanted, "the observers that the permit names");
    } else
        return false;
    return true;
}

static void want_while_sounding(const struct watch *watch, const struct contact *lead, struct wanted *wanted)
{
    const char *clause = watch->permit->soft_start.clause;
    struct why asked;
    enum permit_action unallowed = override_limit(watch, watch->source.unallowed);
    enum permit_action condition = override_limit(watch, conditions_ask(watch, &asked));
    if (unallowed > ACTION_LOG && unallowed >= condition &&
        (!lead || contact_wanted(watch, lead) < unallowed)) {
        ground(wanted, watch, word_of(unallowed), GROUND_UNALLOWED, watch->permit->pre_watch_clause,
               watch->source.unallowed_why);
        if (unallowed == ACTION_HOLD)
            need(wanted, "a release by a named observer");
        else
            need_start(watch, wanted);
    } else if (condition > ACTION_LOG && (!lead || contact_wanted(watch, lead) < condition)) {
        ground(wanted, watch, word_of(condition), GROUND_CONDITION, asked.clause, asked.text);
        for (uint32_t i = 0; i < asked.n_causes; i++)
            why_add_cause(&wanted->why, asked.causes[i]);
        if (condition == ACTION_STOP)
            need_start(watch, wanted);
    } else if (lead) {
        wanted->key.word = word_of(contact_wanted(watch, lead));
        ground_contact(watch, wanted, lead);
        wanted->until_ns = contact_all_clear_ns(watch, false);
        char text[FLOW_TEXT_SIZE];
        snprintf(text, sizeof text, "no detection of contact %u inside until its clearance time is over",
                 lead->number);
        need(wanted, text);
        if (wanted->key.word == ADVICE_STOP)
            need(wanted, "then a release by a named observer and a soft start");
    } else if (!contact_phase_asks(watch) || !is_blind(watch, wanted, ADVICE_PREPARE_TO_STOP)) {
        char text[FLOW_TEXT_SIZE];
        snprintf(text, sizeof text, "%s: nothing asks for a change", phase_text(watch->phase));
        ground(wanted, watch, ADVICE_CARRY_ON, GROUND_SOUND, clause, text);
    }
}

/* The start is held back by a contact that this station knows of, or that loosens what was allowed. */
static bool want_for_contact(const struct watch *watch, const struct contact *lead, bool otherwise_allowed,
                             struct wanted *wanted)
{
    bool holds =
        lead && contact_wanted(watch, lead) >= ACTION_DELAY; /* less is no order while it is silent */
    const struct contact *holder = holds ? lead : otherwise_allowed ? contact_holder(watch, true) : NULL;
    if (!holder)
        return false;
    wanted->key.word = contact_wanted(watch, holder) == ACTION_STOP ? ADVICE_STOP : ADVICE_DO_NOT_START;
    ground_contact(watch, wanted, holder);
    return true;
}

static void want_in_break(const struct watch *watch, const struct contact *lead, struct wanted *wanted)
{
    char text[FLOW_TEXT_SIZE];
    bool holds = lead && contact_wanted(watch, lead) >= ACTION_DELAY;
    const struct contact *question = holds ? lead : contact_lead(watch, false);
    if (want_for_contact(watch, question, false, wanted) || is_blind(watch, wanted, ADVICE_DO_NOT_START)) {
        need_start(watch, wanted);
        return;
    }
    const struct permit_break *row = source_break_row(watch);
    snprintf(text, sizeof text, "the zone is clear: the source may resume%s while the silence is %s %g min",
             row->soft_start ? " by a soft start" : "", row->limit_included ? "at most" : "less than",
             row->minutes);
    ground(wanted, watch, row->soft_start ? ADVICE_NEW_SOFT_START : ADVICE_RESUME, GROUND_BREAK,
           watch->permit->break_clause, text);
    wanted->until_ns = watch->source.quiet_ns + time_from_minutes(row->minutes);
}

static void want_ready(const struct watch *watch, struct wanted *wanted)
{
    char text[FLOW_TEXT_SIZE];
    if (is_blind(watch, wanted, ADVICE_DO_NOT_START)) {
        need_start(watch, wanted);
        return;
    }
    if (!*watch->released_by) {
        ground(wanted, watch, ADVICE_DO_NOT_START, GROUND_RELEASE, watch->permit->pre_watch_clause,
               "everything is ready but a named observer's release");
        need_start(watch, wanted);
        return;
    }
    snprintf(text, sizeof text, "the pre-watch is complete, no contact counts as inside; released by %.60s",
             watch->released_by);
    ground(wanted, watch, ADVICE_MAY_START, GROUND_RELEASED, watch->permit->pre_watch_clause, text);
    why_add_cause(&wanted->why, watch->release_id);
    need(wanted, "a soft start");
}

/* All is complete but a condition of the permit. */
static bool want_condition(const struct watch *watch, struct wanted *wanted)
{
    struct why why;
    int64_t until_ns;
    bool waits = watch->phase == PHASE_PRE_WATCH || watch->phase == PHASE_DETERRENT;
    unsigned number = waits && effort_complete(watch) ? conditions_hold(watch, 0, &why, &until_ns) : 0;
    if (!number)
        return false;
    wanted->key.condition = number;
    ground(wanted, watch, ADVICE_DO_NOT_START, GROUND_CONDITION, why.clause, why.text);
    for (uint32_t i = 0; i < why.n_causes; i++)
        why_add_cause(&wanted->why, why.causes[i]);
    need_start(watch, wanted);
    return true;
}

static void want_not_ready(const struct watch *watch, struct wanted *wanted)
{
    if (want_condition(watch, wanted))
        return;
    char text[FLOW_TEXT_SIZE];
    const char *missing = "";
    bool kept = effort_kept(watch, &missing);
    snprintf(text, sizeof text, "the pre-watch is not complete%s%s", kept ? "" : ": ", missing);
    enum advice_ground why_so = watch->phase == PHASE_OFF          ? GROUND_OFF
                                : watch->phase == PHASE_POST_WATCH ? GROUND_ENDED
                                : watch->phase == PHASE_SHUTDOWN   ? GROUND_STOPPED
                                                                   : GROUND_PRE_WATCH;
    ground(wanted, watch, ADVICE_DO_NOT_START, why_so, watch->permit->pre_watch_clause,
           watch->phase == PHASE_OFF          ? "nobody keeps the watch"
           : watch->phase == PHASE_POST_WATCH ? "the work is over: another start needs a pre-watch"
                                              : text);
    need_start(watch, wanted);
}

static void want(const struct watch *watch, const struct contact *lead, struct wanted *wanted)
{
    wanted->key =
        (struct advice_key){0}; /* the rest of the texts is left as it is: this runs at every event */
    why_set(&wanted->why, "", "");
    wanted->until_ns = -1;
    wanted->needs[0] = '\0';
    if (source_sounds(watch->phase)) {
        want_while_sounding(watch, lead, wanted);
    } else if (watch->phase == PHASE_BREAK) {
        want_in_break(watch, lead, wanted);
    } else if (want_for_contact(watch, lead, effort_complete(watch), wanted)) {
        need_start(watch, wanted);
    } else if (watch->phase == PHASE_READY) {
        want_ready(watch, wanted);
    } else if (watch->phase != PHASE_OFF || watch->n_advice > 0) {
        want_not_ready(watch, wanted);
    }
}

static struct watch_advice *in_force(struct watch *watch, enum station station)
{
    for (uint32_t i = 0; i < watch->n_advice; i++)
        if (watch->advice[i].in_force && strcmp(watch->advice[i].advice.station, station_names[station]) == 0)
            return &watch->advice[i];
    return NULL;
}

/* What changes while the advice stays the same. */
static void refresh(const struct watch *watch, const struct wanted *wanted, struct advice_outcome *advice)
{
    advice->until_ns = wanted->until_ns;
    /* Only what a contact asks for waits for somebody's word. */
    advice->confirmed = wanted->key.ground != GROUND_CONTACT || wanted->key.confirmed;
    memcpy(advice->reason, wanted->why.text, sizeof advice->reason);
    memcpy(advice->clause, wanted->why.clause, sizeof advice->clause);
    memcpy(advice->job, watch->source.job, sizeof advice->job);
    memcpy(advice->requires, wanted->needs, sizeof advice->requires);
}

static void fill(const struct watch *watch, enum station station, const struct wanted *wanted,
                 struct advice_outcome *advice)
{
    *advice = (struct advice_outcome){.advice = wanted->key.word, .n_causes = wanted->why.n_causes};
    snprintf(advice->station, sizeof advice->station, "%s", station_names[station]);
    refresh(watch, wanted, advice);
    memcpy(advice->causes, wanted->why.causes, sizeof advice->causes);
}

/* What ended the advice that the new one replaces belongs to its reason and causes. */
static void add_end(const struct watch *watch, const struct advice_key *old, struct wanted *wanted)
{
    bool of_contact = (old->ground == GROUND_CONTACT && wanted->key.contact != old->contact) ||
                      (old->ground == GROUND_UNALLOWED && wanted->key.ground != GROUND_UNALLOWED);
    if (!of_contact || watch->let_go_ns != watch->now_ns)
        return;
    struct why ended = watch->let_go; /* its text and causes first */
    for (uint32_t i = 0; i < wanted->why.n_causes; i++)
        why_add_cause(&ended, wanted->why.causes[i]);
    int first = (int)strnlen(watch->let_go.text, 150);
    snprintf(ended.text, sizeof ended.text, "%.*s; %.*s", first, watch->let_go.text,
             (int)sizeof ended.text - 3 - first, wanted->why.text);
    memcpy(ended.clause, wanted->why.clause, sizeof ended.clause);
    wanted->why = ended;
}

static void settle_station(struct watch *watch, enum station station, const struct wanted *now)
{
    struct advice_outcome advice;
    struct advice_key *key = &watch->keys[station];
    if (now->key.ground == GROUND_NONE)
        return;
    struct watch_advice *present = in_force(watch, station);
    bool same = present && key->word == now->key.word && key->ground == now->key.ground &&
                key->contact == now->key.contact && key->condition == now->key.condition &&
                key->confirmed == now->key.confirmed;
    if (same) { /* people see the newest figures; the situation is the same, and so is the advice */
        refresh(watch, now, &present->advice);
        return;
    }
    struct wanted wanted = *now;
    add_end(watch, key, &wanted);
    why_add_cause(&wanted.why, watch->recent.causes[0]);
    fill(watch, station, &wanted, &advice);
    *key = now->key;
    watch_say_advice(watch, &advice);
}

void advice_settle(struct watch *watch)
{
    const struct contact *lead = contact_lead(watch, false), *of_crew = contact_lead(watch, true);
    struct wanted wanted;
    want(watch, lead, &wanted);
    settle_station(watch, STATION_OBSERVER, &wanted);
    if (of_crew != lead) /* else both are told the same */
        want(watch, of_crew, &wanted);
    settle_station(watch, STATION_CREW, &wanted);
}

/* What the observer's voice did is not the station's own answer, and stands beside it. */
static bool is_of(const struct watch_acknowledgement *answer, const struct note *note)
{
    bool voice = strcmp(note->answer, "passed") == 0;
    return strcmp(answer->station, note->station) == 0 && (strcmp(answer->answer, "passed") == 0) == voice;
}

void watch_advice_answer(struct watch_advice *advice, const struct note *note, int64_t now_ns)
{
    advice->acknowledged = true;
    memcpy(advice->acknowledged_by, note->person, sizeof advice->acknowledged_by);
    memcpy(advice->answer, note->answer, sizeof advice->answer);
    uint32_t i = 0;
    while (i < advice->n_acknowledgements && !is_of(&advice->acknowledgements[i], note))
        i++;
    if (i == WATCH_MAX_ACKNOWLEDGEMENTS)
        i--;
    if (i == advice->n_acknowledgements)
        advice->n_acknowledgements++;
    struct watch_acknowledgement *answer = &advice->acknowledgements[i];
    memcpy(answer->station, note->station, sizeof answer->station);
    memcpy(answer->person, note->person, sizeof answer->person);
    memcpy(answer->answer, note->answer, sizeof answer->answer);
    answer->known_ns = now_ns;
}

void advice_acknowledge(struct watch *watch, const struct note *note)
{
    for (uint32_t i = 0; i < watch->n_advice; i++) {
        struct watch_advice *advice = &watch->advice[i];
        if (strcmp(advice->id, note->advice) != 0)
            continue;
        watch_advice_answer(advice, note, watch->now_ns);
        if (strcmp(note->answer, "declined") == 0) {
            struct why why;
            why_reset(&why, advice->advice.clause, "%.60s (%.60s) declines '%s': %.80s", note->person,
                      note->station, advice_text(advice->advice.advice), note->text);
            why_add_cause(&why, advice->id);
            why_add_cause(&why, watch->recent.causes[0]);
            watch_say_finding(watch, "advice declined", "firm", &why);
        }
        return;
    }
    note_without_effect(watch, "no advice %.40s is known to be acknowledged", note->advice);
}
