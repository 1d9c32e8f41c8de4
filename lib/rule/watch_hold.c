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

const struct contact *contact_lead(const struct watch *watch, bool crew)
{
    const struct contact *lead = NULL;
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        const struct contact *contact = &watch->contacts.all[i];
        if (!contact->asked || !(contact->passed || !crew)) /* most are over: look no closer */
            continue;
        enum permit_action wanted = contact_wanted(watch, contact);
        if (wanted >= ACTION_PREPARE && (!lead || wanted > contact_wanted(watch, lead)))
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

int64_t contact_all_clear_ns(const struct watch *watch)
{
    int64_t latest = -1;
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        const struct contact *contact = &watch->contacts.all[i];
        if (!contact->holding)
            continue;
        int64_t clears = contact_clears_at_ns(contact, watch->permit, watch->now_ns);
        if (clears > latest)
            latest = clears;
    }
    return latest;
}
