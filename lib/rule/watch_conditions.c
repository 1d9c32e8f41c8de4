/* The conditions of the permit beside pre-watch and zones, one after the other; see condition.h. */
#include "rule/condition.h"
#include <string.h>

static const struct condition *const all[] = {
    &condition_deterrent, &condition_quieting, &condition_soft_start, &condition_start,    &condition_outage,
    &condition_turn,      &condition_test,     &condition_staff,      &condition_override, &condition_stop,
    &condition_job,       &condition_quality,  &condition_charge,     &condition_limit,
};
#define N_CONDITIONS (sizeof all / sizeof all[0])

unsigned conditions_hold(const struct watch *watch, unsigned from, struct why *why, int64_t *until_ns)
{
    for (unsigned i = from; i < N_CONDITIONS; i++)
        if (all[i]->holds && all[i]->holds(watch, why, until_ns))
            return i + 1;
    return 0;
}

enum permit_action conditions_ask(const struct watch *watch, struct why *why)
{
    enum permit_action most = ACTION_LOG;
    for (size_t i = 0; i < N_CONDITIONS; i++) {
        struct why one;
        enum permit_action action = all[i]->asks ? all[i]->asks(watch, &one) : ACTION_LOG;
        if (action > most) {
            most = action;
            *why = one;
        }
    }
    return most;
}

int64_t conditions_due_ns(const struct watch *watch)
{
    int64_t due = INT64_MAX;
    for (size_t i = 0; i < N_CONDITIONS; i++) {
        int64_t one = all[i]->due_ns ? all[i]->due_ns(watch) : INT64_MAX;
        if (one > watch->now_ns && one < due)
            due = one;
    }
    return due;
}

void conditions_take_note(struct watch *watch, const struct note *note)
{
    surroundings_take(&watch->surroundings, note);
    for (size_t i = 0; i < N_CONDITIONS; i++)
        if (all[i]->take_note)
            all[i]->take_note(watch, note);
}

void conditions_take_impulse(struct watch *watch, const struct event *event)
{
    for (size_t i = 0; i < N_CONDITIONS; i++)
        if (all[i]->take_impulse)
            all[i]->take_impulse(watch, event);
}

void conditions_enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    for (size_t i = 0; i < N_CONDITIONS; i++)
        if (all[i]->enter_phase)
            all[i]->enter_phase(watch, from, to);
}

void conditions_settle(struct watch *watch)
{
    for (size_t i = 0; i < N_CONDITIONS; i++)
        if (all[i]->settle)
            all[i]->settle(watch);
}

void conditions_follow(struct watch *watch)
{
    for (size_t i = 0; i < N_CONDITIONS; i++)
        if (all[i]->follow)
            all[i]->follow(watch);
}

void conditions_judge_start(struct watch *watch)
{
    for (size_t i = 0; i < N_CONDITIONS; i++) {
        struct why why;
        int64_t until_ns;
        if (!all[i]->holds || !all[i]->holds(watch, &why, &until_ns))
            continue;
        if (watch->source.unallowed < ACTION_STOP)
            memcpy(watch->source.unallowed_why, why.text, sizeof watch->source.unallowed_why);
        watch->source.unallowed = ACTION_STOP;
        why_add_cause(&why, watch->phase_id);
        watch_say_finding(watch, all[i]->finding, "firm", &why);
    }
}

void conditions_show(const struct watch *watch, struct watch_view *view)
{
    for (size_t i = 0; i < N_CONDITIONS && view->n_timers < WATCH_MAX_TIMERS; i++)
        if (all[i]->show && all[i]->show(watch, &view->timers[view->n_timers]))
            view->n_timers++;
}
