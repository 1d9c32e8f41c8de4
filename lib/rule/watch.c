/* The watch: events in, time, outcomes out. */
#include "rule/watch.h"
#include "base/round.h"
#include "rule/watch_inner.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

static bool setup_is_good(const struct watch_setup *setup)
{
    char problem[PERMIT_TEXT_SIZE];
    return setup->permit && permit_check(setup->permit, 0, problem) == STATUS_OK &&
           setup->contact_gap_s > 0 && setup->contact_gap_s < 1e6 && setup->evidence_decay_s > 0 &&
           isfinite(setup->look_evidence) && setup->act_evidence >= setup->look_evidence &&
           setup->sighting_log_spread >= 0 && setup->silence_s > 0 && setup->silence_s < 1e6;
}

enum status watch_create(const struct watch_setup *setup, struct watch **out)
{
    if (!setup_is_good(setup))
        return STATUS_BAD_ARGUMENT;
    struct watch *watch = calloc(1, sizeof *watch);
    if (!watch)
        return STATUS_NO_MEMORY;
    watch->heard = calloc(WATCH_MAX_HEARD, sizeof *watch->heard);
    if (!watch->heard) {
        free(watch);
        return STATUS_NO_MEMORY;
    }
    watch->setup = *setup;
    watch->permit = setup->permit;
    watch->run = 1;
    watch->phase = PHASE_OFF;
    watch->effort.hole_ns = watch->let_go_ns = -1;
    watch->start.good.full = SPANS_FOLD_EARLIER;
    watch->outage.past.full = SPANS_FOLD_LATER;
    watch->start.good_since_ns = watch->outage.since_ns = watch->outage.heard_ns = -1;
    watch->plan.planned_ns = watch->stop.passed.since_ns = watch->stop.acknowledged.since_ns = -1;
    watch->turn.last_ns = watch->turn.soft_ns = watch->turn.up_ns = -1;
    watch->charge.due_ns = watch->quality.since_ns = -1;
    watch->turn.expected_minutes = NAN;
    watch->deterrent.on_ns = watch->deterrent.off_ns = -1;
    watch->job.since_ns = -1;
    source_reset(&watch->source);
    ranges_reset(&watch->ranges, &setup->ranges);
    surroundings_reset(&watch->surroundings, setup->permit);
    watch->surroundings.depth_m = setup->depth_m > 0 ? setup->depth_m : NAN;
    if (setup->ranges.has_source) {
        surroundings_set_place(&watch->surroundings, setup->ranges.latitude_deg, setup->ranges.longitude_deg);
    }
    *out = watch;
    return STATUS_OK;
}

static bool same_number(double a, double b)
{
    return (isnan(a) && isnan(b)) || !(a < b || a > b || isnan(a) || isnan(b));
}

static bool same_stream(const struct ranges_stream *a, const struct ranges_stream *b)
{
    bool same = a->has_position == b->has_position && same_number(a->latitude_deg, b->latitude_deg) &&
                same_number(a->longitude_deg, b->longitude_deg);
    for (uint32_t c = 0; c < RANGES_MAX_CHANNELS; c++)
        for (uint32_t k = 0; k < 3; k++)
            same = same && same_number(a->place_m[c][k], b->place_m[c][k]);
    return same;
}

static bool same_source_place(const struct ranges_setup *a, const struct ranges_setup *b)
{
    return a->has_source == b->has_source && same_number(a->latitude_deg, b->latitude_deg) &&
           same_number(a->longitude_deg, b->longitude_deg);
}

static bool same_ranges(const struct ranges_setup *a, const struct ranges_setup *b)
{
    bool same = a->moves == b->moves && same_number(a->oldest_s, b->oldest_s) &&
                same_number(a->source_offset_m[0], b->source_offset_m[0]) &&
                same_number(a->source_offset_m[1], b->source_offset_m[1]) && same_source_place(a, b) &&
                a->n_streams == b->n_streams;
    for (uint32_t i = 0; i < a->n_streams && same; i++)
        same = same_stream(&a->streams[i], &b->streams[i]);
    return same;
}

enum status watch_change(struct watch *watch, const struct watch_setup *setup)
{
    if (!setup_is_good(setup))
        return STATUS_BAD_ARGUMENT;
    const struct watch_setup *former = &watch->setup;
    if (!same_ranges(&former->ranges, &setup->ranges))
        ranges_reset(&watch->ranges, &setup->ranges);
    if (!same_number(former->depth_m, setup->depth_m))
        watch->surroundings.depth_m = setup->depth_m > 0 ? setup->depth_m : NAN;
    if (setup->ranges.has_source && !same_source_place(&former->ranges, &setup->ranges))
        surroundings_set_place(&watch->surroundings, setup->ranges.latitude_deg, setup->ranges.longitude_deg);
    surroundings_set_permit(&watch->surroundings, setup->permit);
    watch->setup = *setup;
    watch->permit = setup->permit;
    return STATUS_OK;
}

void watch_get_setup(const struct watch *watch, struct watch_setup *out)
{
    *out = watch->setup;
}

void watch_set_clock(struct watch *watch, int64_t zero_unix_ns)
{
    surroundings_set_clock(&watch->surroundings, zero_unix_ns);
}

void watch_destroy(struct watch *watch)
{
    if (watch)
        free(watch->heard);
    free(watch);
}

/* Everything that follows from the present state at the present time. */
static void settle(struct watch *watch)
{
    surroundings_update(&watch->surroundings, watch->now_ns);
    contact_expire(watch);
    source_settle(watch);
    conditions_settle(watch);
    phase_settle(watch);
    advice_settle(watch);
    conditions_follow(watch);
}

static int64_t next_due_ns(const struct watch *watch)
{
    int64_t due = effort_due_ns(watch);
    if (source_due_ns(watch) < due)
        due = source_due_ns(watch);
    if (contact_due_ns(watch) < due)
        due = contact_due_ns(watch);
    if (conditions_due_ns(watch) < due)
        due = conditions_due_ns(watch);
    int64_t light_ns = surroundings_light_change_ns(&watch->surroundings);
    return light_ns > watch->now_ns && light_ns < due ? light_ns : due;
}

/* Each timer that is due by to_ns fires at its own time, so it does not matter how often this is called. */
static void pass_time(struct watch *watch, int64_t to_ns)
{
    for (int64_t due; (due = next_due_ns(watch)) <= to_ns;) {
        effort_accrue(watch, due);
        watch->now_ns = due;
        why_set(&watch->recent, "", "");
        settle(watch);
    }
    effort_accrue(watch, to_ns);
    watch->now_ns = to_ns;
}

/* The outage before a run: clearance times run on through it, the pre-watch does not accrue, and what would
 * have been said meanwhile is said at its end, when there is somebody to hear it. */
static void pass_outage(struct watch *watch, const struct event *event)
{
    const struct run_mark *mark = &event->as.run_mark;
    if (mark->outage_start_ns > watch->now_ns)
        pass_time(watch, mark->outage_start_ns < event->known_ns ? mark->outage_start_ns : event->known_ns);
    memset(watch->counters, 0, sizeof watch->counters);
    watch->run = event->run;
    bool outage = mark->outage_end_ns > mark->outage_start_ns;
    if (outage) {
        effort_outage(watch, true);
        start_end_stretch(watch);
        watch->released_by[0] = watch->release_id[0] = '\0';
    }
    effort_accrue(watch, event->known_ns);
    watch->now_ns = event->known_ns;
    surroundings_update(&watch->surroundings, watch->now_ns); /* it may have become dark meanwhile */
    if (outage)
        effort_outage(watch, false);
}

static void set_recent(struct watch *watch, const struct event *event)
{
    char id[FLOW_ID_SIZE];
    flow_id(event->run, event->stream, flow_event_kind_text(event->kind), event->counter, id);
    why_set(&watch->recent, "", "");
    why_add_cause(&watch->recent, id);
}

void watch_set_range(const struct watch *watch, struct event *event)
{
    struct impulse *impulse = &event->as.impulse;
    struct level *level = &event->as.level;
    if (watch->setup.ranges.n_streams == 0)
        return;
    if (event->kind == EVENT_IMPULSE && impulse->range_from == RANGE_UNSET)
        impulse->range_m = round_decimals(ranges_get(&watch->ranges, event->stream, impulse->channel,
                                                     event->known_ns, &impulse->range_from),
                                          ROUND_DECIMALS_M);
    if (event->kind == EVENT_LEVEL && level->range_from == RANGE_UNSET)
        level->range_m =
            ranges_get(&watch->ranges, event->stream, level->channel, event->known_ns, &level->range_from);
}

static void complete(struct watch *watch, struct event *event)
{
    watch_set_range(watch, event);
    if (event->kind == EVENT_IMPULSE)
        source_mark_impulse(watch, event);
    if (event->kind == EVENT_NOTE) {
        event->as.note.known_ns = event->known_ns;
        if (event->as.note.occurred_ns == 0)
            event->as.note.occurred_ns = event->known_ns;
    }
}

static void take(struct watch *watch, const struct event *event)
{
    switch (event->kind) {
    case EVENT_UNHEARD:
        effort_unheard(watch, event);
        break;
    case EVENT_IMPULSE:
        source_take_impulse(watch, event);
        break;
    case EVENT_CALL:
        contact_take_call(watch, event);
        break;
    case EVENT_NOTE:
        note_take(watch, &event->as.note);
        break;
    case EVENT_POSITION:
        ranges_take(&watch->ranges, &event->as.position);
        break;
    case EVENT_RUN:
    case EVENT_LEVEL:
        break;
    }
}

enum status watch_push(struct watch *watch, const struct event *event, const struct outcome_sink *sink)
{
    if (event->known_ns < watch->now_ns || (unsigned)event->kind > EVENT_POSITION)
        return STATUS_BAD_ARGUMENT;
    if (event->kind == EVENT_CALL &&
        ((unsigned)event->as.call.group >= GROUP_COUNT || event->as.call.n_against > CALL_MAX_AGAINST))
        return STATUS_BAD_ARGUMENT;
    if (event->kind == EVENT_NOTE && (unsigned)event->as.note.group >= GROUP_COUNT)
        return STATUS_BAD_ARGUMENT;
    if (event->kind == EVENT_POSITION && position_check(&event->as.position) != STATUS_OK)
        return STATUS_BAD_ARGUMENT;
    watch->sink = sink;
    if (event->kind == EVENT_RUN)
        pass_outage(watch, event);
    else
        pass_time(watch, event->known_ns);
    struct event completed = *event;
    complete(watch, &completed);
    watch_say_event(watch, &completed);
    set_recent(watch, &completed);
    take(watch, &completed);
    if (event->kind != EVENT_LEVEL)
        settle(watch);
    if (limit_take_pending(watch))
        settle(watch);
    watch->sink = NULL;
    return STATUS_OK;
}

void watch_take_finding(struct watch *watch, const struct outcome *finding, const struct outcome_sink *sink)
{
    limit_keep(watch, finding);
    if (!sink)
        return;
    watch->sink = sink;
    if (limit_take_pending(watch))
        settle(watch);
    watch->sink = NULL;
}

bool watch_wants_position(const struct watch *watch, const struct position *position)
{
    return ranges_wants(&watch->ranges, position);
}

enum status watch_advance(struct watch *watch, int64_t watch_ns, const struct outcome_sink *sink)
{
    if (watch_ns < watch->now_ns)
        return STATUS_BAD_ARGUMENT;
    watch->sink = sink;
    pass_time(watch, watch_ns);
    watch->sink = NULL;
    return STATUS_OK;
}
