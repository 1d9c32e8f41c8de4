/* One order for all events; see merge.h. */
#include "merge.h"
#include "base/time.h"
#include "clock.h"
#include "settings/site.h"
#include <pthread.h>
#include <stdlib.h>

#define QUEUE_EVENTS 2048
#define NOTE_QUEUE 64

struct queue {
    struct event *events; /* ring [QUEUE_EVENTS] */
    uint32_t first, count;
    int64_t heard_ns;
    bool live, ended;
};

struct merge {
    pthread_mutex_t lock;
    pthread_cond_t changed; /* something to take, or room to put */
    uint32_t n_streams;
    struct queue queues[SITE_MAX_STREAMS];
    struct note notes[NOTE_QUEUE];
    uint32_t first_note, n_notes;
    uint64_t notes_put, notes_taken; /* numbers of the note last put and last taken */
    uint64_t note_counters[NOTE_QUEUE];
    bool has_position;
    struct position position; /* the newest that was not taken */
    int64_t now_ns;           /* the time that the watch has been given */
    uint32_t left_behind;
    bool stopped;
};

static void prepare_condition(pthread_cond_t *condition)
{
    pthread_condattr_t attributes;
    pthread_condattr_init(&attributes);
    pthread_condattr_setclock(&attributes, CLOCK_MONOTONIC);
    pthread_cond_init(condition, &attributes);
    pthread_condattr_destroy(&attributes);
}

enum status merge_create(uint32_t n_streams, const bool *live, int64_t start_ns, struct merge **out)
{
    if (n_streams < 1 || n_streams > SITE_MAX_STREAMS)
        return STATUS_BAD_ARGUMENT;
    struct merge *merge = calloc(1, sizeof *merge);
    if (!merge)
        return STATUS_NO_MEMORY;
    merge->n_streams = n_streams;
    merge->now_ns = start_ns;
    pthread_mutex_init(&merge->lock, NULL);
    prepare_condition(&merge->changed);
    for (uint32_t i = 0; i < n_streams; i++) {
        merge->queues[i] = (struct queue){.heard_ns = start_ns, .live = live[i]};
        merge->queues[i].events = calloc(QUEUE_EVENTS, sizeof(struct event));
        if (!merge->queues[i].events) {
            merge_destroy(merge);
            return STATUS_NO_MEMORY;
        }
    }
    *out = merge;
    return STATUS_OK;
}

void merge_destroy(struct merge *merge)
{
    if (!merge)
        return;
    for (uint32_t i = 0; i < merge->n_streams; i++)
        free(merge->queues[i].events);
    pthread_cond_destroy(&merge->changed);
    pthread_mutex_destroy(&merge->lock);
    free(merge);
}

void merge_put(struct merge *merge, const struct event *event)
{
    struct queue *queue = &merge->queues[event->stream - 1];
    pthread_mutex_lock(&merge->lock);
    while (queue->count == QUEUE_EVENTS && !merge->stopped)
        pthread_cond_wait(&merge->changed, &merge->lock);
    if (queue->count < QUEUE_EVENTS) {
        queue->events[(queue->first + queue->count) % QUEUE_EVENTS] = *event;
        queue->count++;
    }
    if (queue->count == QUEUE_EVENTS)
        pthread_cond_broadcast(&merge->changed);
    pthread_mutex_unlock(&merge->lock);
}

void merge_progress(struct merge *merge, uint32_t stream, int64_t watch_ns)
{
    pthread_mutex_lock(&merge->lock);
    merge->queues[stream - 1].heard_ns = watch_ns;
    pthread_cond_broadcast(&merge->changed);
    pthread_mutex_unlock(&merge->lock);
}

void merge_end(struct merge *merge, uint32_t stream)
{
    pthread_mutex_lock(&merge->lock);
    merge->queues[stream - 1].ended = true;
    pthread_cond_broadcast(&merge->changed);
    pthread_mutex_unlock(&merge->lock);
}

static void wait_at_most(struct merge *merge, int64_t until_ns)
{
    struct timespec until = {.tv_sec = until_ns / TIME_NS_PER_S, .tv_nsec = until_ns % TIME_NS_PER_S};
    pthread_cond_timedwait(&merge->changed, &merge->lock, &until);
}

enum status merge_note(struct merge *merge, const struct note *note, uint64_t *out_counter)
{
    int64_t until_ns = clock_monotonic_ns() + TIME_NS_PER_S;
    enum status status = STATUS_TIMEOUT;
    pthread_mutex_lock(&merge->lock);
    if (merge->n_notes == NOTE_QUEUE || merge->stopped)
        status = STATUS_FULL;
    else {
        merge->notes[(merge->first_note + merge->n_notes++) % NOTE_QUEUE] = *note;
        uint64_t number = ++merge->notes_put;
        pthread_cond_broadcast(&merge->changed);
        while (merge->notes_taken < number && clock_monotonic_ns() < until_ns && !merge->stopped)
            wait_at_most(merge, until_ns);
        if (merge->notes_taken >= number) {
            *out_counter = merge->note_counters[number % NOTE_QUEUE];
            status = STATUS_OK;
        }
    }
    pthread_mutex_unlock(&merge->lock);
    return status;
}

void merge_note_taken(struct merge *merge, uint64_t counter)
{
    pthread_mutex_lock(&merge->lock);
    merge->note_counters[++merge->notes_taken % NOTE_QUEUE] = counter;
    pthread_cond_broadcast(&merge->changed);
    pthread_mutex_unlock(&merge->lock);
}

void merge_position(struct merge *merge, const struct position *position)
{
    pthread_mutex_lock(&merge->lock);
    merge->position = *position;
    merge->has_position = true;
    pthread_cond_broadcast(&merge->changed);
    pthread_mutex_unlock(&merge->lock);
}

/* How far time may pass: to the slowest stream; past a live one that lags by more than MERGE_LAG_NS. */
static int64_t reachable_ns(struct merge *merge, bool *out_ended)
{
    int64_t slowest = INT64_MAX, furthest = INT64_MIN;
    for (uint32_t i = 0; i < merge->n_streams; i++) {
        const struct queue *queue = &merge->queues[i];
        furthest = queue->heard_ns > furthest ? queue->heard_ns : furthest;
    }
    *out_ended = true;
    for (uint32_t i = 0; i < merge->n_streams; i++) {
        const struct queue *queue = &merge->queues[i];
        if (queue->ended)
            continue;
        *out_ended = false;
        bool lags = queue->live && queue->heard_ns < furthest - MERGE_LAG_NS;
        int64_t reach = lags ? furthest - MERGE_LAG_NS : queue->heard_ns;
        merge->left_behind |= lags ? 1U << i : 0;
        slowest = reach < slowest ? reach : slowest;
    }
    int64_t reach = *out_ended ? furthest : slowest;
    return reach > merge->now_ns ? reach : merge->now_ns;
}

static bool comes_before(const struct event *a, const struct event *b)
{
    if (a->known_ns != b->known_ns)
        return a->known_ns < b->known_ns;
    if (a->stream != b->stream)
        return a->stream < b->stream;
    if (a->kind != b->kind)
        return a->kind < b->kind;
    return a->counter < b->counter;
}

/* The first event known at or before reach_ns; an event of a stream that was left behind takes the present
 * time. */
static bool pop_event(struct merge *merge, int64_t reach_ns, struct event *out)
{
    struct queue *best = NULL;
    for (uint32_t i = 0; i < merge->n_streams; i++) {
        struct queue *queue = &merge->queues[i];
        struct event *head = &queue->events[queue->first];
        if (queue->count == 0)
            continue;
        if (head->known_ns < merge->now_ns)
            head->known_ns = merge->now_ns;
        if (head->known_ns <= reach_ns && (!best || comes_before(head, &best->events[best->first])))
            best = queue;
    }
    if (!best)
        return false;
    *out = best->events[best->first];
    best->first = (best->first + 1) % QUEUE_EVENTS;
    if (best->count-- == QUEUE_EVENTS)
        pthread_cond_broadcast(&merge->changed);
    merge->now_ns = out->known_ns;
    return true;
}

static bool pop_note(struct merge *merge, struct event *out)
{
    if (merge->n_notes == 0)
        return false;
    *out = (struct event){.kind = EVENT_NOTE, .known_ns = merge->now_ns};
    out->as.note = merge->notes[merge->first_note];
    merge->first_note = (merge->first_note + 1) % NOTE_QUEUE;
    merge->n_notes--;
    return true;
}

static bool pop_position(struct merge *merge, struct event *out)
{
    if (!merge->has_position)
        return false;
    *out = (struct event){.kind = EVENT_POSITION, .known_ns = merge->now_ns};
    out->as.position = merge->position;
    out->as.position.occurred_ns = merge->now_ns;
    merge->has_position = false;
    return true;
}

enum status merge_take(struct merge *merge, int64_t wait_ns, struct event *out_event, int64_t *out_ns)
{
    int64_t until_ns = clock_monotonic_ns() + wait_ns;
    enum status status = STATUS_TIMEOUT;
    pthread_mutex_lock(&merge->lock);
    for (;;) {
        bool ended;
        int64_t reach = reachable_ns(merge, &ended);
        if (pop_note(merge, out_event) || pop_position(merge, out_event) ||
            pop_event(merge, reach, out_event)) {
            status = STATUS_OK;
            break;
        }
        bool passed = reach > merge->now_ns;
        merge->now_ns = reach;
        if (ended || merge->stopped) {
            status = STATUS_END;
            break;
        }
        if (passed || clock_monotonic_ns() >= until_ns)
            break;
        wait_at_most(merge, until_ns);
    }
    *out_ns = merge->now_ns;
    pthread_mutex_unlock(&merge->lock);
    return status;
}

void merge_stop(struct merge *merge)
{
    pthread_mutex_lock(&merge->lock);
    merge->stopped = true;
    pthread_cond_broadcast(&merge->changed);
    pthread_mutex_unlock(&merge->lock);
}

uint32_t merge_get_left_behind(struct merge *merge)
{
    pthread_mutex_lock(&merge->lock);
    uint32_t left_behind = merge->left_behind;
    merge->left_behind = 0;
    pthread_mutex_unlock(&merge->lock);
    return left_behind;
}
