/* The board: snapshots with reference counts, swapped under a short lock. */
#include "http/board.h"
#include "base/text.h"
#include "base/time.h"
#include "http/board_json.h"
#include <inttypes.h>
#include <pthread.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

/* A snapshot and the memory behind it; free ones keep their memory for the next. */
struct leaf {
    struct snapshot shown; /* first: a snapshot's address is its leaf's */
    unsigned references;
    struct text text;
    size_t urgent_start, urgent_end;
    struct leaf *next; /* in the list of all */
};

struct board {
    pthread_mutex_t lock;
    pthread_cond_t changed;
    struct leaf *all;
    struct leaf *current;
    uint64_t wakes;
    uint32_t run;
    struct text fixed;
    struct columns *columns;
};

/* A leaf that nobody reads, or a new one; NULL when memory ran out. */
static struct leaf *take_free(struct board *board)
{
    pthread_mutex_lock(&board->lock);
    struct leaf *leaf = board->all;
    while (leaf && leaf->references > 0)
        leaf = leaf->next;
    pthread_mutex_unlock(&board->lock);
    if (leaf)
        return leaf; /* only the publisher takes free leaves */
    leaf = calloc(1, sizeof *leaf);
    if (!leaf)
        return NULL;
    pthread_mutex_lock(&board->lock);
    leaf->next = board->all;
    board->all = leaf;
    pthread_mutex_unlock(&board->lock);
    return leaf;
}

static void render(struct leaf *leaf, uint32_t run, const struct watch_view *watch,
                   const struct hearing_view *hearing)
{
    struct text *text = &leaf->text;
    text_reset(text);
    text_format(text, "id: %" PRIu32 "-%" PRIu64 "\nevent: state\ndata: ", run, leaf->shown.sequence);
    size_t start = text->length;
    text_append(text, "{");
    json_number(text, "sequence", (double)leaf->shown.sequence, 0);
    json_number(text, "run", run, 0);
    json_number(text, "watch_s", time_to_s(watch->watch_ns), 3);
    json_number(text, "unix_at_zero_s", time_to_s(hearing->unix_at_zero_ns), 6);
    leaf->urgent_start = text->length;
    board_json_urgent(text, watch, hearing);
    leaf->urgent_end = text->length;
    board_json_watch(text, watch);
    board_json_hearing(text, hearing);
    board_json_sounds(text, hearing, watch->watch_ns);
    board_json_marks(text, hearing);
    text_append(text, "}");
    size_t end = text->length;
    text_append(text, "\n\n");
    leaf->shown.event = text->data;
    leaf->shown.event_length = text->length;
    leaf->shown.json = text->data + start;
    leaf->shown.json_length = end - start;
    leaf->shown.watch_ns = watch->watch_ns;
    leaf->shown.committed_seq = hearing->committed_seq;
    leaf->shown.committed_ns = hearing->committed_ns;
}

static bool same_urgent(const struct leaf *a, const struct leaf *b)
{
    size_t n = a->urgent_end - a->urgent_start;
    return n == b->urgent_end - b->urgent_start &&
           memcmp(a->text.data + a->urgent_start, b->text.data + b->urgent_start, n) == 0;
}

enum status board_publish(struct board *board, const struct watch_view *watch,
                          const struct hearing_view *hearing)
{
    struct leaf *leaf = take_free(board);
    if (!leaf)
        return STATUS_NO_MEMORY;
    const struct leaf *before = board->current; /* only this thread replaces it */
    leaf->shown.sequence = before ? before->shown.sequence + 1 : 1;
    render(leaf, board->run, watch, hearing);
    if (leaf->text.failed)
        return STATUS_NO_MEMORY;
    leaf->shown.urgent = !before ? 1 : before->shown.urgent + (same_urgent(leaf, before) ? 0 : 1);
    pthread_mutex_lock(&board->lock);
    leaf->references = 1;
    if (board->current)
        board->current->references--;
    board->current = leaf;
    pthread_cond_broadcast(&board->changed);
    pthread_mutex_unlock(&board->lock);
    return STATUS_OK;
}

/* The first snapshot: a watch that has not begun. */
static enum status publish_empty(struct board *board, int64_t unix_at_zero_ns)
{
    struct watch_view *watch = calloc(1, sizeof *watch);
    struct hearing_view *hearing = calloc(1, sizeof *hearing);
    enum status status = STATUS_NO_MEMORY;
    if (watch && hearing) {
        hearing->unix_at_zero_ns = unix_at_zero_ns;
        hearing->recording = true;
        status = board_publish(board, watch, hearing);
    }
    free(watch);
    free(hearing);
    return status;
}

static void init_locks(struct board *board)
{
    pthread_condattr_t attributes;
    pthread_condattr_init(&attributes);
    pthread_condattr_setclock(&attributes, CLOCK_MONOTONIC);
    pthread_mutex_init(&board->lock, NULL);
    pthread_cond_init(&board->changed, &attributes);
    pthread_condattr_destroy(&attributes);
}

enum status board_create(const struct board_setup *setup, struct board **out)
{
    if (!setup->permit || setup->n_streams > SITE_MAX_STREAMS || setup->n_stations > SITE_MAX_STATIONS)
        return STATUS_BAD_ARGUMENT;
    struct board *board = calloc(1, sizeof *board);
    if (!board)
        return STATUS_NO_MEMORY;
    init_locks(board);
    board->run = setup->run;
    enum status status = columns_create(setup->n_streams, &board->columns);
    if (status == STATUS_OK) {
        board_json_fixed(&board->fixed, setup);
        status = board->fixed.failed ? STATUS_NO_MEMORY : publish_empty(board, setup->unix_at_zero_ns);
    }
    if (status != STATUS_OK) {
        board_destroy(board);
        return status;
    }
    *out = board;
    return STATUS_OK;
}

void board_destroy(struct board *board)
{
    if (!board)
        return;
    while (board->all) {
        struct leaf *leaf = board->all;
        board->all = leaf->next;
        text_destroy(&leaf->text);
        free(leaf);
    }
    text_destroy(&board->fixed);
    columns_destroy(board->columns);
    pthread_cond_destroy(&board->changed);
    pthread_mutex_destroy(&board->lock);
    free(board);
}

enum status board_push_column(struct board *board, uint32_t stream, const struct column *column)
{
    return columns_push(board->columns, stream, column);
}

const struct snapshot *board_take(struct board *board)
{
    pthread_mutex_lock(&board->lock);
    struct leaf *leaf = board->current;
    leaf->references++;
    pthread_mutex_unlock(&board->lock);
    return &leaf->shown;
}

void board_release(struct board *board, const struct snapshot *snapshot)
{
    if (!snapshot)
        return;
    pthread_mutex_lock(&board->lock);
    for (struct leaf *leaf = board->all; leaf; leaf = leaf->next)
        if (&leaf->shown == snapshot)
            leaf->references--;
    pthread_mutex_unlock(&board->lock);
}

uint64_t board_wait(struct board *board, uint64_t seen, int64_t timeout_ns)
{
    struct timespec until;
    clock_gettime(CLOCK_MONOTONIC, &until);
    int64_t ns = until.tv_nsec + timeout_ns;
    until.tv_sec += ns / TIME_NS_PER_S;
    until.tv_nsec = ns % TIME_NS_PER_S;
    pthread_mutex_lock(&board->lock);
    uint64_t wakes = board->wakes;
    while (board->current->shown.sequence <= seen && wakes == board->wakes)
        if (pthread_cond_timedwait(&board->changed, &board->lock, &until) != 0)
            break;
    uint64_t sequence = board->current->shown.sequence;
    pthread_mutex_unlock(&board->lock);
    return sequence;
}

void board_wake(struct board *board)
{
    pthread_mutex_lock(&board->lock);
    board->wakes++;
    pthread_cond_broadcast(&board->changed);
    pthread_mutex_unlock(&board->lock);
}

const char *board_fixed_json(const struct board *board)
{
    return board->fixed.data;
}

uint32_t board_run(const struct board *board)
{
    return board->run;
}

struct columns *board_columns(struct board *board)
{
    return board->columns;
}
