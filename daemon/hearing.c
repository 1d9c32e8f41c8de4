/* What the pages show beside the watch; see hearing.h. */
#include "hearing.h"
#include "base/time.h"
#include "base/units.h"
#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

/* Makes room at the front of a list of n items of a size; returns the new length. */
static uint32_t push_front(void *list, uint32_t n, uint32_t max, size_t size)
{
    uint32_t kept = n < max ? n : max - 1;
    memmove((char *)list + size, list, kept * size);
    return kept + 1;
}

#define MINUTE_NS (60 * TIME_NS_PER_S)

/* The minute is over: what it came to is shown until the next one is. */
static void end_minute(struct hearing_level *heard)
{
    double kurtosis = moments_kurtosis(&heard->moments), sel_db = units_power_db(heard->energy);
    heard->research = (struct hearing_research){
        .kurtosis = kurtosis,
        .window_s = heard->seconds,
        .high_hz = heard->level.high_hz,
        .sel_db = heard->level.relative ? NAN : sel_db,
        .adjusted_db = heard->level.relative ? NAN : sel_db + moments_goley_db(kurtosis)};
}

/* As the minute's entry does it (lib/record/level_body.c). */
static void gather_minute(struct hearing_level *heard, const struct level *level)
{
    int64_t minute = level->start_ns / MINUTE_NS;
    if (minute != heard->minute || level->relative != heard->level.relative) {
        if (heard->seconds > 0)
            end_minute(heard);
        heard->moments = (struct moments){0};
        heard->energy = heard->seconds = 0;
        heard->minute = minute;
    }
    moments_add(&heard->moments, &level->moments);
    if (isnan(level->spl_db))
        return;
    heard->energy += units_power_ratio(level->spl_db) * level->seconds;
    heard->seconds += level->seconds;
}

static void take_level(struct hearing_view *hearing, uint32_t stream, const struct level *level)
{
    uint32_t i = 0;
    while (i < hearing->n_levels &&
           (hearing->levels[i].stream != stream || hearing->levels[i].level.channel != level->channel))
        i++;
    if (i == BOARD_MAX_LEVELS)
        return;
    if (i == hearing->n_levels) {
        hearing->n_levels++;
        hearing->levels[i] =
            (struct hearing_level){.stream = stream, .level = *level, .research = {.kurtosis = NAN}};
    }
    gather_minute(&hearing->levels[i], level);
    hearing->levels[i].level = *level;
}

static bool overlaps(const struct unheard *a, const struct unheard *b)
{
    return a->start_ns <= b->end_ns && b->start_ns <= a->end_ns;
}

/* Newest first. When the list is full the oldest stretch of the own source goes: a gap is rarer and says
 * more. */
static void insert_unheard(struct hearing_view *hearing, uint32_t stream, const struct unheard *unheard)
{
    struct hearing_unheard *list = hearing->unheard;
    uint32_t end = hearing->n_unheard;
    if (end == BOARD_MAX_UNHEARD) {
        uint32_t i = end - 1;
        while (i > 0 && list[i].unheard.cause != UNHEARD_OWN_SOURCE)
            i--;
        end = list[i].unheard.cause == UNHEARD_OWN_SOURCE ? i : end - 1;
    } else
        hearing->n_unheard++;
    memmove(&list[1], &list[0], end * sizeof list[0]);
    list[0] = (struct hearing_unheard){.stream = stream, .unheard = *unheard};
}

/* A blow covers several bands: on the page it is one stretch, and counts once. Returns the time that it adds.
 */
static int64_t take_own_source(struct hearing_view *hearing, uint32_t stream, const struct unheard *unheard)
{
    for (uint32_t i = 0; i < hearing->n_unheard && i < 4; i++) {
        struct unheard *whole = &hearing->unheard[i].unheard;
        if (hearing->unheard[i].stream != stream || whole->cause != UNHEARD_OWN_SOURCE ||
            !overlaps(whole, unheard))
            continue;
        int64_t before_ns = whole->end_ns - whole->start_ns;
        whole->start_ns = unheard->start_ns < whole->start_ns ? unheard->start_ns : whole->start_ns;
        whole->end_ns = unheard->end_ns > whole->end_ns ? unheard->end_ns : whole->end_ns;
        whole->low_hz = unheard->low_hz < whole->low_hz ? unheard->low_hz : whole->low_hz;
        whole->high_hz = unheard->high_hz > whole->high_hz ? unheard->high_hz : whole->high_hz;
        return whole->end_ns - whole->start_ns - before_ns;
    }
    insert_unheard(hearing, stream, unheard);
    return unheard->end_ns - unheard->start_ns;
}

static void take_unheard(struct hearing_view *hearing, uint32_t stream, const struct unheard *unheard)
{
    bool counts = stream >= 1 && stream <= hearing->n_streams;
    if (unheard->cause == UNHEARD_OWN_SOURCE) {
        int64_t more_ns = take_own_source(hearing, stream, unheard);
        if (counts)
            hearing->streams[stream - 1].masked_s += time_to_s(more_ns);
        return;
    }
    insert_unheard(hearing, stream, unheard);
    if (counts)
        hearing->streams[stream - 1].unheard_s += time_to_s(unheard->end_ns - unheard->start_ns);
}

void hearing_advance_sound(struct hearing_sound *sound, int64_t watch_ns)
{
    int64_t step = watch_ns / (BOARD_SOUND_STEP_S * TIME_NS_PER_S);
    for (int64_t n = 0; sound->step < step; n++) {
        sound->step = n < BOARD_SOUND_STEPS ? sound->step + 1 : step;
        sound->counts[sound->step % BOARD_SOUND_STEPS] = 0;
    }
}

static void count_sound(struct hearing_view *hearing, const struct call *call)
{
    uint32_t i = 0;
    while (i < hearing->n_sounds && strcmp(hearing->sounds[i].class_name, call->class_name) != 0)
        i++;
    if (i == BOARD_MAX_SOUNDS)
        return;
    struct hearing_sound *sound = &hearing->sounds[i];
    int64_t step = call->end_ns / (BOARD_SOUND_STEP_S * TIME_NS_PER_S);
    if (i == hearing->n_sounds) {
        hearing->n_sounds++;
        *sound = (struct hearing_sound){.step = step};
        memcpy(sound->class_name, call->class_name, sizeof sound->class_name);
    }
    hearing_advance_sound(sound, call->end_ns);
    if (step > sound->step - BOARD_SOUND_STEPS)
        sound->counts[step % BOARD_SOUND_STEPS] += call->n_sounds;
    sound->last_ns = call->end_ns > sound->last_ns ? call->end_ns : sound->last_ns;
    sound->n += call->n_sounds;
    sound->n_against += call->n_against;
}

static void take_call(struct hearing_view *hearing, const struct outcome *outcome, const struct event *event)
{
    if (event->as.call.n_sounds > 0) {
        count_sound(hearing, &event->as.call);
        return;
    }
    hearing->n_calls =
        push_front(hearing->calls, hearing->n_calls, BOARD_MAX_CALLS, sizeof hearing->calls[0]);
    hearing->calls[0] = (struct hearing_call){.stream = event->stream, .call = event->as.call};
    flow_id(outcome->run, outcome->stream, "call", outcome->counter, hearing->calls[0].id);
}

static void insert_level(float *levels, uint32_t n, uint32_t at, float level)
{
    memmove(levels + at + 1, levels + at, (n - at) * sizeof *levels);
    levels[at] = level;
}

/* The soft start's curve: the greatest SEL and peak of ours in each step, in order. */
static void add_to_curve(struct hearing_view *hearing, const struct hearing_heard *heard)
{
    int64_t *steps = hearing->curve_step;
    uint32_t at = hearing->n_curve;
    while (at > 0 && steps[at - 1] > heard->step)
        at--; /* streams become known a little out of order */
    if (at > 0 && steps[at - 1] == heard->step) {
        hearing->curve_sel_db[at - 1] = fmaxf(heard->sel_db, hearing->curve_sel_db[at - 1]);
        hearing->curve_peak_db[at - 1] = fmaxf(heard->peak_db, hearing->curve_peak_db[at - 1]);
        return;
    }
    if (hearing->n_curve == BOARD_CURVE_STEPS) {
        if (at == 0)
            return; /* older than all that is shown */
        at--;
        hearing->n_curve--;
        memmove(steps, steps + 1, hearing->n_curve * sizeof *steps);
        memmove(hearing->curve_sel_db, hearing->curve_sel_db + 1, hearing->n_curve * sizeof(float));
        memmove(hearing->curve_peak_db, hearing->curve_peak_db + 1, hearing->n_curve * sizeof(float));
    }
    memmove(steps + at + 1, steps + at, (hearing->n_curve - at) * sizeof *steps);
    steps[at] = heard->step;
    insert_level(hearing->curve_sel_db, hearing->n_curve, at, heard->sel_db);
    insert_level(hearing->curve_peak_db, hearing->n_curve, at, heard->peak_db);
    hearing->n_curve++;
}

static void take_curve(struct hearing_view *hearing, const struct outcome *outcome,
                       const struct impulse *impulse)
{
    struct hearing_heard heard = {.step = impulse->time_ns / (BOARD_CURVE_STEP_S * TIME_NS_PER_S),
                                  .counter = outcome->counter,
                                  .run = outcome->run,
                                  .stream = outcome->stream,
                                  .sel_db = (float)impulse->sel_db,
                                  .peak_db = (float)impulse->peak_db,
                                  .ours = impulse->whose == IMPULSE_OURS};
    if (impulse->relative || !(impulse->sel_db > -1000))
        return;
    hearing->heard[hearing->n_heard++ % BOARD_MAX_HEARD] = heard;
    if (heard.ours)
        add_to_curve(hearing, &heard);
}

static uint64_t oldest_heard(const struct hearing_view *hearing)
{
    return hearing->n_heard > BOARD_MAX_HEARD ? hearing->n_heard - BOARD_MAX_HEARD : 0;
}

/* The curve again, from the first step of which everything is kept; what is older stays as it is. */
static void draw_curve_again(struct hearing_view *hearing)
{
    uint64_t oldest = oldest_heard(hearing);
    int64_t first = oldest > 0 ? hearing->heard[oldest % BOARD_MAX_HEARD].step + 1 : INT64_MIN;
    while (hearing->n_curve > 0 && hearing->curve_step[hearing->n_curve - 1] >= first)
        hearing->n_curve--;
    for (uint64_t i = oldest; i < hearing->n_heard; i++) {
        const struct hearing_heard *heard = &hearing->heard[i % BOARD_MAX_HEARD];
        if (heard->ours && heard->step >= first)
            add_to_curve(hearing, heard);
    }
}

static void take_impulse(struct hearing_view *hearing, const struct outcome *outcome,
                         const struct event *event)
{
    if (event->as.impulse.beside)
        return; /* the same blow once */
    hearing->n_impulses =
        push_front(hearing->impulses, hearing->n_impulses, BOARD_MAX_IMPULSES, sizeof hearing->impulses[0]);
    hearing->impulses[0] = (struct hearing_impulse){.stream = event->stream, .impulse = event->as.impulse};
    flow_id(outcome->run, outcome->stream, "impulse", outcome->counter, hearing->impulses[0].id);
    take_curve(hearing, outcome, &event->as.impulse);
}

static void take_exposure(struct hearing_view *hearing, const struct exposure_outcome *exposure)
{
    uint32_t i = 0;
    while (i < hearing->n_exposures && (hearing->exposures[i].stream != exposure->stream ||
                                        strcmp(hearing->exposures[i].set, exposure->set) != 0 ||
                                        strcmp(hearing->exposures[i].criterion, exposure->criterion) != 0))
        i++;
    if (i == BOARD_MAX_EXPOSURES)
        return;
    hearing->exposures[i] = *exposure;
    if (i == hearing->n_exposures)
        hearing->n_exposures++;
}

static void take_source(struct hearing_view *hearing, const struct source_outcome *source)
{
    uint32_t i = 0;
    while (i < hearing->n_sources &&
           (hearing->sources[i].stream != source->stream || hearing->sources[i].channel != source->channel))
        i++;
    if (i == BOARD_MAX_SOURCES)
        return;
    hearing->sources[i] = *source;
    if (i == hearing->n_sources)
        hearing->n_sources++;
}

/* Counters rise in a correction, and among the impulses of a stream. */
static void take_correction(struct hearing_view *hearing, const struct correction_outcome *correction)
{
    char id[FLOW_ID_SIZE];
    uint32_t next = 0;
    for (uint64_t i = oldest_heard(hearing); i < hearing->n_heard; i++) {
        struct hearing_heard *heard = &hearing->heard[i % BOARD_MAX_HEARD];
        if (heard->run != correction->run || heard->stream != correction->stream)
            continue;
        while (next < correction->n && correction->counters[next] < heard->counter)
            next++;
        if (next < correction->n && correction->counters[next] == heard->counter)
            heard->ours = correction->whose == IMPULSE_OURS;
    }
    for (uint32_t i = 0; i < correction->n; i++) {
        flow_id(correction->run, correction->stream, "impulse", correction->counters[i], id);
        for (uint32_t k = 0; k < hearing->n_impulses; k++)
            if (strcmp(hearing->impulses[k].id, id) == 0)
                hearing->impulses[k].impulse.whose = correction->whose;
    }
    if (correction->n_following == 0)
        draw_curve_again(hearing);
}

void hearing_take(struct hearing_view *hearing, const struct outcome *outcome)
{
    if (outcome->kind == OUTCOME_CORRECTION)
        take_correction(hearing, &outcome->as.correction);
    if (outcome->kind == OUTCOME_EXPOSURE)
        take_exposure(hearing, &outcome->as.exposure);
    if (outcome->kind == OUTCOME_SOURCE)
        take_source(hearing, &outcome->as.source);
    if (outcome->kind != OUTCOME_EVENT)
        return;
    const struct event *event = &outcome->as.event;
    if (event->kind == EVENT_LEVEL)
        take_level(hearing, event->stream, &event->as.level);
    else if (event->kind == EVENT_UNHEARD)
        take_unheard(hearing, event->stream, &event->as.unheard);
    else if (event->kind == EVENT_CALL)
        take_call(hearing, outcome, event);
    else if (event->kind == EVENT_IMPULSE)
        take_impulse(hearing, outcome, event);
    else if (event->kind == EVENT_NOTE) {
        char id[FLOW_ID_SIZE];
        flow_id(outcome->run, outcome->stream, "note", outcome->counter, id);
        hearing_take_mark(hearing, id, &event->as.note);
    }
}

void hearing_add_unrecorded(struct hearing_view *hearing, const char *id)
{
    hearing->n_unrecorded = push_front(hearing->unrecorded, hearing->n_unrecorded, BOARD_MAX_UNRECORDED,
                                       sizeof hearing->unrecorded[0]);
    snprintf(hearing->unrecorded[0], FLOW_ID_SIZE, "%s", id);
}

void hearing_set_recorded(struct hearing_view *hearing, const char *id)
{
    for (uint32_t i = 0; i < hearing->n_unrecorded; i++)
        if (strcmp(hearing->unrecorded[i], id) == 0) {
            hearing->n_unrecorded--;
            memmove(hearing->unrecorded[i], hearing->unrecorded[i + 1],
                    (hearing->n_unrecorded - i) * sizeof hearing->unrecorded[0]);
            return;
        }
}

void hearing_add_fault(struct hearing_view *hearing, const char *format, ...)
{
    if (hearing->n_faults == BOARD_MAX_FAULTS)
        return;
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(hearing->faults[hearing->n_faults++], BOARD_LINE_SIZE, format, arguments);
    va_end(arguments);
}
