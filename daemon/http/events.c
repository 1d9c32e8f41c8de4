/* Event streams: suspended until something is due, resumed by the tender. */
#include "http/events.h"
#include "base/text.h"
#include "base/time.h"
#include "http/server.h"
#include <inttypes.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

struct stream {
    struct events *events;
    struct MHD_Connection *connection;
    bool suspended;
    const struct snapshot *snapshot; /* being sent; NULL between two */
    size_t snapshot_sent;
    char line[256]; /* a beat being sent */
    size_t line_length, line_sent;
    uint64_t seen, seen_urgent;
    int64_t state_ns, next_beat_ns; /* when the last state began; when the next beat is due */
    struct stream *next;
};

struct events {
    pthread_mutex_t lock;
    struct board *board;
    struct stream *streams;
    uint32_t n_streams;
    bool stopping;
};

int64_t http_now_ns(void)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    return (int64_t)now.tv_sec * TIME_NS_PER_S + now.tv_nsec;
}

enum status events_create(struct board *board, struct events **out)
{
    struct events *events = calloc(1, sizeof *events);
    if (!events)
        return STATUS_NO_MEMORY;
    pthread_mutex_init(&events->lock, NULL);
    events->board = board;
    *out = events;
    return STATUS_OK;
}

void events_destroy(struct events *events)
{
    if (!events)
        return;
    pthread_mutex_destroy(&events->lock);
    free(events);
}

static bool state_due(const struct stream *stream, uint64_t sequence, uint64_t urgent, int64_t now_ns)
{
    return sequence > stream->seen &&
           (urgent != stream->seen_urgent || now_ns - stream->state_ns >= HTTP_STATE_GAP_NS);
}

static void begin_beat(struct stream *stream, const struct snapshot *latest, int64_t now_ns)
{
    stream->line_length =
        (size_t)snprintf(stream->line, sizeof stream->line,
                         "event: beat\ndata: {\"run\":%" PRIu32 ",\"sequence\":%" PRIu64
                         ",\"watch_s\":%.3f,\"entry\":%" PRId64 ",\"committed_s\":%.3f}\n\n",
                         board_run(stream->events->board), latest->sequence, time_to_s(latest->watch_ns),
                         latest->committed_seq, time_to_s(latest->committed_ns));
    stream->line_sent = 0;
    stream->next_beat_ns = now_ns + HTTP_BEAT_GAP_NS;
}

/* Chooses what to send next; false when nothing is due. */
static bool begin_next(struct stream *stream)
{
    struct board *board = stream->events->board;
    const struct snapshot *latest = board_take(board);
    int64_t now_ns = http_now_ns();
    if (state_due(stream, latest->sequence, latest->urgent, now_ns)) {
        stream->snapshot = latest;
        stream->snapshot_sent = 0;
        stream->seen = latest->sequence;
        stream->seen_urgent = latest->urgent;
        stream->state_ns = now_ns;
        return true;
    }
    bool beat = now_ns >= stream->next_beat_ns;
    if (beat)
        begin_beat(stream, latest, now_ns);
    board_release(board, latest);
    return beat;
}

/* Copies what is being sent; 0 when nothing is. */
static size_t copy_piece(struct stream *stream, char *out, size_t max)
{
    size_t n = stream->line_length - stream->line_sent;
    if (n > 0) {
        n = n < max ? n : max;
        memcpy(out, stream->line + stream->line_sent, n);
        stream->line_sent += n;
        return n;
    }
    if (!stream->snapshot)
        return 0;
    n = stream->snapshot->event_length - stream->snapshot_sent;
    n = n < max ? n : max;
    memcpy(out, stream->snapshot->event + stream->snapshot_sent, n);
    stream->snapshot_sent += n;
    if (stream->snapshot_sent == stream->snapshot->event_length) {
        board_release(stream->events->board, stream->snapshot);
        stream->snapshot = NULL;
    }
    return n;
}

static ssize_t read_stream(void *context, uint64_t position, char *out, size_t max)
{
    (void)position;
    struct stream *stream = context;
    struct events *events = stream->events;
    ssize_t n = MHD_CONTENT_READER_END_OF_STREAM;
    pthread_mutex_lock(&events->lock);
    if (!events->stopping) {
        n = (ssize_t)copy_piece(stream, out, max);
        if (n == 0 && begin_next(stream))
            n = (ssize_t)copy_piece(stream, out, max);
        if (n == 0) {
            MHD_suspend_connection(stream->connection);
            stream->suspended = true;
        }
    }
    pthread_mutex_unlock(&events->lock);
    return n;
}

static void close_stream(void *context)
{
    struct stream *stream = context;
    struct events *events = stream->events;
    pthread_mutex_lock(&events->lock);
    for (struct stream **at = &events->streams; *at; at = &(*at)->next)
        if (*at == stream) {
            *at = stream->next;
            events->n_streams--;
            break;
        }
    pthread_mutex_unlock(&events->lock);
    board_release(events->board, stream->snapshot);
    free(stream);
}

/* A page that comes back with the id of the current state has it already. */
static void resume_after(struct stream *stream, const char *last_id)
{
    uint32_t run;
    uint64_t sequence;
    if (!last_id || sscanf(last_id, "%" SCNu32 "-%" SCNu64, &run, &sequence) != 2)
        return;
    const struct snapshot *latest = board_take(stream->events->board);
    if (run == board_run(stream->events->board) && sequence == latest->sequence) {
        stream->seen = latest->sequence;
        stream->seen_urgent = latest->urgent;
    }
    board_release(stream->events->board, latest);
}

struct MHD_Response *events_open(struct events *events, struct MHD_Connection *connection,
                                 const char *last_id)
{
    struct stream *stream = calloc(1, sizeof *stream);
    if (!stream)
        return NULL;
    *stream = (struct stream){.events = events, .connection = connection};
    stream->line_length = (size_t)snprintf(stream->line, sizeof stream->line, "retry: 1000\n\n");
    resume_after(stream, last_id);
    struct MHD_Response *response = NULL;
    pthread_mutex_lock(&events->lock);
    bool room = events->n_streams < HTTP_MAX_EVENT_STREAMS && !events->stopping;
    if (room)
        response =
            MHD_create_response_from_callback(MHD_SIZE_UNKNOWN, 32768, read_stream, stream, close_stream);
    if (response) {
        stream->next = events->streams;
        events->streams = stream;
        events->n_streams++;
    }
    pthread_mutex_unlock(&events->lock);
    if (!response)
        free(stream);
    return response;
}

bool events_wake_due(struct events *events, uint64_t sequence, int64_t now_ns)
{
    bool waiting = false;
    const struct snapshot *latest = board_take(events->board);
    uint64_t urgent = latest->urgent;
    board_release(events->board, latest);
    pthread_mutex_lock(&events->lock);
    for (struct stream *stream = events->streams; stream; stream = stream->next) {
        if (!stream->suspended)
            continue;
        if (state_due(stream, sequence, urgent, now_ns) || now_ns >= stream->next_beat_ns) {
            stream->suspended = false;
            MHD_resume_connection(stream->connection);
        } else if (sequence > stream->seen)
            waiting = true;
    }
    pthread_mutex_unlock(&events->lock);
    return waiting;
}

void events_stop(struct events *events)
{
    pthread_mutex_lock(&events->lock);
    events->stopping = true;
    for (struct stream *stream = events->streams; stream; stream = stream->next)
        if (stream->suspended) {
            stream->suspended = false;
            MHD_resume_connection(stream->connection);
        }
    pthread_mutex_unlock(&events->lock);
}
