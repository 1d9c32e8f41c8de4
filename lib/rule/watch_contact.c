/* Calls, sightings and verdicts: contacts and their episodes. */
#include "base/time.h"
#include "rule/watch_inner.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

static int64_t gap_ns(const struct watch *watch)
{
    return time_from_s(watch->setup.contact_gap_s);
}

/* The contact that stands in when there is no room for another: said, not silent. */
static struct contact *no_room(struct watch *watch, enum group group)
{
    struct contact *contact = &watch->contacts.all[watch->contacts.n - 1];
    for (uint32_t i = 0; i < watch->contacts.n; i++)
        if (watch->contacts.all[i].group == group)
            contact = &watch->contacts.all[i];
    struct why why;
    why_reset(&why, "", "%d contacts are open: another %s counts as contact %u", WATCH_MAX_CONTACTS,
              group_text(group), contact->number);
    why_add_cause(&why, watch->recent.causes[0]);
    watch_say_finding(watch, "too many contacts", "firm", &why);
    return contact;
}

static struct contact *find_or_add(struct watch *watch, enum group group, int64_t start_ns, bool *out_new)
{
    struct contact *contact = contacts_near(&watch->contacts, group, start_ns, gap_ns(watch));
    *out_new = false;
    if (contact)
        return contact;
    contact = contacts_add(&watch->contacts, group, watch->now_ns);
    *out_new = contact != NULL;
    if (contact)
        contact->depth_m = watch->surroundings.depth_m;
    return contact ? contact : no_room(watch, group);
}

/* A distance that nobody has confirmed for so long says nothing about the next detection. */
static void forget_old_distance(const struct watch *watch, struct contact *contact, int64_t when_ns)
{
    if (contact->where.known && when_ns - contact->where_ns > gap_ns(watch))
        contact->where = (struct whereabouts){0};
}

static enum contact_grade grade_of(const struct watch *watch, double evidence)
{
    return evidence >= watch->setup.act_evidence    ? GRADE_ACT
           : evidence >= watch->setup.look_evidence ? GRADE_LOOK
                                                    : GRADE_NONE;
}

static bool raise_grade(const struct watch *watch, struct contact *contact)
{
    enum contact_grade grade = grade_of(watch, contact->evidence);
    bool rises = grade > contact->grade;
    if (rises)
        contact->grade = grade;
    return rises;
}

static void add_evidence(const struct watch *watch, struct contact *contact, double evidence)
{
    contact->evidence = contact_evidence(contact, watch->now_ns, watch->setup.evidence_decay_s) + evidence;
    contact->evidence_ns = watch->now_ns;
}

static void remember_end(struct watch *watch, const struct contact *contact, const struct permit_zone *zone,
                         const char *reason)
{
    why_reset(&watch->let_go, zone ? zone->clause : "", "%.250s", reason);
    why_add_cause(&watch->let_go, watch->recent.causes[0]);
    why_add_contact(&watch->let_go, contact);
    watch->let_go_ns = watch->now_ns;
}

/* What it held back, if anything, it no longer does. */
static void let_go_of(struct watch *watch, struct contact *contact, const struct permit_zone *zone,
                      const char *reason)
{
    bool held = contact->holding || watch->source.unallowed_contact == contact->number;
    contact_end_episode(contact);
    watch_say_contact(watch, contact);
    if (held)
        remember_end(watch, contact, zone, reason);
}

static void let_go(struct watch *watch, struct contact *contact, const char *reason)
{
    let_go_of(watch, contact, contact_zone(contact, watch->permit, watch->now_ns), reason);
}

/* What was taken for an animal was a recognised sound of something else. A contact that a person has seen or
 * vouched for, or that has gone to the crew, keeps its grade: only people loosen an instruction. */
static void look_again(struct watch *watch, struct contact *contact, const char *class_name)
{
    char text[FLOW_TEXT_SIZE];
    bool settled = contact->seen || contact->word_ns >= 0 || contact->passed;
    double most = contact_most_evidence(contact, watch->setup.evidence_decay_s);
    contact_add_cause(contact, watch->recent.causes[0]);
    if (!settled && contact->state == CONTACT_OPEN && grade_of(watch, most) < contact->grade)
        contact->grade = grade_of(watch, most);
    if (!settled && contact->n_calls == 0 && contact->state == CONTACT_OPEN) {
        contact->grade = GRADE_NONE;
        contact->state = CONTACT_CLEARED;
        contact_let_go(contact);
    }
    if (contact->holding && contact_clears_at_ns(contact, watch->permit, watch->now_ns) < 0) {
        snprintf(text, sizeof text, "contact %u, %s: what was heard was %s", contact->number,
                 group_text(contact->group), class_name);
        let_go(watch, contact, text);
    } else
        watch_say_contact(watch, contact);
}

/* A sound that is no animal's: calls that it covers lose what they said. */
static void take_sound(struct watch *watch, const struct event *event)
{
    const struct call *sound = &event->as.call;
    if (!(sound->evidence < 0))
        return;
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        struct contact *contact = &watch->contacts.all[i];
        bool touched = false;
        for (uint32_t k = 0; k < sound->n_against && k < CALL_MAX_AGAINST; k++)
            touched = contact_take_back(contact, event->run, event->stream, sound->against[k],
                                        -sound->evidence, watch->now_ns, watch->setup.evidence_decay_s) ||
                      touched;
        if (touched)
            look_again(watch, contact, sound->class_name);
    }
}

/* While it calls, a contact's count of calls in the ledger is at most this old. */
#define CONTACT_BEAT_NS (30 * TIME_NS_PER_S)

void contact_take_call(struct watch *watch, const struct event *event)
{
    const struct call *call = &event->as.call;
    if (call->n_sounds > 0) {
        take_sound(watch, event);
        return;
    }
    bool speaks_for = call->evidence > 0, is_new = false;
    struct contact *contact = contacts_near(&watch->contacts, call->group, call->start_ns, gap_ns(watch));
    if (!contact && !speaks_for)
        return;
    if (!contact)
        contact = find_or_add(watch, call->group, call->start_ns, &is_new);
    add_evidence(watch, contact, call->evidence);
    if (!speaks_for)
        return;
    int64_t when_ns = call->end_ns < watch->now_ns ? call->end_ns : watch->now_ns;
    bool was_known = contact->where.known, reopened = contact->state != CONTACT_OPEN;
    if (is_new)
        contact->first_ns = call->start_ns < watch->now_ns ? call->start_ns : watch->now_ns;
    contact->n_calls++;
    contact_keep_call(contact, event, when_ns);
    contact->state = CONTACT_OPEN;
    if (when_ns > contact->last_ns || is_new)
        contact->last_ns = when_ns;
    if (call->bearing_from != BEARING_NONE) {
        contact->bearing_deg = call->bearing_deg;
        contact->mirror_deg = call->mirror_deg;
        contact->bearing_from = call->bearing_from;
    }
    forget_old_distance(watch, contact, when_ns);
    contact_add_cause(contact, watch->recent.causes[0]);
    contact_detect(contact, watch->permit, when_ns);
    bool beat = watch->now_ns - contact->said_ns >= CONTACT_BEAT_NS;
    if (raise_grade(watch, contact) || is_new || reopened || was_known != contact->where.known || beat)
        watch_say_contact(watch, contact);
}

/* Puts the contact at a distance unless that would loosen a hold on the word of somebody who is not on
 * watch. Whether it ended one, and the contact has been said. */
static bool place(struct watch *watch, struct contact *contact, const struct note *note, int64_t when_ns)
{
    const struct permit *permit = watch->permit;
    struct contact placed = *contact;
    int64_t before = contact_clears_at_ns(contact, permit, watch->now_ns);
    contact_place(&placed, permit, note->distance_m, watch->setup.sighting_log_spread, when_ns);
    int64_t after = contact_clears_at_ns(&placed, permit, watch->now_ns);
    if (before >= 0 && after < before && !effort_on_watch(watch, note->person)) {
        note_without_effect(watch, "%.60s is not on watch: the distance of contact %u is not taken over",
                            note->person, contact->number);
        return false;
    }
    *contact = placed;
    if (before < 0 || after >= 0)
        return false;
    char text[FLOW_TEXT_SIZE];
    contact_describe(contact, permit, watch->now_ns, text);
    let_go(watch, contact, text);
    return true;
}

static void leave(struct watch *watch, struct contact *contact, const struct note *note)
{
    char text[FLOW_TEXT_SIZE];
    if (!effort_on_watch(watch, note->person)) {
        note_without_effect(watch, "%.60s is not on watch: contact %u is not taken as gone", note->person,
                            contact->number);
        return;
    }
    if (!contact_leaving_ends(contact, watch->permit))
        return; /* the clearance time runs on: its timer says so */
    contact->state = CONTACT_LEFT;
    contact_let_go(contact);
    snprintf(text, sizeof text, "contact %u, %s, was seen to leave, says %.60s", contact->number,
             group_text(contact->group), note->person);
    let_go(watch, contact, text);
}

/* An observer on watch speaks for the contact; another's word waits for the observer's. */
static void vouch(const struct watch *watch, struct contact *contact, const struct note *note)
{
    if (!effort_on_watch(watch, note->person))
        return;
    contact->vouched = true;
    contact->word_ns = watch->now_ns;
}

void contact_take_sighting(struct watch *watch, const struct note *note)
{
    bool is_new = false;
    struct contact *contact = note->contact ? contacts_find(&watch->contacts, note->contact) : NULL;
    if (note->contact && !contact)
        note_without_effect(watch, "there is no contact %u: the sighting stands for itself", note->contact);
    if (!contact)
        contact = find_or_add(watch, note->group, watch->now_ns, &is_new);
    contact->state = CONTACT_OPEN;
    contact->seen = true;
    vouch(watch, contact, note);
    contact->calf = contact->calf || note->calf;
    if (note->number > contact->animals)
        contact->animals = note->number;
    if (*note->species)
        memcpy(contact->species, note->species, sizeof contact->species);
    contact->grade = GRADE_ACT; /* a person saw it */
    contact->last_ns = watch->now_ns;
    contact_add_cause(contact, watch->recent.causes[0]);
    if (!isnan(note->bearing_deg)) {
        contact->bearing_deg = note->bearing_deg;
        contact->mirror_deg = NAN;
        contact->bearing_from = BEARING_TRUE;
    }
    forget_old_distance(watch, contact, watch->now_ns);
    bool said = false;
    if (!isnan(note->distance_m))
        said = place(watch, contact, note, watch->now_ns);
    else
        contact_detect(contact, watch->permit, watch->now_ns);
    if (!said)
        watch_say_contact(watch, contact);
    if (note->leaving)
        leave(watch, contact, note);
}

void contact_take_distance(struct watch *watch, const struct note *note)
{
    struct contact *contact = contacts_find(&watch->contacts, note->contact);
    if (!contact) {
        note_without_effect(watch, "there is no contact %u to have a distance", note->contact);
        return;
    }
    contact_add_cause(contact, watch->recent.causes[0]);
    if (!isnan(note->distance_m)) {
        vouch(watch, contact, note);
        bool said = place(watch, contact, note, contact->last_ns);
        if (contact_clears_at_ns(contact, watch->permit, watch->now_ns) >= 0)
            contact->state = CONTACT_OPEN;
        if (!said)
            watch_say_contact(watch, contact);
    }
    if (note->leaving)
        leave(watch, contact, note);
}

static void dismiss(struct watch *watch, struct contact *contact, const struct note *note)
{
    char text[FLOW_TEXT_SIZE];
    if (!effort_on_watch(watch, note->person)) {
        note_without_effect(watch, "%.60s is not on watch: contact %u is not dismissed", note->person,
                            contact->number);
        return;
    }
    contact->state = CONTACT_DISMISSED;
    snprintf(text, sizeof text, "contact %u, %s, is dismissed by %.60s: %.100s", contact->number,
             group_text(contact->group), note->person, note->text);
    let_go(watch, contact, text);
    if (watch->source.unallowed_contact == contact->number) {
        watch->source.unallowed = ACTION_LOG;
        watch->source.unallowed_contact = 0;
    }
}

static void confirm(struct watch *watch, struct contact *contact, const struct note *note)
{
    if (!effort_on_watch(watch, note->person)) {
        note_without_effect(watch, "%.60s is not on watch: contact %u is not confirmed", note->person,
                            contact->number);
        return;
    }
    contact->grade = GRADE_ACT;
    contact->confirmed = true;
    contact->word_ns = watch->now_ns;
    /* One that was let rest as too weak to act on counts from its last detection. */
    if (contact->state == CONTACT_DISMISSED ||
        contact_clears_at_ns(contact, watch->permit, watch->now_ns) >= 0)
        contact->state = CONTACT_OPEN;
    watch_say_contact(watch, contact);
}

void contact_take_verdict(struct watch *watch, const struct note *note)
{
    struct contact *contact = contacts_find(&watch->contacts, note->contact);
    if (!contact || !*note->text || !*note->person) {
        note_without_effect(watch, "a verdict on contact %u needs that contact, a person and a reason",
                            note->contact);
        return;
    }
    contact_add_cause(contact, watch->recent.causes[0]);
    if (strcmp(note->verdict, "confirm") == 0)
        confirm(watch, contact, note);
    else if (strcmp(note->verdict, "dismiss") == 0)
        dismiss(watch, contact, note);
    else
        leave(watch, contact, note);
}

static void describe_clear(const struct watch *watch, const struct contact *contact, char out[FLOW_TEXT_SIZE])
{
    snprintf(out, FLOW_TEXT_SIZE, "contact %u, %s: no detection inside for %g min", contact->number,
             group_text(contact->group), time_to_s(contact_clearance_ns(contact, watch->permit)) / 60);
}

/* The zones that hold a start back are clear of it, by time or by a distance; others are not yet. */
static void expire_delay(struct watch *watch, struct contact *contact)
{
    char text[FLOW_TEXT_SIZE];
    bool delays = contact->holding && contact_holds_start(contact, watch->permit, watch->now_ns);
    bool by_time = false;
    if (contact->holding && contact->delaying && !delays) {
        for (uint32_t i = 0; i < watch->permit->n_zones; i++)
            by_time = by_time || contact_zone_clear_ns(contact, watch->permit, i) == watch->now_ns;
        if (by_time)
            describe_clear(watch, contact, text);
        else
            contact_describe(contact, watch->permit, watch->now_ns, text);
        remember_end(watch, contact, contact_zone(contact, watch->permit, watch->now_ns), text);
    }
    contact->delaying = delays;
}

static void expire_one(struct watch *watch, struct contact *contact)
{
    bool holds = contact_clears_at_ns(contact, watch->permit, watch->now_ns) >= 0;
    if (contact->holding && !holds) {
        char text[FLOW_TEXT_SIZE];
        const struct permit_zone *zone = contact_last_zone(watch, contact);
        describe_clear(watch, contact, text);
        contact->state = CONTACT_CLEARED;
        source_keep_stop(watch, contact);
        let_go_of(watch, contact, zone, text);
    } else if (holds && !contact->holding) {
        contact->holding = true; /* what people said of an earlier episode does not speak for this one */
        contact->vouched = contact->vouched && contact->word_ns == watch->now_ns;
        contact->confirmed = contact->confirmed && contact->word_ns == watch->now_ns;
    } else if (holds)
        return;
    else if (contact->state == CONTACT_OPEN && watch->now_ns - contact->last_ns >= gap_ns(watch)) {
        contact->state = CONTACT_CLEARED;
        watch_say_contact(watch, contact);
    }
}

void contact_expire(struct watch *watch)
{
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        struct contact *contact = &watch->contacts.all[i];
        contact->depth_m = watch->surroundings.depth_m;
        if (contact->state != CONTACT_OPEN)
            continue;
        expire_one(watch, contact);
        expire_delay(watch, contact);
    }
}

enum permit_action contact_wanted(const struct watch *watch, const struct contact *contact)
{
    if (!contact->holding)
        return ACTION_LOG;
    enum permit_action action = contact_action(contact, watch->permit, watch->phase, watch->now_ns);
    if (source_sounds(watch->phase) || watch->phase == PHASE_SHUTDOWN)
        action = contact->order > action ? contact->order : action;
    if (!source_sounds(watch->phase) && watch->phase != PHASE_BREAK && action < ACTION_DELAY &&
        contact_holds_start(contact, watch->permit, watch->now_ns))
        action = ACTION_DELAY;
    return source_sounds(watch->phase) ? override_limit(watch, action) : action;
}

void contact_present(struct watch *watch)
{
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        struct contact *contact = &watch->contacts.all[i];
        enum permit_action wanted = contact_wanted(watch, contact);
        if (wanted < ACTION_PREPARE)
            continue;
        if (!contact->asked) {
            contact->asked = true;
            contact->countdown_ends_ns = watch->now_ns + time_from_s(watch->permit->confirm_countdown_s);
        }
        if (contact_is_vouched(contact) || watch->now_ns >= contact->countdown_ends_ns)
            contact->passed = true;
        if (contact->passed && source_sounds(watch->phase) && wanted > contact->order)
            contact->order = wanted;
    }
}
