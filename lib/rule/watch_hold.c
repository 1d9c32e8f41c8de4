/* What the contacts together hold back. */
#include "base/time.h"
#include "rule/watch_inner.h"

static void earlier(int64_t *due, int64_t now_ns, int64_t at_ns)
{
    if (at_ns > now_ns && at_ns < *due)
        *due = at_ns;
}

int64_t contact_due_ns(const struct watch *watch)
{
    int64_t due = INT64_MAX, gap_ns = time_from_s(watch->setup.contact_gap_s);
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        const struct contact *contact = &watch->contacts.all[i];
        if (contact->state != CONTACT_OPEN)
            continue;
        if (contact->holding)
            for (uint32_t zone = 0; zone < watch->permit->n_zones; zone++)
                earlier(&due, watch->now_ns, contact_zone_clear_ns(contact, watch->permit, zone));
        else
            earlier(&due, watch->now_ns, contact->last_ns + gap_ns);
        if (contact->asked && !contact->passed)
            earlier(&due, watch->now_ns, contact->countdown_ends_ns);
    }
    return due;
}

bool contact_phase_asks(const struct watch *watch)
{
    for (uint32_t i = 0; i < watch->permit->n_zones; i++)
        if (watch->permit->zones[i].action[watch->phase] >= ACTION_PREPARE)
            return true;
    return false;
}

bool contact_is_vouched(const struct contact *contact)
{
    return contact->confirmed || (contact->vouched && contact->sure);
}

const struct contact *contact_lead(const struct watch *watch, bool crew)
{
    const struct contact *lead = NULL;
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        const struct contact *contact = &watch->contacts.all[i];
        if (!contact->asked || !(contact->passed || !crew)) /* most are over: look no closer */
            continue;
        enum permit_action wanted = contact_wanted(watch, contact);
        enum permit_action most = lead ? contact_wanted(watch, lead) : ACTION_LOG;
        bool surer = lead && wanted == most && contact_is_vouched(contact) && !contact_is_vouched(lead);
        if (wanted >= ACTION_PREPARE && (wanted > most || surer))
            lead = contact;
    }
    return lead;
}

const struct contact *contact_holder(const struct watch *watch, bool questions)
{
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        const struct contact *contact = &watch->contacts.all[i];
        if (contact->holding && contact_holds_start(contact, watch->permit, watch->now_ns) &&
            (questions || !contact_is_question(contact, watch->permit, watch->now_ns)))
            return contact;
    }
    return NULL;
}

static enum permit_action strongest(const struct permit_zone *zone)
{
    enum permit_action most = ACTION_LOG;
    for (unsigned i = 0; i < PHASE_COUNT; i++)
        most = zone->action[i] > most ? zone->action[i] : most;
    return most;
}

const struct permit_zone *contact_last_zone(const struct watch *watch, const struct contact *contact)
{
    const struct permit *permit = watch->permit;
    const struct permit_zone *last = NULL;
    int64_t last_ns = -1;
    for (uint32_t i = 0; i < permit->n_zones; i++) {
        int64_t clear_ns = contact_zone_clear_ns(contact, permit, i);
        if (clear_ns < 0 || clear_ns < last_ns ||
            (clear_ns == last_ns && strongest(&permit->zones[i]) <= strongest(last)))
            continue;
        last = &permit->zones[i];
        last_ns = clear_ns;
    }
    return last;
}

int64_t contact_all_clear_ns(const struct watch *watch, bool of_starts)
{
    int64_t latest = -1;
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        const struct contact *contact = &watch->contacts.all[i];
        if (!contact->holding)
            continue;
        for (uint32_t zone = 0; zone < watch->permit->n_zones; zone++) {
            int64_t clears = contact_zone_clear_ns(contact, watch->permit, zone);
            if (clears > watch->now_ns && clears > latest &&
                (!of_starts || strongest(&watch->permit->zones[zone]) >= ACTION_DELAY))
                latest = clears;
        }
    }
    return latest;
}
