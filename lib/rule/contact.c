/* The table of contacts, and what one contact is inside of. */
#include "rule/contact.h"
#include "base/round.h"
#include "base/time.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

struct contact *contacts_find(struct contacts *contacts, uint32_t number)
{
    for (uint32_t i = 0; i < contacts->n; i++)
        if (contacts->all[i].number == number)
            return &contacts->all[i];
    return NULL;
}

struct contact *contacts_near(struct contacts *contacts, enum group group, int64_t now_ns, int64_t gap_ns)
{
    for (uint32_t i = contacts->n; i-- > 0;) {
        struct contact *contact = &contacts->all[i];
        if (contact->group == group && contact->state != CONTACT_DISMISSED &&
            (now_ns - contact->last_ns <= gap_ns || contact->holding))
            return contact;
    }
    return NULL;
}

static bool make_room(struct contacts *contacts)
{
    if (contacts->n < WATCH_MAX_CONTACTS)
        return true;
    for (uint32_t i = 0; i < contacts->n; i++)
        if (contacts->all[i].state != CONTACT_OPEN && !contacts->all[i].holding) {
            memmove(&contacts->all[i], &contacts->all[i + 1],
                    (contacts->n - i - 1) * sizeof contacts->all[0]);
            contacts->n--;
            return true;
        }
    return false;
}

struct contact *contacts_add(struct contacts *contacts, enum group group, int64_t now_ns)
{
    if (!make_room(contacts))
        return NULL;
    struct contact *contact = &contacts->all[contacts->n++];
    *contact = (struct contact){.number = ++contacts->made,
                                .group = group,
                                .state = CONTACT_OPEN,
                                .first_ns = now_ns,
                                .last_ns = now_ns,
                                .evidence_ns = now_ns,
                                .depth_m = NAN,
                                .where_ns = -1,
                                .word_ns = -1,
                                .bearing_deg = NAN,
                                .mirror_deg = NAN,
                                .countdown_ends_ns = -1};
    contact_let_go(contact);
    return contact;
}

double contact_evidence(const struct contact *contact, int64_t now_ns, double decay_s)
{
    return contact->evidence * exp(-(double)(now_ns - contact->evidence_ns) / 1e9 / decay_s);
}

void contact_keep_call(struct contact *contact, const struct event *event, int64_t end_ns)
{
    if (contact->n_kept == CONTACT_MAX_KEPT) {
        memmove(contact->kept, contact->kept + 1, sizeof contact->kept[0] * --contact->n_kept);
        contact->forgot_calls = true;
    }
    contact->kept[contact->n_kept++] = (struct contact_call){.run = event->run,
                                                             .stream = event->stream,
                                                             .counter = event->counter,
                                                             .known_ns = event->known_ns,
                                                             .end_ns = end_ns,
                                                             .evidence = event->as.call.evidence};
}

static double faded(double evidence, int64_t since_ns, int64_t now_ns, double decay_s)
{
    return evidence * exp(-(double)(now_ns - since_ns) / 1e9 / decay_s);
}

bool contact_take_back(struct contact *contact, uint32_t run, uint32_t stream, uint64_t counter,
                       double log_odds, int64_t now_ns, double decay_s)
{
    uint32_t i = 0;
    while (i < contact->n_kept && (contact->kept[i].run != run || contact->kept[i].stream != stream ||
                                   contact->kept[i].counter != counter))
        i++;
    if (i == contact->n_kept)
        return false;
    struct contact_call *call = &contact->kept[i];
    double taken = fmin(log_odds, call->evidence);
    contact->evidence =
        contact_evidence(contact, now_ns, decay_s) - faded(taken, call->known_ns, now_ns, decay_s);
    contact->evidence_ns = now_ns;
    contact->against += taken;
    call->evidence -= taken;
    if (call->evidence > 0)
        return true;
    contact->n_kept--;
    memmove(call, call + 1, sizeof *call * (contact->n_kept - i));
    contact->n_calls--;
    contact->n_taken_back++;
    return true;
}

double contact_most_evidence(const struct contact *contact, double decay_s)
{
    double sum = 0, most = 0;
    int64_t last_ns = 0;
    if (contact->forgot_calls)
        return INFINITY;
    for (uint32_t i = 0; i < contact->n_kept; i++) {
        sum = faded(sum, last_ns, contact->kept[i].known_ns, decay_s) + contact->kept[i].evidence;
        last_ns = contact->kept[i].known_ns;
        most = fmax(most, sum);
    }
    return most;
}

void contact_add_cause(struct contact *contact, const char *id)
{
    if (contact->n_causes == CONTACT_MAX_CAUSES)
        memmove(contact->causes[0], contact->causes[1],
                sizeof contact->causes[0] * (size_t)--contact->n_causes);
    snprintf(contact->causes[contact->n_causes++], FLOW_ID_SIZE, "%s", id);
}

static int lower(char c)
{
    return c >= 'A' && c <= 'Z' ? c - 'A' + 'a' : c;
}

/* Capitals aside. */
static bool same_species(const char *a, const char *b)
{
    while (*a && lower(*a) == lower(*b)) {
        a++;
        b++;
    }
    return *a == *b;
}

static bool is_listed(uint32_t n, const char species[PERMIT_MAX_SPECIES][NOTE_NAME_SIZE],
                      enum species_policy unknown, const struct contact *contact)
{
    if (n == 0)
        return true;
    if (!*contact->species)
        return unknown == SPECIES_LISTED;
    for (uint32_t i = 0; i < n && i < PERMIT_MAX_SPECIES; i++)
        if (same_species(species[i], contact->species))
            return true;
    return false;
}

static bool zone_covers(const struct permit_zone *zone, const struct contact *contact)
{
    uint32_t found = (contact->seen ? PERMIT_SEEN : 0) | (contact->n_calls > 0 ? PERMIT_HEARD : 0);
    return (zone->groups & PERMIT_GROUP_BIT(contact->group)) != 0 && (zone->found & found) != 0 &&
           (!zone->calf_only || contact->calf) &&
           (zone->least_number <= 1 || contact->animals >= zone->least_number) &&
           is_listed(zone->n_species, zone->species, zone->species_unknown, contact);
}

void contact_detect(struct contact *contact, const struct permit *permit, int64_t when_ns)
{
    enum unknown_policy policy = permit->unknown[contact->group];
    if (!contact->holding)
        contact->sure = false;
    for (uint32_t i = 0; i < permit->n_zones; i++) {
        if (!zone_covers(&permit->zones[i], contact))
            continue;
        double p = whereabouts_p_inside(&contact->where, permit_zone_reach_m(&permit->zones[i]));
        if (!isnan(p)) {
            if (p >= permit->p_inside_prepare && when_ns > contact->stated_ns[i]) {
                contact->stated_before_ns[i] = contact->stated_ns[i];
                contact->stated_ns[i] = when_ns;
            }
            contact->sure = contact->sure || p >= permit->p_inside_act;
        } else if (policy != UNKNOWN_IGNORE) {
            if (when_ns > contact->assumed_ns[i])
                contact->assumed_ns[i] = when_ns;
            contact->sure = contact->sure || policy == UNKNOWN_INSIDE;
        }
    }
}

void contact_place(struct contact *contact, const struct permit *permit, double distance_m, double log_spread,
                   int64_t when_ns)
{
    contact->where = (struct whereabouts){true, distance_m, log_spread};
    contact->where_ns = when_ns;
    for (uint32_t i = 0; i < permit->n_zones; i++) {
        if (whereabouts_p_inside(&contact->where, permit_zone_reach_m(&permit->zones[i])) >=
            permit->p_inside_prepare)
            continue;
        contact->assumed_ns[i] = -1;
        if (contact->stated_ns[i] == when_ns)
            contact->stated_ns[i] = contact->stated_before_ns[i];
    }
    contact_detect(contact, permit, when_ns);
}

void contact_let_go(struct contact *contact)
{
    for (uint32_t i = 0; i < PERMIT_MAX_ZONES; i++)
        contact->stated_ns[i] = contact->stated_before_ns[i] = contact->assumed_ns[i] = -1;
    contact->sure = false;
}

void contact_end_episode(struct contact *contact)
{
    contact->holding = contact->asked = contact->passed = false;
    contact->confirmed = contact->vouched = contact->sure = false;
    contact->countdown_ends_ns = -1;
    contact->order = ACTION_LOG;
}

/* A row of its species holds in place of its group's, which stands before it. */
static const struct permit_clearance *clearance_of(const struct contact *contact, const struct permit *permit)
{
    const struct permit_clearance *found = NULL;
    for (uint32_t i = 0; i < permit->n_clearances; i++) {
        const struct permit_clearance *row = &permit->clearances[i];
        if ((row->groups & PERMIT_GROUP_BIT(contact->group)) &&
            is_listed(row->n_species, row->species, row->species_unknown, contact))
            found = row;
    }
    return found;
}

int64_t contact_clearance_ns(const struct contact *contact, const struct permit *permit)
{
    const struct permit_clearance *clearance = clearance_of(contact, permit);
    return clearance ? time_from_minutes(permit_clearance_minutes(clearance, contact->depth_m)) : 0;
}

bool contact_leaving_ends(const struct contact *contact, const struct permit *permit)
{
    const struct permit_clearance *clearance = clearance_of(contact, permit);
    return clearance && clearance->leaving_ends;
}

/* When it was last inside a zone, or counted as inside; -1. */
static int64_t last_inside_ns(const struct contact *contact, uint32_t zone)
{
    return contact->stated_ns[zone] > contact->assumed_ns[zone] ? contact->stated_ns[zone]
                                                                : contact->assumed_ns[zone];
}

int64_t contact_zone_clear_ns(const struct contact *contact, const struct permit *permit, uint32_t zone)
{
    int64_t last = last_inside_ns(contact, zone);
    return last < 0 ? -1 : last + contact_clearance_ns(contact, permit);
}

/* Whether the zone counts the contact as inside, or not yet clear of it. */
static bool is_inside(const struct contact *contact, const struct permit *permit, uint32_t zone,
                      int64_t now_ns)
{
    return contact->grade == GRADE_ACT && contact->state != CONTACT_DISMISSED &&
           contact_zone_clear_ns(contact, permit, zone) > now_ns;
}

int64_t contact_clears_at_ns(const struct contact *contact, const struct permit *permit, int64_t now_ns)
{
    int64_t latest = -1;
    if (contact->grade != GRADE_ACT || contact->state == CONTACT_DISMISSED)
        return -1;
    int64_t clearance_ns = contact_clearance_ns(contact, permit);
    for (uint32_t i = 0; i < permit->n_zones; i++) {
        int64_t last_ns = last_inside_ns(contact, i);
        if (last_ns >= 0 && last_ns + clearance_ns > now_ns && last_ns + clearance_ns > latest)
            latest = last_ns + clearance_ns;
    }
    return latest;
}

static enum permit_action strongest_in_zone(const struct permit_zone *zone)
{
    enum permit_action strongest = ACTION_LOG;
    for (unsigned i = 0; i < PHASE_COUNT; i++)
        if (zone->action[i] > strongest)
            strongest = zone->action[i];
    return strongest;
}

bool contact_holds_start(const struct contact *contact, const struct permit *permit, int64_t now_ns)
{
    for (uint32_t i = 0; i < permit->n_zones; i++)
        if (is_inside(contact, permit, i, now_ns) && strongest_in_zone(&permit->zones[i]) >= ACTION_DELAY)
            return true;
    return false;
}

bool contact_is_question(const struct contact *contact, const struct permit *permit, int64_t now_ns)
{
    if (permit->unknown[contact->group] != UNKNOWN_ASK_OBSERVER || contact->confirmed || contact->passed)
        return false;
    for (uint32_t i = 0; i < permit->n_zones; i++)
        if (is_inside(contact, permit, i, now_ns) && contact->stated_ns[i] >= 0 &&
            contact->stated_ns[i] + contact_clearance_ns(contact, permit) > now_ns)
            return false;
    return contact_clears_at_ns(contact, permit, now_ns) >= 0;
}

enum permit_action contact_action(const struct contact *contact, const struct permit *permit,
                                  enum phase phase, int64_t now_ns)
{
    enum permit_action action = ACTION_LOG;
    for (uint32_t i = 0; i < permit->n_zones; i++)
        if (is_inside(contact, permit, i, now_ns) && permit->zones[i].action[phase] > action)
            action = permit->zones[i].action[phase];
    return action;
}

const struct permit_zone *contact_zone(const struct contact *contact, const struct permit *permit,
                                       int64_t now_ns)
{
    const struct permit_zone *best = NULL;
    bool best_inside = false;
    for (uint32_t i = 0; i < permit->n_zones; i++) {
        const struct permit_zone *zone = &permit->zones[i];
        bool inside = is_inside(contact, permit, i, now_ns);
        if (!zone_covers(zone, contact))
            continue;
        if (!best || inside > best_inside ||
            (inside == best_inside && strongest_in_zone(zone) > strongest_in_zone(best))) {
            best = zone;
            best_inside = inside;
        }
    }
    return best;
}

struct contact_outcome contact_outcome(const struct contact *contact, const struct permit *permit,
                                       int64_t now_ns)
{
    const struct permit_zone *zone = contact_zone(contact, permit, now_ns);
    double p = zone ? whereabouts_p_inside(&contact->where, permit_zone_reach_m(zone)) : NAN;
    return (struct contact_outcome){.contact = contact->number,
                                    .group = contact->group,
                                    .grade = contact->grade,
                                    .state = contact->state,
                                    .n_calls = contact->n_calls,
                                    .whereabouts = contact->where,
                                    .bearing_deg = contact->bearing_deg,
                                    .mirror_deg = contact->mirror_deg,
                                    .bearing_from = contact->bearing_from,
                                    .p_inside = round_decimals(p, ROUND_DECIMALS_PROBABILITY),
                                    .n_taken_back = contact->n_taken_back,
                                    .against = contact->against};
}

/* Words as the observer's page has them: a probability is never 0 or 1. */
static void describe_inside(const struct contact *contact, const struct permit_zone *zone,
                            char out[FLOW_TEXT_SIZE])
{
    double p = round_decimals(whereabouts_p_inside(&contact->where, permit_zone_reach_m(zone)),
                              ROUND_DECIMALS_PROBABILITY);
    char percent[16] = "under 1";
    if (p > 0.99)
        snprintf(percent, sizeof percent, "over 99");
    else if (p >= 0.01)
        snprintf(percent, sizeof percent, "%.0f", 100 * p);
    snprintf(out, FLOW_TEXT_SIZE, " at %.0f m (%s %% likely inside)", contact->where.median_m, percent);
}

void contact_describe(const struct contact *contact, const struct permit *permit, int64_t now_ns,
                      char out[FLOW_TEXT_SIZE])
{
    const struct permit_zone *zone = contact_zone(contact, permit, now_ns);
    int64_t clears = contact_clears_at_ns(contact, permit, now_ns);
    const char *how = contact->seen && contact->n_calls ? "heard and seen" : contact->seen ? "seen" : "heard";
    char where[FLOW_TEXT_SIZE] = "", inside[FLOW_TEXT_SIZE] = "";
    if (contact->where.known && zone)
        describe_inside(contact, zone, where);
    else if (contact->where.known)
        snprintf(where, sizeof where, " at %.0f m", contact->where.median_m);
    else
        snprintf(where, sizeof where, ", distance unknown");
    if (!zone)
        snprintf(inside, sizeof inside, ": no zone of the permit is for it");
    else if (clears < 0)
        snprintf(inside, sizeof inside, ": does not count as inside the zone '%s'", zone->name);
    else if (contact_is_question(contact, permit, now_ns))
        snprintf(inside, sizeof inside, ": the observer is asked whether it is inside the zone '%s'",
                 zone->name);
    else if (whereabouts_p_inside(&contact->where, permit_zone_reach_m(zone)) < permit->p_inside_prepare)
        snprintf(inside, sizeof inside, ": was inside the zone '%s', which is not clear yet", zone->name);
    else if (!contact->sure && contact->where.known && !contact->confirmed)
        snprintf(inside, sizeof inside, ": may be inside the zone '%s'", zone->name);
    else
        snprintf(inside, sizeof inside, ": counts as inside the zone '%s'", zone->name);
    snprintf(out, FLOW_TEXT_SIZE, "contact %u, %s, %s%.60s%.150s", contact->number,
             group_text(contact->group), how, where, inside);
}
