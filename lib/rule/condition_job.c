/* How long the source may sound in one job, breaks not counted. */
#include "base/time.h"
#include "rule/condition.h"
#include <stdio.h>
#include <string.h>

static int64_t sounded_ns(const struct watch *watch)
{
    const struct job_state *job = &watch->job;
    return job->sounded_ns + (job->since_ns < 0 ? 0 : watch->now_ns - job->since_ns);
}

static void enter_phase(struct watch *watch, enum phase from, enum phase to)
{
    struct job_state *job = &watch->job;
    if (source_sounds(from) == source_sounds(to))
        return;
    job->sounded_ns = sounded_ns(watch);
    job->since_ns = source_sounds(to) ? watch->now_ns : -1;
}

/* A job that is opened again goes on: a restrike of the same pile adds to it. */
static void take_note(struct watch *watch, const struct note *note)
{
    struct job_state *job = &watch->job;
    if (note->kind != NOTE_JOB || strcmp(note->answer, "open") != 0 || strcmp(note->job, job->name) == 0)
        return;
    snprintf(job->name, sizeof job->name, "%s", note->job);
    job->sounded_ns = 0;
    job->since_ns = job->since_ns < 0 ? -1 : watch->now_ns;
    job->too_long = false;
}

static int64_t due_ns(const struct watch *watch)
{
    const struct permit_job *rule = &watch->permit->job;
    if (!rule->stated || watch->job.too_long || watch->job.since_ns < 0)
        return INT64_MAX;
    return watch->job.since_ns + time_from_minutes(rule->longest_minutes) - watch->job.sounded_ns +
           TIME_NS_PER_US;
}

static void settle(struct watch *watch)
{
    const struct permit_job *rule = &watch->permit->job;
    struct why why;
    if (!rule->stated || watch->job.too_long || sounded_ns(watch) <= time_from_minutes(rule->longest_minutes))
        return;
    watch->job.too_long = true;
    why_reset(&why, rule->clause, "the source has sounded for more than %g min in this job",
              rule->longest_minutes);
    why_add_cause(&why, watch->phase_id);
    watch_say_finding(watch, "job too long", "firm", &why);
}

static bool show(const struct watch *watch, struct watch_timer *timer)
{
    const struct permit_job *rule = &watch->permit->job;
    if (!rule->stated)
        return false;
    *timer = (struct watch_timer){.elapsed_ns = sounded_ns(watch),
                                  .needed_ns = time_from_minutes(rule->longest_minutes),
                                  .running = watch->job.since_ns >= 0};
    snprintf(timer->name, sizeof timer->name, "sound in this job");
    snprintf(timer->held_by, sizeof timer->held_by, "%s", timer->running ? "" : "the source is silent");
    return true;
}

const struct condition condition_job = {
    .due_ns = due_ns, .take_note = take_note, .enter_phase = enter_phase, .settle = settle, .show = show};
