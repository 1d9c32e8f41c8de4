/* One mutex for the ring of waiting entries; the writer never holds it while it waits for the disk. */
#include "ledger/outbox.h"
#include "base/time.h"
#include "clock.h"
#include "record/marks.h"
#include <pthread.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define BATCH_LINES 256
#define BATCH_BYTES (4U << 20)
#define LEVEL_BYTES (32U << 20) /* beyond it levels are refused, however few entries wait */
/* What was refused is said when no more than this waits: half of what levels may fill, so that a steady flood
 * does not add an entry for each level that it loses. */
#define CALM_LINES ((OUTBOX_CAPACITY - OUTBOX_RESERVE) / 2)
#define RETRY_NS (TIME_NS_PER_S / 2)

struct item {
    const char *utc, *kind, *body; /* into text */
    size_t bytes;
    int64_t pushed_ns;
    bool is_level;
    char text[];
};

/* What was refused and is not yet said by an entry. */
struct refused {
    uint64_t entries, levels;
    char first_utc[TIME_UTC_SIZE], last_utc[TIME_UTC_SIZE];
};

struct outbox {
    struct outbox_setup setup;
    pthread_t thread;
    pthread_mutex_t mutex;
    pthread_cond_t more;  /* something waits, or stop */
    pthread_cond_t fewer; /* something was committed, or the state changed, or the writer ended */
    struct item **ring;   /* [OUTBOX_CAPACITY] */
    uint32_t head, n;
    size_t bytes;
    bool stopping, ended;
    struct refused refused;
    uint64_t health_count[OUTBOX_MAX_STREAM + 1];
    struct outbox_view view; /* its n_waiting and waiting_ns are made when asked for */
    struct text text;        /* of health bodies */
    struct item *batch[BATCH_LINES];
    struct ledger_line lines[BATCH_LINES];
};

static struct timespec timespec_of(int64_t ns)
{
    return (struct timespec){.tv_sec = (time_t)(ns / TIME_NS_PER_S), .tv_nsec = (long)(ns % TIME_NS_PER_S)};
}

/* ---- the ring; all with the mutex held */

static bool has_room(const struct outbox *outbox, bool level)
{
    if (level)
        return outbox->n < OUTBOX_CAPACITY - OUTBOX_RESERVE && outbox->bytes < LEVEL_BYTES;
    return outbox->n < OUTBOX_CAPACITY;
}

static void add(struct outbox *outbox, struct item *item)
{
    item->pushed_ns = clock_monotonic_ns();
    outbox->ring[(outbox->head + outbox->n) % OUTBOX_CAPACITY] = item;
    outbox->n++;
    outbox->bytes += item->bytes;
    pthread_cond_signal(&outbox->more);
}

static struct item *make_item(const char *utc, const char *kind, const char *body)
{
    size_t utc_size = strlen(utc) + 1, kind_size = strlen(kind) + 1, body_size = strlen(body) + 1;
    size_t bytes = utc_size + kind_size + body_size;
    struct item *item = malloc(sizeof *item + bytes);
    if (!item)
        return NULL;
    *item = (struct item){.bytes = bytes, .is_level = strcmp(kind, "level") == 0};
    item->utc = memcpy(item->text, utc, utc_size);
    item->kind = memcpy(item->text + utc_size, kind, kind_size);
    item->body = memcpy(item->text + utc_size + kind_size, body, body_size);
    return item;
}

static void refuse(struct outbox *outbox, const char *utc, bool level)
{
    struct refused *refused = &outbox->refused;
    if (refused->entries + refused->levels == 0)
        snprintf(refused->first_utc, sizeof refused->first_utc, "%s", utc);
    snprintf(refused->last_utc, sizeof refused->last_utc, "%s", utc);
    if (level) {
        refused->levels++;
        outbox->view.n_refused_levels++;
        return;
    }
    refused->entries++;
    outbox->view.n_refused++;
    outbox->view.recording = false;
}

static enum status add_health(struct outbox *outbox, const char *utc, uint32_t stream, bool ok,
                              const char *sentence)
{
    uint64_t counter = outbox->health_count[stream] + 1;
    enum status status = entry_body_health(outbox->setup.run, stream, counter, ok, sentence, &outbox->text);
    struct item *item = status == STATUS_OK ? make_item(utc, "health", outbox->text.data) : NULL;
    if (!item)
        return STATUS_NO_MEMORY;
    outbox->health_count[stream] = counter;
    add(outbox, item);
    return STATUS_OK;
}

/* Says what was refused once the reserve is whole again (or the outbox ends), so that one flood is one entry.
 */
static void say_refused(struct outbox *outbox, const char *utc)
{
    struct refused *refused = &outbox->refused;
    if (refused->entries + refused->levels == 0 || outbox->n >= OUTBOX_CAPACITY)
        return;
    if (!outbox->stopping && outbox->n > CALM_LINES)
        return;
    char sentence[256];
    snprintf(sentence, sizeof sentence,
             "not recorded for want of room between %s and %s: %llu entries, %llu pieces of levels",
             refused->first_utc, refused->last_utc, (unsigned long long)refused->entries,
             (unsigned long long)refused->levels);
    if (add_health(outbox, utc, 0, false, sentence) != STATUS_OK)
        return;
    *refused = (struct refused){0};
    outbox->view.recording = true;
}

static void wait_for_room(struct outbox *outbox, bool level)
{
    while (outbox->setup.wait_for_room && !has_room(outbox, level) && outbox->view.state == OUTBOX_OK &&
           !outbox->stopping)
        pthread_cond_wait(&outbox->fewer, &outbox->mutex);
}

/* ---- the writer */

/* The oldest lines, as many as one transaction should hold; they stay in the ring until they are committed.
 */
static size_t take_batch(struct outbox *outbox)
{
    size_t n = 0, bytes = 0;
    while (n < outbox->n && n < BATCH_LINES && (n == 0 || bytes < BATCH_BYTES)) {
        struct item *item = outbox->ring[(outbox->head + n) % OUTBOX_CAPACITY];
        outbox->batch[n] = item;
        outbox->lines[n] = (struct ledger_line){.utc = item->utc, .kind = item->kind, .body = item->body};
        bytes += item->bytes;
        n++;
    }
    return n;
}

static void batch_committed(struct outbox *outbox, size_t n)
{
    const struct ledger_line *last = &outbox->lines[n - 1];
    outbox->view.state = OUTBOX_OK;
    outbox->view.problem[0] = '\0';
    outbox->view.last_seq = last->seq;
    snprintf(outbox->view.last_utc, sizeof outbox->view.last_utc, "%s", last->utc);
    outbox->head = (outbox->head + (uint32_t)n) % OUTBOX_CAPACITY;
    outbox->n -= (uint32_t)n;
    for (size_t i = 0; i < n; i++) {
        outbox->bytes -= outbox->batch[i]->bytes;
        free(outbox->batch[i]);
    }
    say_refused(outbox, outbox->refused.last_utc);
    pthread_cond_broadcast(&outbox->fewer);
}

/* Commits one batch; the mutex is given up meanwhile. False: the ledger did not take it. */
static bool write_batch(struct outbox *outbox)
{
    char problem[LEDGER_PROBLEM_SIZE] = "";
    size_t n = take_batch(outbox);
    pthread_mutex_unlock(&outbox->mutex);
    enum status status = ledger_append(outbox->setup.ledger, outbox->lines, n, problem);
    if (status == STATUS_OK && outbox->setup.committed)
        outbox->setup.committed(outbox->setup.context, outbox->lines, n);
    pthread_mutex_lock(&outbox->mutex);
    if (status == STATUS_OK) {
        batch_committed(outbox, n);
        return true;
    }
    outbox->view.state = status == STATUS_FULL ? OUTBOX_FULL : OUTBOX_FAILING;
    snprintf(outbox->view.problem, sizeof outbox->view.problem, "%s", problem);
    pthread_cond_broadcast(&outbox->fewer);
    return false;
}

static void *writer(void *context)
{
    struct outbox *outbox = context;
    unsigned failures_after_stop = 0;
    pthread_mutex_lock(&outbox->mutex);
    while (failures_after_stop < 2) {
        while (outbox->n == 0 && !outbox->stopping)
            pthread_cond_wait(&outbox->more, &outbox->mutex);
        if (outbox->n == 0)
            break;
        if (write_batch(outbox))
            continue;
        failures_after_stop += outbox->stopping;
        int64_t retry_ns = clock_monotonic_ns() + (outbox->stopping ? RETRY_NS / 10 : RETRY_NS);
        struct timespec retry = timespec_of(retry_ns);
        bool stopping = outbox->stopping;
        while (outbox->stopping == stopping &&
               pthread_cond_timedwait(&outbox->more, &outbox->mutex, &retry) == 0)
            ;
    }
    outbox->ended = true;
    pthread_cond_broadcast(&outbox->fewer);
    pthread_mutex_unlock(&outbox->mutex);
    return NULL;
}

/* ---- for everyone else */

static void free_outbox(struct outbox *outbox)
{
    for (uint32_t i = 0; i < outbox->n; i++)
        free(outbox->ring[(outbox->head + i) % OUTBOX_CAPACITY]);
    text_destroy(&outbox->text);
    free(outbox->ring);
    free(outbox);
}

static void make_locks(struct outbox *outbox)
{
    pthread_condattr_t monotonic;
    pthread_condattr_init(&monotonic);
    pthread_condattr_setclock(&monotonic, CLOCK_MONOTONIC);
    pthread_mutex_init(&outbox->mutex, NULL);
    pthread_cond_init(&outbox->more, &monotonic);
    pthread_cond_init(&outbox->fewer, &monotonic);
    pthread_condattr_destroy(&monotonic);
}

/* Signals are the main thread's. */
static int start_thread(struct outbox *outbox)
{
    sigset_t all, before;
    sigfillset(&all);
    pthread_sigmask(SIG_SETMASK, &all, &before);
    int result = pthread_create(&outbox->thread, NULL, writer, outbox);
    pthread_sigmask(SIG_SETMASK, &before, NULL);
    return result;
}

enum status outbox_create(const struct outbox_setup *setup, struct outbox **out)
{
    struct outbox *outbox = calloc(1, sizeof *outbox);
    struct item **ring = calloc(OUTBOX_CAPACITY, sizeof(struct item *));
    struct ledger_tail tail;
    if (!outbox || !ring) {
        free(outbox);
        free(ring);
        return STATUS_NO_MEMORY;
    }
    outbox->setup = *setup;
    outbox->ring = ring;
    outbox->view.recording = true;
    if (ledger_get_tail(setup->ledger, &tail) == STATUS_OK) {
        outbox->view.last_seq = tail.seq;
        memcpy(outbox->view.last_utc, tail.utc, sizeof tail.utc);
    }
    make_locks(outbox);
    if (start_thread(outbox) != 0) {
        free_outbox(outbox);
        return STATUS_SYSTEM;
    }
    *out = outbox;
    return STATUS_OK;
}

enum status outbox_push(struct outbox *outbox, const char *utc, const char *kind, const char *body)
{
    struct item *item = make_item(utc, kind, body);
    bool level = strcmp(kind, "level") == 0;
    pthread_mutex_lock(&outbox->mutex);
    wait_for_room(outbox, level);
    say_refused(outbox, utc);
    enum status status = !item ? STATUS_NO_MEMORY : has_room(outbox, level) ? STATUS_OK : STATUS_FULL;
    if (status == STATUS_OK)
        add(outbox, item);
    else
        refuse(outbox, utc, level);
    pthread_mutex_unlock(&outbox->mutex);
    if (status != STATUS_OK)
        free(item);
    return status;
}

enum status outbox_push_health(struct outbox *outbox, const char *utc, uint32_t stream, bool ok,
                               const char *sentence)
{
    if (stream > OUTBOX_MAX_STREAM)
        return STATUS_BAD_ARGUMENT;
    pthread_mutex_lock(&outbox->mutex);
    wait_for_room(outbox, false);
    say_refused(outbox, utc);
    enum status status =
        has_room(outbox, false) ? add_health(outbox, utc, stream, ok, sentence) : STATUS_FULL;
    if (status != STATUS_OK)
        refuse(outbox, utc, false);
    pthread_mutex_unlock(&outbox->mutex);
    return status;
}

void outbox_get_view(struct outbox *outbox, struct outbox_view *out)
{
    pthread_mutex_lock(&outbox->mutex);
    *out = outbox->view;
    out->n_waiting = outbox->n;
    out->waiting_ns = outbox->n > 0 ? clock_monotonic_ns() - outbox->ring[outbox->head]->pushed_ns : 0;
    pthread_mutex_unlock(&outbox->mutex);
}

/* Waits, with the mutex held, until nothing waits (or the writer has ended). */
static enum status wait_until(struct outbox *outbox, bool for_end, double timeout_s)
{
    struct timespec limit = timespec_of(clock_monotonic_ns() + (int64_t)(timeout_s * 1e9));
    while (for_end ? !outbox->ended : outbox->n > 0 && !outbox->ended)
        if (pthread_cond_timedwait(&outbox->fewer, &outbox->mutex, &limit) != 0)
            return STATUS_TIMEOUT;
    return STATUS_OK;
}

enum status outbox_wait(struct outbox *outbox, double timeout_s)
{
    pthread_mutex_lock(&outbox->mutex);
    enum status status = wait_until(outbox, false, timeout_s);
    pthread_mutex_unlock(&outbox->mutex);
    return status;
}

enum status outbox_destroy(struct outbox *outbox, double timeout_s, uint64_t *out_lost)
{
    if (!outbox)
        return STATUS_OK;
    pthread_mutex_lock(&outbox->mutex);
    outbox->stopping = true;
    say_refused(outbox, outbox->refused.last_utc);
    pthread_cond_broadcast(&outbox->more);
    pthread_cond_broadcast(&outbox->fewer);
    enum status status = wait_until(outbox, true, timeout_s);
    uint64_t lost = outbox->n + outbox->refused.entries;
    pthread_mutex_unlock(&outbox->mutex);
    if (out_lost)
        *out_lost = lost;
    if (status != STATUS_OK) {
        pthread_detach(outbox->thread);
        return status;
    }
    pthread_join(outbox->thread, NULL);
    pthread_mutex_destroy(&outbox->mutex);
    pthread_cond_destroy(&outbox->more);
    pthread_cond_destroy(&outbox->fewer);
    free_outbox(outbox);
    return STATUS_OK;
}
