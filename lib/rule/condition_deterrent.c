/* A deterrent before the first impulse: long enough, not too long, not long ago, not again too soon. */
#include "base/time.h"
#include "rule/condition.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

static int64_t worked_ns(const struct watch *watch)
{
    const struct deterrent *deterrent = &watch->deterrent;
    if (deterrent->on_ns < 0)
        return 0;
    return (deterrent->off_ns < 0 ? watch->now_ns : deterrent->off_ns) - deterrent->on_ns;
}

static bool too_long_ago(const struct watch *watch)
{
    const struct deterrent *deterrent = &watch->deterrent;
    double gap = watch->permit->deterrent.gap_minutes;
    return deterrent->off_ns >= 0 && gap < 1e6 && watch->now_ns > deterrent->off_ns + time_from_minutes(gap);
}

static bool holds(const struct watch *watch, struct why *why, int64_t *until_ns)
{
    const struct permit_deterrent *rule = &watch->permit->deterrent;
    int64_t needed = time_from_minutes(rule->least_minutes), worked = worked_ns(watch);
    if (!rule->stated)
        return false;
    *until_ns = -1;
    if (watch->deterrent.on_ns < 0)
        why_reset(why, rule->clause, "the deterrent has not worked: at least %g min are needed",
                  rule->least_minutes);
    else if (too_long_ago(watch))
        why_reset(why, rule->clause, "the deterrent ended more than %g min ago", rule->gap_minutes);
    else if (worked < needed) {
        why_reset(why, rule->clause, "the deterrent has worked for %.1f of at least %g min",
                  time_to_s(worked) / 60, rule->least_minutes);
        *until_ns = watch->deterrent.off_ns < 0 ? watch->deterrent.on_ns + needed : -1;
    } else
        return false;
    why_add_cause(why, watch->deterrent.id);
    return true;
}

static int64_t due_ns(const struct watch *watch)
{
    const struct permit_deterrent *rule = &watch->permit->deterrent;
    const struct deterrent *deterrent = &watch->deterrent;
    if (!rule->stated || deterrent->on_ns < 0)
        return INT64_MAX;
    if (deterrent->off_ns >= 0)
        return rule->gap_minutes < 1e6
                   ? deterrent->off_ns + time_from_minutes(rule->gap_minutes) + TIME_NS_PER_US
                   : INT64_MAX;
    int64_t enough = deterrent->on_ns + time_from_minutes(rule->least_minutes);
    if (enough > watch->now_ns || rule->longest_minutes >= 1e6)
        return enough;
    return deterrent->on_ns + time_from_minutes(rule->longest_minutes) + TIME_NS_PER_US;
}

static void find(struct watch *watch, const char *code, const struct why *why)
{
    struct why with = *why;
    why_add_cause(&with, watch->deterrent.id);
    watch_say_finding(watch, code, "firm", &with);
}

static void take_note(struct watch *watch, const struct note *note)
{
    const struct permit_deterrent *rule = &watch->permit->deterrent;
    struct deterrent *deterrent = &watch->deterrent;
    struct why why;
    bool on = strcmp(note->answer, "on") == 0, is_on = deterrent->on_ns >= 0 && deterrent->off_ns < 0;
    if (note->kind != NOTE_DETERRENT)
        return;
    if (on == is_on) {
        note_without_effect(watch, "the deterrent is %s already", on ? "on" : "off");
        return;
    }
    bool too_soon = on && deterrent->off_ns >= 0 &&
                    watch->now_ns < deterrent->off_ns + time_from_minutes(rule->again_minutes);
    memcpy(deterrent->id, watch->recent.causes[0], sizeof deterrent->id);
    if (too_soon) {
        why_reset(&why, rule->clause,
                  "the deterrent is on again %.1f min after its end; at least %g are needed",
                  time_to_s(watch->now_ns - deterrent->off_ns) / 60, rule->again_minutes);
        find(watch, "deterrent again too soon", &why);
    }
    if (on) {
        deterrent->on_ns = watch->now_ns;
        deterrent->off_ns = -1;
        deterrent->too_long = false;
    } else
        deterrent->off_ns = watch->now_ns;
}

/* What worked before one start does not stand for the next; a break that is short enough needs none. */
static void enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    struct deterrent *deterrent = &watch->deterrent;
    bool worked_out = source_sounds(from) || from == PHASE_BREAK;
    if (worked_out && !source_sounds(to) && to != PHASE_BREAK && deterrent->off_ns >= 0 &&
        deterrent->off_ns <= watch->source.quiet_ns)
        deterrent->on_ns = -1;
}

static void settle(struct watch *watch)
{
    const struct permit_deterrent *rule = &watch->permit->deterrent;
    struct deterrent *deterrent = &watch->deterrent;
    struct why why;
    if (!rule->stated || deterrent->too_long || deterrent->on_ns < 0 || deterrent->off_ns >= 0 ||
        rule->longest_minutes >= 1e6 || worked_ns(watch) <= time_from_minutes(rule->longest_minutes))
        return;
    deterrent->too_long = true;
    why_reset(&why, rule->clause, "the deterrent has worked for more than %g min", rule->longest_minutes);
    find(watch, "deterrent too long", &why);
}

static bool show(const struct watch *watch, struct watch_timer *timer)
{
    const struct permit_deterrent *rule = &watch->permit->deterrent;
    if (!rule->stated || source_sounds(watch->phase))
        return false;
    *timer = (struct watch_timer){.elapsed_ns = worked_ns(watch),
                                  .needed_ns = time_from_minutes(rule->least_minutes),
                                  .running = watch->deterrent.on_ns >= 0 && watch->deterrent.off_ns < 0};
    snprintf(timer->name, sizeof timer->name, "deterrent");
    snprintf(timer->held_by, sizeof timer->held_by, "%s", timer->running ? "" : "it is off");
    return true;
}

const struct condition condition_deterrent = {.finding = "deterrent missing",
                                              .holds = holds,
                                              .due_ns = due_ns,
                                              .take_note = take_note,
                                              .enter_phase = enter_phase,
                                              .settle = settle,
                                              .show = show};
