/* The watch's thread; see watcher.h. */
#include "watcher.h"
#include "base/time.h"
#include "channels.h"
#include "clock.h"
#include "float_mode.h"
#include "hearing.h"
#include "record/entry.h"
#include <math.h>
#include <pthread.h>
#include <stdatomic.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define PUBLISH_GAP_NS (TIME_NS_PER_S / 4)
#define BEAT_NS (10 * TIME_NS_PER_S) /* a sign of life, so that an outage is known to begin within it */
#define STALE_S 1.0                  /* a live stream without sound for longer is not heard */

struct watcher {
    struct watcher_setup setup;
    struct hearing_view *hearing; /* 500 kB, and read by nobody else */
    struct watch_view *view;
    unsigned next_note;
    uint64_t note_counter, position_counter;
    uint32_t map_changes[SITE_MAX_STREAMS];
    bool said_ended[SITE_MAX_STREAMS], said_not_recording, was_left_behind, said_silent, said_not_kept;
    bool changed; /* something that people should see at once */
    int64_t published_ns, beat_ns;
    pthread_t thread;
    bool running;
    atomic_bool ended;
    pthread_mutex_t lock; /* guards state, ended_now and committed */
    pthread_cond_t ended_now;
    struct watcher_state state;
    uint32_t n_committed; /* advice that reached the disk and is not looked at yet */
    char committed[BOARD_MAX_UNRECORDED][FLOW_ID_SIZE];
};

enum status watcher_create(const struct watcher_setup *setup, struct watcher **out)
{
    struct watcher *watcher = calloc(1, sizeof *watcher);
    if (!watcher)
        return STATUS_NO_MEMORY;
    watcher->setup = *setup;
    watcher->hearing = calloc(1, sizeof *watcher->hearing);
    watcher->view = calloc(1, sizeof *watcher->view);
    if (!watcher->hearing || !watcher->view) {
        free(watcher->hearing);
        free(watcher->view);
        free(watcher);
        return STATUS_NO_MEMORY;
    }
    pthread_mutex_init(&watcher->lock, NULL);
    pthread_cond_init(&watcher->ended_now, NULL);
    *out = watcher;
    return STATUS_OK;
}

static void keep_status(struct watcher *watcher, enum status status)
{
    if (status == STATUS_OK)
        return;
    pthread_mutex_lock(&watcher->lock);
    if (watcher->state.status == STATUS_OK)
        watcher->state.status = status;
    pthread_mutex_unlock(&watcher->lock);
}

static void count(struct watcher *watcher, const struct outcome *outcome)
{
    pthread_mutex_lock(&watcher->lock);
    struct watcher_state *state = &watcher->state;
    state->n_calls += outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_CALL;
    state->n_impulses += outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_IMPULSE &&
                         !outcome->as.event.as.impulse.beside;
    if (outcome->kind == OUTCOME_CONTACT && outcome->as.contact.contact > state->n_contacts)
        state->n_contacts = outcome->as.contact.contact;
    state->n_advice += outcome->kind == OUTCOME_ADVICE;
    pthread_mutex_unlock(&watcher->lock);
}

/* What the tally says of the outcomes. */
static void take_sums(void *context, const struct outcome *outcome)
{
    struct watcher *watcher = context;
    hearing_take(watcher->hearing, outcome);
    keep_status(watcher, recorder_take(watcher->setup.recorder, outcome));
    if (outcome->kind == OUTCOME_FINDING)
        watch_take_finding(watcher->setup.watch, outcome, NULL);
}

/* Sums of continuous sound are made of the entries of its levels, so that they follow from the ledger. */
static bool sums_by_the_minute(const struct watcher *watcher)
{
    return watcher->setup.tally && tally_wants_levels(watcher->setup.tally);
}

static void take_minute(void *context, const struct minute_body *body)
{
    struct watcher *watcher = context;
    const struct tally_minute minute = {body->watch_ns, body->run, body->stream, body->n, body->seconds};
    if (sums_by_the_minute(watcher))
        keep_status(watcher, tally_take_minute(watcher->setup.tally, watcher->setup.watch, &minute,
                                               &(struct outcome_sink){take_sums, watcher}));
}

static void take_outcome(void *context, const struct outcome *outcome)
{
    const struct outcome_sink sums = {take_sums, context};
    struct watcher *watcher = context;
    if (outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_NOTE)
        watcher->note_counter = outcome->counter;
    count(watcher, outcome);
    hearing_take(watcher->hearing, outcome);
    if (outcome->kind == OUTCOME_ADVICE) {
        char id[FLOW_ID_SIZE];
        flow_id(outcome->run, outcome->stream, "advice", outcome->counter, id);
        hearing_add_unrecorded(watcher->hearing, id);
    }
    if (outcome->kind != OUTCOME_EVENT || outcome->as.event.kind == EVENT_CALL ||
        outcome->as.event.kind == EVENT_NOTE)
        watcher->changed = true;
    keep_status(watcher, recorder_take(watcher->setup.recorder, outcome));
    if (watcher->setup.sound)
        keeping_take(watcher->setup.sound, outcome);
    bool level = outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_LEVEL;
    if (watcher->setup.tally && !(level && sums_by_the_minute(watcher)))
        keep_status(watcher, tally_take(watcher->setup.tally, outcome, &sums));
}

static void push(struct watcher *watcher, struct event *event)
{
    const struct outcome_sink sink = {take_outcome, watcher};
    event->run = watcher->setup.run;
    entry_round(event);
    keep_status(watcher, watch_push(watcher->setup.watch, event, &sink));
}

/* Notes of the timetable that are due before or at a watch time. */
static void push_due_notes(struct watcher *watcher, int64_t watch_ns)
{
    while (watcher->next_note < watcher->setup.n_notes) {
        const struct timed_note *timed = &watcher->setup.notes[watcher->next_note];
        int64_t at_ns = time_from_s(timed->at_s);
        if (at_ns > watch_ns)
            return;
        struct event event = {.kind = EVENT_NOTE, .known_ns = at_ns};
        event.as.note = timed->note;
        event.counter = watcher->note_counter + 1;
        push(watcher, &event);
        watcher->next_note++;
    }
}

static void push_entered_note(struct watcher *watcher, struct event *event)
{
    event->counter = watcher->note_counter + 1;
    push(watcher, event);
    merge_note_taken(watcher->setup.merge, watcher->note_counter);
}

/* Most positions are like the one before, and are not recorded. */
static void push_position(struct watcher *watcher, struct event *event)
{
    if (!watch_wants_position(watcher->setup.watch, &event->as.position))
        return;
    event->counter = ++watcher->position_counter;
    push(watcher, event);
}

static void say_health(struct watcher *watcher, int64_t watch_ns, uint32_t stream, bool ok, const char *text)
{
    keep_status(watcher, recorder_health(watcher->setup.recorder, watch_ns, stream, ok, text));
    watcher->changed = true;
}

static void look_at_stream(struct watcher *watcher, uint32_t i, int64_t watch_ns)
{
    struct stream_state state;
    struct stream *stream = watcher->setup.streams[i];
    struct hearing_stream *shown = &watcher->hearing->streams[i];
    stream_get_state(stream, &state);
    double age_s = state.last_sound_ns ? (double)(clock_monotonic_ns() - state.last_sound_ns) * 1e-9 : NAN;
    bool was_hearing = shown->hearing;
    shown->heard_ns = state.heard_ns;
    shown->block_age_s = age_s;
    shown->n_accounts = stream_get_accounts(stream, shown->accounts);
    shown->hearing = !state.ended && state.last_sound_ns && age_s < STALE_S;
    snprintf(shown->health, sizeof shown->health, "%s",
             *state.health ? state.health
             : state.ended ? "the input has ended"
                           : "");
    if (state.map_changes != watcher->map_changes[i]) {
        struct clock_facts facts = {
            .map = &state.map,
            .zero_unix_ns = watcher->setup.zero_unix_ns,
            .offset_s = watcher->map_changes[i] ? time_to_s(state.map_change_ns) : NAN,
            .source = "measured against the monotonic clock",
            .reason = watcher->map_changes[i] ? "the input's clock drifted" : "first sound"};
        watcher->map_changes[i] = state.map_changes;
        keep_status(watcher, recorder_clock(watcher->setup.recorder, watch_ns, i + 1, &facts));
    }
    bool first = state.last_sound_ns == 0;
    if (stream_get_facts(stream)->live && shown->hearing != was_hearing && !first)
        say_health(watcher, watch_ns, i + 1, shown->hearing, shown->hearing ? "hearing" : shown->health);
    if (!shown->hearing && !first)
        hearing_add_fault(watcher->hearing, "CANNOT HEAR %s: %s", shown->name,
                          *shown->health ? shown->health : "no sound arrives");
    if (state.status != STATUS_OK && !watcher->said_ended[i]) {
        watcher->said_ended[i] = true;
        say_health(watcher, watch_ns, i + 1, false, status_text(state.status));
    }
}

static void look_at_feed(struct watcher *watcher, int64_t watch_ns)
{
    struct position_feed_state state;
    if (!watcher->setup.feed)
        return;
    position_feed_get_state(watcher->setup.feed, &state);
    if (state.silent)
        hearing_add_fault(watcher->hearing, "NO POSITION: %s", state.problem);
    if (state.silent != watcher->said_silent) {
        watcher->said_silent = state.silent;
        say_health(watcher, watch_ns, 0, !state.silent, state.silent ? state.problem : "positions come");
    }
}

/* Clips that reached the disk become entries; a ring or a clip that the disk does not take is a fault. */
static void look_at_sound(struct watcher *watcher, int64_t watch_ns)
{
    struct sound_entry_facts facts;
    char id[FLOW_ID_SIZE], problem[BOARD_LINE_SIZE];
    if (!watcher->setup.sound)
        return;
    while (keeping_take_done(watcher->setup.sound, &facts)) {
        keep_status(watcher, recorder_sound(watcher->setup.recorder, watch_ns, &facts, id));
        keeping_add(watcher->setup.sound, id, &facts);
        hearing_add_clip(watcher->hearing, id, &facts);
    }
    keeping_get_problem(watcher->setup.sound, problem, sizeof problem);
    if (*problem)
        hearing_add_fault(watcher->hearing, "SOUND IS NOT KEPT: %s", problem);
    if ((*problem != '\0') != watcher->said_not_kept) {
        watcher->said_not_kept = *problem != '\0';
        say_health(watcher, watch_ns, 0, !*problem, *problem ? problem : "sound is kept again");
    }
}

/* Channels whose impulse levels are refused, all that the run has: it holds until the settings change. */
static void look_at_room(struct watcher *watcher, uint32_t i)
{
    const struct hearing_stream *shown = &watcher->hearing->streams[i];
    char numbers[4 * FLOW_MAX_CHANNELS];
    if (channels_refused(&watcher->setup.stream_settings[i], shown->n_channels, numbers, sizeof numbers))
        hearing_add_fault(
            watcher->hearing,
            "IMPULSE LEVELS REFUSED: %s, channel %s, clips less than %.0f dB over the expected peak",
            shown->name, numbers, CALIBRATION_ROOM_DB);
}

/* Which advice has reached the disk since the last look. */
static void look_at_committed(struct watcher *watcher)
{
    pthread_mutex_lock(&watcher->lock);
    for (uint32_t i = 0; i < watcher->n_committed; i++)
        hearing_set_recorded(watcher->hearing, watcher->committed[i]);
    watcher->n_committed = 0;
    pthread_mutex_unlock(&watcher->lock);
}

static void look_at_outbox(struct watcher *watcher, int64_t watch_ns)
{
    struct hearing_view *hearing = watcher->hearing;
    struct outbox_view view;
    look_at_committed(watcher);
    outbox_get_view(watcher->setup.outbox, &view);
    bool well = view.recording && view.state == OUTBOX_OK;
    hearing->recording = well;
    snprintf(hearing->recording_text, sizeof hearing->recording_text, "%.*s", BOARD_LINE_SIZE - 1,
             view.problem);
    hearing->committed_seq = view.last_seq;
    if (view.n_waiting == 0) {
        hearing->committed_ns = watch_ns;
        hearing->n_unrecorded = 0;
    }
    if (!well)
        hearing_add_fault(hearing, "%s: %s",
                          view.recording ? "THE DISK DOES NOT TAKE ENTRIES" : "NOT RECORDING", view.problem);
    if (!well != watcher->said_not_recording) {
        watcher->said_not_recording = !well;
        say_health(watcher, watch_ns, 0, well, well ? "entries reach the disk again" : view.problem);
    }
}

void watcher_set_committed(void *context, const struct ledger_line *lines, size_t n)
{
    struct watcher *watcher = context;
    pthread_mutex_lock(&watcher->lock);
    for (size_t i = 0; i < n; i++)
        if (strcmp(lines[i].kind, "advice") == 0 && watcher->n_committed < BOARD_MAX_UNRECORDED &&
            recorder_id_of(lines[i].body, watcher->committed[watcher->n_committed]) == STATUS_OK)
            watcher->n_committed++;
    pthread_mutex_unlock(&watcher->lock);
}

static void publish(struct watcher *watcher, int64_t watch_ns)
{
    int64_t now_ns = clock_monotonic_ns();
    bool due = now_ns - watcher->published_ns >= PUBLISH_GAP_NS;
    if (!due && !watcher->changed)
        return;
    struct hearing_view *hearing = watcher->hearing;
    hearing->n_faults = 0;
    for (uint32_t i = 0; i < watcher->setup.n_streams; i++)
        look_at_stream(watcher, i, watch_ns);
    look_at_outbox(watcher, watch_ns);
    look_at_feed(watcher, watch_ns);
    look_at_sound(watcher, watch_ns);
    uint32_t left_behind = merge_get_left_behind(watcher->setup.merge);
    if ((left_behind != 0) != watcher->was_left_behind) {
        watcher->was_left_behind = left_behind != 0;
        say_health(watcher, watch_ns, 0, left_behind == 0,
                   left_behind ? "a live stream lags and was left behind" : "all streams keep up");
    }
    if (left_behind)
        hearing_add_fault(hearing, "A LIVE STREAM LAGS: its events come late");
    for (uint32_t i = 0; i < watcher->setup.n_streams; i++)
        look_at_room(watcher, i);
    if (watcher->setup.board && watch_ns - watcher->beat_ns >= BEAT_NS) {
        watcher->beat_ns = watch_ns;
        keep_status(watcher,
                    recorder_health(watcher->setup.recorder, watch_ns, 0, true, "the watch is kept"));
    }
    if (watcher->setup.board) {
        watch_get_view(watcher->setup.watch, watcher->view);
        keep_status(watcher, board_publish(watcher->setup.board, watcher->view, hearing));
    }
    watcher->changed = false;
    watcher->published_ns = now_ns;
}

static void keep_state(struct watcher *watcher, int64_t watch_ns)
{
    struct timespec cpu;
    clock_gettime(CLOCK_THREAD_CPUTIME_ID, &cpu);
    pthread_mutex_lock(&watcher->lock);
    watcher->state.watch_ns = watch_ns;
    watcher->state.progress_ns = clock_monotonic_ns();
    watcher->state.cpu_s = (double)cpu.tv_sec + (double)cpu.tv_nsec * 1e-9;
    pthread_mutex_unlock(&watcher->lock);
}

/* One step: an event, or time that has passed. */
static enum status step(struct watcher *watcher)
{
    const struct outcome_sink sink = {take_outcome, watcher};
    struct event event;
    int64_t now_ns;
    enum status status = merge_take(watcher->setup.merge, PUBLISH_GAP_NS, &event, &now_ns);
    if (status == STATUS_OK) {
        now_ns = event.known_ns;
        push_due_notes(watcher, now_ns);
        if (event.kind == EVENT_NOTE)
            push_entered_note(watcher, &event);
        else if (event.kind == EVENT_POSITION)
            push_position(watcher, &event);
        else
            push(watcher, &event);
    } else {
        push_due_notes(watcher, now_ns);
        keep_status(watcher, watch_advance(watcher->setup.watch, now_ns, &sink));
    }
    keep_state(watcher, now_ns);
    publish(watcher, now_ns);
    return status;
}

static void *run_watch(void *context)
{
    struct watcher *watcher = context;
    pthread_setname_np(pthread_self(), "watch");
    float_mode_flush_to_zero();
    while (step(watcher) != STATUS_END)
        ;
    struct watcher_state state;
    watcher_get_state(watcher, &state);
    keep_status(watcher, recorder_finish(watcher->setup.recorder, state.watch_ns));
    if (watcher->setup.tally)
        keep_status(watcher, tally_finish(watcher->setup.tally, state.watch_ns,
                                          &(struct outcome_sink){take_sums, watcher}));
    watcher->changed = true;
    publish(watcher, state.watch_ns);
    pthread_mutex_lock(&watcher->lock);
    atomic_store(&watcher->ended, true);
    pthread_cond_broadcast(&watcher->ended_now);
    pthread_mutex_unlock(&watcher->lock);
    return NULL;
}

static void name_streams(struct watcher *watcher)
{
    struct hearing_view *hearing = watcher->hearing;
    hearing->unix_at_zero_ns = watcher->setup.zero_unix_ns;
    hearing->recording = true;
    hearing->n_streams = watcher->setup.n_streams;
    for (uint32_t i = 0; i < watcher->setup.n_streams; i++) {
        const struct input_facts *facts = stream_get_facts(watcher->setup.streams[i]);
        struct hearing_stream *shown = &hearing->streams[i];
        snprintf(shown->name, sizeof shown->name, "%s", watcher->setup.stream_settings[i].name);
        snprintf(shown->input, sizeof shown->input, "%s", watcher->setup.stream_settings[i].input);
        shown->rate_hz = facts->rate_hz;
        shown->n_channels = facts->n_channels;
        shown->block_age_s = NAN;
    }
}

void watcher_recall(struct watcher *watcher, const char *ledger_path)
{
    hearing_recall(watcher->hearing, ledger_path);
}

void watcher_show(struct watcher *watcher, int64_t watch_ns)
{
    name_streams(watcher);
    watcher->changed = true;
    keep_state(watcher, watch_ns);
    if (watcher->setup.board) {
        watch_get_view(watcher->setup.watch, watcher->view);
        keep_status(watcher, board_publish(watcher->setup.board, watcher->view, watcher->hearing));
    }
}

enum status watcher_start(struct watcher *watcher, const struct run_mark *mark)
{
    struct event event = {.kind = EVENT_RUN, .counter = 1, .known_ns = mark->outage_end_ns};
    event.as.run_mark = *mark;
    recorder_set_minutes(watcher->setup.recorder, &(struct minute_sink){take_minute, watcher});
    push(watcher, &event);
    watcher->note_counter = 0;
    if (pthread_create(&watcher->thread, NULL, run_watch, watcher) != 0)
        return STATUS_SYSTEM;
    watcher->running = true;
    return STATUS_OK;
}

bool watcher_wait(struct watcher *watcher, double wait_s)
{
    struct timespec until;
    clock_gettime(CLOCK_REALTIME, &until);
    int64_t until_ns = (int64_t)until.tv_sec * TIME_NS_PER_S + until.tv_nsec + (int64_t)(wait_s * 1e9);
    until = (struct timespec){.tv_sec = until_ns / TIME_NS_PER_S, .tv_nsec = until_ns % TIME_NS_PER_S};
    pthread_mutex_lock(&watcher->lock);
    int waited = 0;
    while (!atomic_load(&watcher->ended) && waited == 0)
        waited = pthread_cond_timedwait(&watcher->ended_now, &watcher->lock, &until);
    pthread_mutex_unlock(&watcher->lock);
    return atomic_load(&watcher->ended);
}

void watcher_stop(struct watcher *watcher)
{
    if (!watcher || !watcher->running)
        return;
    merge_stop(watcher->setup.merge);
    pthread_join(watcher->thread, NULL);
    watcher->running = false;
}

void watcher_destroy(struct watcher *watcher)
{
    if (!watcher)
        return;
    watcher_stop(watcher);
    pthread_cond_destroy(&watcher->ended_now);
    pthread_mutex_destroy(&watcher->lock);
    free(watcher->hearing);
    free(watcher->view);
    free(watcher);
}

enum status watcher_take_note(struct watcher *watcher, const struct note *note, char out_id[FLOW_ID_SIZE])
{
    uint64_t counter = 0;
    enum status status = merge_note(watcher->setup.merge, note, &counter);
    if (status == STATUS_OK)
        flow_id(watcher->setup.run, 0, "note", counter, out_id);
    return status;
}

void watcher_get_state(struct watcher *watcher, struct watcher_state *out)
{
    pthread_mutex_lock(&watcher->lock);
    *out = watcher->state;
    pthread_mutex_unlock(&watcher->lock);
}
