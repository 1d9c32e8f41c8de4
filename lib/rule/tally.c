/* What the source's sound adds up to; see tally.h. */
#include "rule/tally.h"
#include "base/time.h"
#include "rule/tally_fill.h"
#include "rule/tally_inner.h"
#include "rule/watch.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define MINUTE_NS (60 * TIME_NS_PER_S)

static enum status create_sums(const struct exposure_setup *setup, struct sums *sums)
{
    enum status status = exposure_create(setup, &sums->exposure);
    if (status != STATUS_OK || setup->sound != SOUND_IMPULSIVE)
        return status;
    sums->kept = calloc(TALLY_MAX_KEPT, sizeof *sums->kept);
    return sums->kept ? exposure_create(setup, &sums->before_job) : STATUS_NO_MEMORY;
}

static void destroy_sums(struct sums *sums)
{
    exposure_destroy(sums->exposure);
    exposure_destroy(sums->before_job);
    free(sums->kept);
}

enum status tally_create(const struct tally_setup *setup, struct tally **out)
{
    if (!setup->criteria || setup->criteria->n == 0 || setup->n_streams < 1 ||
        setup->n_streams > TALLY_MAX_STREAMS)
        return STATUS_BAD_ARGUMENT;
    struct tally *tally = calloc(1, sizeof *tally);
    if (!tally)
        return STATUS_NO_MEMORY;
    tally->setup = *setup;
    tally->sums = calloc(setup->n_streams, sizeof *tally->sums);
    const struct exposure_setup exposure = {.n_criteria = setup->criteria->n,
                                            .criteria = setup->criteria->items,
                                            .sound = setup->sound,
                                            .how = BAND_WEIGHTING_CENTRE,
                                            .reference_m = SOURCE_NORMAL_M,
                                            .day_start_ns = setup->day_start_ns,
                                            .level_spread_db = setup->level_spread_db,
                                            .loss = {.between = source_sea_between, .context = &tally->sea}};
    enum status status =
        tally->sums ? tally_fit_create(&setup->water, setup->sound_speed_m_s, &tally->fit) : STATUS_NO_MEMORY;
    for (uint32_t i = 0; i < setup->n_streams && status == STATUS_OK; i++) {
        tally_limits_reset(&tally->sums[i].limits, setup->criteria);
        tally_warnings_reset(&tally->sums[i].warnings, setup->criteria, setup->zone_edge_m,
                             setup->soft_start_s);
        status = create_sums(&exposure, &tally->sums[i]);
    }
    if (status == STATUS_OK)
        status = tally_together_create(setup, &exposure, &tally->together);
    if (status != STATUS_OK) {
        tally_destroy(tally);
        return status;
    }
    tally_set_laws(tally);
    *out = tally;
    return STATUS_OK;
}

void tally_destroy(struct tally *tally)
{
    if (!tally)
        return;
    for (uint32_t i = 0; tally->sums && i < tally->setup.n_streams; i++)
        destroy_sums(&tally->sums[i]);
    tally_fit_destroy(tally->fit);
    together_destroy(tally->together);
    free(tally->sums);
    free(tally);
}

static void fill_place(const struct tally *tally, uint32_t i, uint32_t *stream, uint32_t *channel, char *job)
{
    *stream = i + 1;
    *channel = tally->sums[i].channel;
    memcpy(job, tally->job, IMPULSE_JOB_SIZE);
}

void tally_say_finding(struct tally *tally, uint32_t i, int64_t watch_ns,
                       const struct finding_outcome *finding, struct tally_said *said,
                       const struct outcome_sink *sink)
{
    struct outcome outcome = {
        .kind = OUTCOME_FINDING, .run = tally->run, .stream = i + 1, .watch_ns = watch_ns};
    outcome.counter = ++tally->sums[i].n_findings;
    outcome.as.finding = *finding;
    said->grade = zone_grade_from_text(finding->grade);
    flow_id(tally->run, i + 1, "finding", outcome.counter, said->id);
    sink->take(sink->context, &outcome);
}

bool tally_zone_distance(const struct tally *tally, uint32_t i, const struct exposure_outcome *exposure,
                         struct zone_distance *out)
{
    const struct sums *sums = &tally->sums[i];
    if (!isfinite(tally->setup.zone_edge_m) || isnan(exposure->distance_m))
        return false;
    *out = (struct zone_distance){.zone_m = tally->setup.zone_edge_m,
                                  .distance_m = exposure->distance_m,
                                  .low_m = exposure->distance_low_m,
                                  .role = tally->setup.role[i][sums->channel - 1],
                                  .range_m = tally_range_m(tally, i + 1, sums->channel),
                                  .level_db = exposure->level_db,
                                  .threshold_db = exposure->value_db};
    return true;
}

/* A criterion of injury that is met beyond the zone's edge: by ours alone, else with the others (reach; NULL
 * where there are none). */
static void check_zone(struct tally *tally, uint32_t i, uint32_t c, const struct exposure_outcome *exposure,
                       const struct together_reach *reach, int64_t watch_ns, const struct outcome_sink *sink)
{
    struct sums *sums = &tally->sums[i];
    const struct criterion *criterion = &tally->setup.criteria->items[c];
    struct finding_outcome finding;
    struct zone_distance distance;
    if (!tally_zone_distance(tally, i, exposure, &distance))
        return;
    if (tally_zone_finding(criterion, &distance, tally->job, sums->said[c].grade, &finding))
        tally_say_finding(tally, i, watch_ns, &finding, &sums->said[c], sink);
    else if (reach && sums->said[c].grade < ZONE_INDICATIVE &&
             tally_together_finding(criterion, reach, &tally->setup, tally->job, sums->said_together[c].grade,
                                    &finding))
        tally_say_finding(tally, i, watch_ns, &finding, &sums->said_together[c], sink);
}

static void say_exposures(struct tally *tally, uint32_t i, int64_t watch_ns, const struct outcome_sink *sink)
{
    struct sums *sums = &tally->sums[i];
    for (uint32_t c = 0; c < tally->setup.criteria->n; c++) {
        struct outcome outcome = {.kind = OUTCOME_EXPOSURE, .run = tally->run, .watch_ns = watch_ns};
        struct exposure_outcome *exposure = &outcome.as.exposure;
        const struct criterion *criterion = &tally->setup.criteria->items[c];
        struct together_reach reach;
        if (tally_fill_exposure(sums->exposure, criterion, c, tally->setup.zone_edge_m, watch_ns, exposure) !=
            STATUS_OK)
            continue;
        bool others =
            tally_fill_together(tally->together, sums->exposure, criterion, c, watch_ns, exposure, &reach);
        fill_place(tally, i, &exposure->stream, &exposure->channel, exposure->job);
        outcome.counter = ++tally->n_exposures;
        sink->take(sink->context, &outcome);
        check_zone(tally, i, c, exposure, others ? &reach : NULL, watch_ns, sink);
    }
    struct finding_outcome finding;
    struct tally_said *said;
    while ((said = tally_limits_next(&sums->limits, tally->setup.criteria, tally->job, &finding)))
        tally_say_finding(tally, i, watch_ns, &finding, said, sink);
}

/* A quieting measure that takes off less than it did, said once a job. */
static void check_quieting(struct tally *tally, uint32_t i, int64_t watch_ns, const struct outcome_sink *sink)
{
    struct sums *sums = &tally->sums[i];
    struct finding_outcome finding;
    if (sums->falling.grade != ZONE_NOTHING || !tally_quieting_finding(&sums->quieting, tally->job, &finding))
        return;
    tally_say_finding(tally, i, watch_ns, &finding, &sums->falling, sink);
}

/* What one channel heard; of the reference also what quieting and the soft start come to. */
static void say_source(struct tally *tally, uint32_t i, uint32_t channel, int64_t watch_ns,
                       const struct outcome_sink *sink)
{
    const enum criterion_metric metric =
        tally->setup.sound == SOUND_CONTINUOUS ? METRIC_SPL : METRIC_SEL_SINGLE;
    struct sums *sums = &tally->sums[i];
    struct tally_channel *heard = &sums->channels[channel - 1];
    struct outcome outcome = {.kind = OUTCOME_SOURCE, .run = tally->run, .watch_ns = watch_ns};
    struct source_outcome *out = &outcome.as.source;
    struct source_measurement measured = {.metric = metric,
                                          .low_hz = 10,
                                          .high_hz = 2e4,
                                          .spread_db = tally->setup.level_spread_db,
                                          .off_axis_deg = NAN,
                                          .sound_speed_m_s = 1500};
    static const struct quieting none;
    bool counts = channel == sums->channel;
    if (!tally_channel_heard(heard))
        return;
    heard->changed = false;
    fill_place(tally, i, &out->stream, &out->channel, out->job);
    out->channel = channel;
    tally_channel_band(heard, &measured.low_hz, &measured.high_hz);
    tally_channel_fill(heard, &measured, &tally->setup.shape, tally_law_of_channel(tally, heard), out);
    out->quieting_on = tally->quieting_on;
    tally_fill_quieting(counts ? &sums->quieting : &none, tally->setup.criteria, out);
    if (counts)
        tally_warnings_text(&sums->warnings, tally->setup.criteria, out->warning);
    outcome.counter = ++tally->n_sources;
    sink->take(sink->context, &outcome);
}

static void say_all(struct tally *tally, int64_t watch_ns, const struct outcome_sink *sink)
{
    if (tally_fit_update(tally->fit))
        tally_set_laws(tally);
    for (uint32_t i = 0; i < tally->setup.n_streams && !tally->silent; i++) {
        for (uint32_t channel = 1; channel <= FLOW_MAX_CHANNELS; channel++)
            if (tally->sums[i].channels[channel - 1].changed)
                say_source(tally, i, channel, watch_ns, sink);
        if (!tally->sums[i].changed)
            continue;
        say_exposures(tally, i, watch_ns, sink);
        check_quieting(tally, i, watch_ns, sink);
        tally->sums[i].changed = false;
    }
}

/* The first word of an early warning does not wait for the minute. */
static void check_warning(struct tally *tally, uint32_t i, int64_t watch_ns, const struct outcome_sink *sink)
{
    struct sums *sums = &tally->sums[i];
    char text[FLOW_TEXT_SIZE];
    enum zone_warning warning = tally_warnings_text(&sums->warnings, tally->setup.criteria, text);
    if (warning <= sums->warned)
        return;
    sums->warned = warning;
    if (!tally->silent && sums->channel > 0)
        say_source(tally, i, sums->channel, watch_ns, sink);
}

/* A soft start begins or ends: an early warning is over with it. */
static void take_phase(struct tally *tally, enum phase phase, int64_t watch_ns,
                       const struct outcome_sink *sink)
{
    for (uint32_t i = 0; i < tally->setup.n_streams; i++) {
        struct sums *sums = &tally->sums[i];
        tally_warnings_phase(&sums->warnings, phase, watch_ns);
        if (phase == PHASE_SOFT_START)
            continue;
        if (sums->warned != ZONE_NO_WARNING && !tally->silent && sums->channel > 0)
            say_source(tally, i, sums->channel, watch_ns, sink);
        sums->warned = ZONE_NO_WARNING;
    }
}

static void take_impulse(struct tally *tally, const struct outcome *outcome, const struct outcome_sink *sink)
{
    const struct event *event = &outcome->as.event;
    const struct impulse *impulse = &event->as.impulse;
    if (tally->setup.sound != SOUND_IMPULSIVE || impulse->channel < 1 || impulse->channel > FLOW_MAX_CHANNELS)
        return; /* in the levels of its seconds it is counted already */
    double range_m =
        tally_set_range(tally, event->stream, impulse->channel, impulse->range_m, impulse->range_from);
    tally_keep(tally, event->stream, outcome->run, event->counter, impulse);
    if (tally_sum(tally, event->stream, impulse, range_m, tally->quieting_on))
        tally_fit_push(tally->fit, event->stream, range_m, impulse);
    check_warning(tally, event->stream - 1, outcome->watch_ns, sink);
}

/* What the run before had said or not is no matter: the new run says all sums again in its first minute, so
 * that a tally that was rebuilt from a ledger is one that was never interrupted. */
static void begin_run(struct tally *tally, const struct outcome *outcome)
{
    tally->run = outcome->run;
    tally->n_exposures = tally->n_sources = 0;
    tally->said_minute = outcome->watch_ns / MINUTE_NS;
    for (uint32_t i = 0; i < tally->setup.n_streams; i++) {
        struct sums *sums = &tally->sums[i];
        sums->n_findings = 0;
        sums->changed = sums->channel > 0;
        for (uint32_t c = 0; c < FLOW_MAX_CHANNELS; c++)
            sums->channels[c].changed = tally_channel_heard(&sums->channels[c]);
    }
}

static void take_event(struct tally *tally, const struct outcome *outcome, const struct outcome_sink *sink)
{
    const struct event *event = &outcome->as.event;
    if (event->kind == EVENT_IMPULSE && event->stream >= 1 && event->stream <= tally->setup.n_streams)
        take_impulse(tally, outcome, sink);
    else if (event->kind == EVENT_LEVEL && event->stream >= 1 && event->stream <= tally->setup.n_streams)
        tally_take_level(tally, event->stream, &event->as.level);
    else if (event->kind == EVENT_NOTE && event->as.note.kind == NOTE_QUIETING)
        tally->quieting_on = strcmp(event->as.note.answer, "on") == 0;
    else if (event->kind == EVENT_NOTE && event->as.note.kind == NOTE_OTHER)
        tally_take_other(tally, outcome, sink);
    else if (event->kind == EVENT_NOTE && event->as.note.kind == NOTE_SOURCE)
        tally_sounding_take(&tally->sounding, &event->as.note, outcome->watch_ns);
    else if (event->kind == EVENT_NOTE && event->as.note.kind == NOTE_JOB) {
        const struct note *note = &event->as.note;
        bool same = strcmp(note->job, tally->job) == 0, opens = strcmp(note->answer, "open") == 0;
        if (!(opens && !same) && !(strcmp(note->answer, "close") == 0 && same))
            return; /* the begin and end of a line, and what the watch finds without effect */
        say_all(tally, outcome->watch_ns, sink);
        tally_begin_job(tally, opens ? note->job : "", outcome->watch_ns);
    }
}

enum status tally_take(struct tally *tally, const struct outcome *outcome, const struct outcome_sink *sink)
{
    int64_t minute = outcome->watch_ns / MINUTE_NS;
    if (outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_RUN) {
        begin_run(tally, outcome);
        return STATUS_OK;
    }
    if (minute != tally->said_minute) {
        tally->said_minute = minute;
        say_all(tally, outcome->watch_ns, sink);
    }
    if (outcome->kind == OUTCOME_PHASE)
        take_phase(tally, outcome->as.phase.phase, outcome->watch_ns, sink);
    if (outcome->kind == OUTCOME_CORRECTION) {
        tally_correct(tally, &outcome->as.correction, outcome->watch_ns, sink);
        if (outcome->as.correction.n_following == 0)
            say_all(tally, outcome->watch_ns, sink);
    }
    if (outcome->kind == OUTCOME_EVENT)
        take_event(tally, outcome, sink);
    return STATUS_OK;
}

void tally_say(struct tally *tally, int64_t watch_ns, const struct outcome_sink *sink)
{
    tally->said_minute = watch_ns / MINUTE_NS;
    say_all(tally, watch_ns, sink);
}

enum status tally_take_minute(struct tally *tally, const struct watch *watch,
                              const struct tally_minute *minute, const struct outcome_sink *sink)
{
    enum status status = STATUS_OK;
    struct outcome outcome = {
        .kind = OUTCOME_EVENT, .watch_ns = minute->watch_ns, .run = minute->run, .stream = minute->stream};
    struct event *event = &outcome.as.event;
    for (uint32_t i = 0; i < minute->n && status == STATUS_OK; i++) {
        *event = (struct event){.kind = EVENT_LEVEL, .stream = minute->stream, .known_ns = minute->watch_ns};
        event->as.level = minute->seconds[i];
        event->as.level.range_from = RANGE_UNSET;
        watch_set_range(watch, event);
        status = tally_take(tally, &outcome, sink);
    }
    tally_say(tally, minute->watch_ns, sink);
    return status;
}

enum status tally_finish(struct tally *tally, int64_t watch_ns, const struct outcome_sink *sink)
{
    say_all(tally, watch_ns, sink);
    return STATUS_OK;
}
