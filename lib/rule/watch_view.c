/* What people see: a copy, with every timer and what holds it. */
#include "base/time.h"
#include "rule/watch_inner.h"
#include <stdio.h>
#include <string.h>

static struct watch_timer *add_timer(struct watch_view *view, int64_t elapsed_ns, int64_t needed_ns)
{
    if (view->n_timers == WATCH_MAX_TIMERS)
        return NULL;
    struct watch_timer *timer = &view->timers[view->n_timers++];
    *timer = (struct watch_timer){.elapsed_ns = elapsed_ns, .needed_ns = needed_ns, .running = true};
    return timer;
}

static void add_pre_watch(const struct watch *watch, struct watch_view *view)
{
    int64_t needed = effort_needed_ns(watch), done = watch->effort.credit_ns;
    struct watch_timer *timer = add_timer(view, done < needed ? done : needed, needed);
    const char *missing, *held = "";
    bool kept = effort_kept(watch, &missing);
    if (!kept)
        held = missing;
    else if (effort_deaf(watch))
        held = "the watch cannot hear: what was not heard is taken back";
    else if (done >= needed)
        held = "complete";
    else if (!watch->effort.accruing)
        held = source_sounds(watch->phase) ? "the source sounds" : "the break has not been too long yet";
    snprintf(timer->name, sizeof timer->name, "pre-watch");
    snprintf(timer->held_by, sizeof timer->held_by, "%s", held);
    timer->running = !*held;
}

static void add_source(const struct watch *watch, struct watch_view *view)
{
    const struct source *source = &watch->source;
    struct watch_timer *timer = NULL;
    if (source->soft_start_ns >= 0 && source_sounds(watch->phase)) {
        timer = add_timer(view, watch->now_ns - source->soft_start_ns,
                          time_from_s(watch->permit->soft_start.least_minutes * 60));
        snprintf(timer->name, sizeof timer->name, "soft start");
    }
    if (watch->phase == PHASE_BREAK || watch->phase == PHASE_POST_WATCH) {
        timer =
            add_timer(view, watch->now_ns - source->quiet_ns, time_from_s(source_break(watch)->minutes * 60));
        snprintf(timer->name, sizeof timer->name, "break");
    }
}

static void add_contact_timers(const struct watch *watch, const struct contact *contact,
                               struct watch_view *view)
{
    int64_t clears = contact_clears_at_ns(contact, watch->permit, watch->now_ns);
    struct watch_timer *timer = NULL;
    if (!contact->holding || clears < 0)
        return;
    if (contact->asked && !contact->passed) {
        int64_t all = time_from_s(watch->permit->confirm_countdown_s);
        timer = add_timer(view, watch->now_ns - (contact->countdown_ends_ns - all), all);
        if (timer)
            snprintf(timer->name, sizeof timer->name, "answer about contact %u", contact->number);
    }
    int64_t all = contact_clearance_ns(contact, watch->permit);
    timer = add_timer(view, watch->now_ns - (clears - all), all);
    if (timer)
        snprintf(timer->name, sizeof timer->name, "clearance of contact %u", contact->number);
}

static void copy_contact(const struct watch *watch, const struct contact *contact, struct watch_contact *out)
{
    bool waits = contact->asked && !contact->passed;
    *out = (struct watch_contact){
        .contact = contact_outcome(contact, watch->permit, watch->now_ns),
        .first_ns = contact->first_ns,
        .last_ns = contact->last_ns,
        .clears_at_ns = contact->holding ? contact_clears_at_ns(contact, watch->permit, watch->now_ns) : -1,
        .evidence = contact_evidence(contact, watch->now_ns, watch->setup.evidence_decay_s),
        .seen = contact->seen,
        .countdown_ends_ns = waits ? contact->countdown_ends_ns : -1,
    };
}

bool view_release_possible(const struct watch *watch)
{
    return watch->phase == PHASE_READY && !contact_holder(watch, true) && !effort_deaf(watch);
}

void watch_get_view(const struct watch *watch, struct watch_view *out)
{
    memset(out, 0, sizeof *out);
    out->watch_ns = watch->now_ns;
    out->phase = watch->phase;
    out->phase_since_ns = watch->phase_since_ns;
    memcpy(out->phase_reason, watch->phase_why.text, sizeof out->phase_reason);
    memcpy(out->phase_clause, watch->phase_why.clause, sizeof out->phase_clause);
    memcpy(out->job, watch->source.job, sizeof out->job);
    out->source_heard = watch->source.heard;
    out->source_said = watch->source.said;
    out->release_possible = view_release_possible(watch);
    memcpy(out->released_by, watch->released_by, sizeof out->released_by);
    add_pre_watch(watch, out);
    add_source(watch, out);
    conditions_show(watch, out);
    out->n_people = watch->effort.n_people;
    memcpy(out->people, watch->effort.people, sizeof out->people);
    out->n_checks = watch->effort.n_checks;
    memcpy(out->checks, watch->effort.checks, sizeof out->checks);
    out->n_contacts = watch->contacts.n;
    for (uint32_t i = 0; i < watch->contacts.n; i++) {
        const struct contact *contact = &watch->contacts.all[watch->contacts.n - 1 - i];
        copy_contact(watch, contact, &out->contacts[i]);
        add_contact_timers(watch, contact, out);
    }
    out->n_advice = watch->n_advice;
    memcpy(out->advice, watch->advice, sizeof out->advice);
    out->n_impulses = watch->source.n_impulses;
    plan_get(watch, &out->plan);
}
