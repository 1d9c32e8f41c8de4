/* The pool: a short queue and a few threads. */
#include "ledger/readers.h"
#include "base/time.h"
#include "clock.h"
#include <pthread.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>

struct readers {
    pthread_mutex_t lock;
    pthread_cond_t changed;
    pthread_t threads[READERS_COUNT];
    uint32_t n_threads, n_waiting;
    atomic_bool stopping;
    char *path;
    struct question *first, **end;
};

static struct question *take(struct readers *readers)
{
    pthread_mutex_lock(&readers->lock);
    while (!readers->first && !atomic_load(&readers->stopping))
        pthread_cond_wait(&readers->changed, &readers->lock);
    struct question *question = readers->first;
    if (question) {
        readers->first = question->next;
        readers->n_waiting--;
        if (!readers->first)
            readers->end = &readers->first;
    }
    pthread_mutex_unlock(&readers->lock);
    return question;
}

/* A handle that failed for whatever reason is closed, and opened anew for the next question. */
static enum status ask(struct readers *readers, struct ledger **ledger, struct question *question)
{
    char problem[LEDGER_PROBLEM_SIZE];
    enum status status = STATUS_OK;
    if (!*ledger)
        status = ledger_open(readers->path, LEDGER_READ, ledger, problem);
    if (status != STATUS_OK)
        return status;
    ledger_set_deadline(*ledger, clock_monotonic_ns() + (int64_t)(READERS_LIMIT_S * (double)TIME_NS_PER_S),
                        &readers->stopping);
    status = question->ask(*ledger, question);
    if (status == STATUS_OK && question->text.failed)
        status = STATUS_NO_MEMORY;
    if (status == STATUS_SYSTEM || status == STATUS_BAD_FORMAT) {
        ledger_close(*ledger);
        *ledger = NULL;
    }
    return status;
}

static void *work(void *context)
{
    struct readers *readers = context;
    struct ledger *ledger = NULL;
    struct question *question;
    /* Linux: of this thread alone, setpriority(2). Where it is refused the pool works all the same. */
    setpriority(PRIO_PROCESS, 0, READERS_PRIORITY);
    while ((question = take(readers))) {
        question->status = atomic_load(&readers->stopping) ? STATUS_BUSY : ask(readers, &ledger, question);
        question->done(question);
    }
    ledger_close(ledger);
    return NULL;
}

enum status readers_create(const char *path, struct readers **out)
{
    struct readers *readers = calloc(1, sizeof *readers);
    if (!readers)
        return STATUS_NO_MEMORY;
    readers->end = &readers->first;
    pthread_mutex_init(&readers->lock, NULL);
    pthread_cond_init(&readers->changed, NULL);
    readers->path = strdup(path);
    enum status status = readers->path ? STATUS_OK : STATUS_NO_MEMORY;
    while (status == STATUS_OK && readers->n_threads < READERS_COUNT) {
        if (pthread_create(&readers->threads[readers->n_threads], NULL, work, readers) == 0)
            readers->n_threads++;
        else
            status = STATUS_SYSTEM;
    }
    if (status != STATUS_OK) {
        readers_destroy(readers);
        return status;
    }
    *out = readers;
    return STATUS_OK;
}

void readers_stop(struct readers *readers)
{
    if (!readers)
        return;
    pthread_mutex_lock(&readers->lock);
    atomic_store(&readers->stopping, true);
    pthread_cond_broadcast(&readers->changed);
    pthread_mutex_unlock(&readers->lock);
    for (; readers->n_threads > 0; readers->n_threads--)
        pthread_join(readers->threads[readers->n_threads - 1], NULL);
}

void readers_destroy(struct readers *readers)
{
    if (!readers)
        return;
    readers_stop(readers);
    pthread_cond_destroy(&readers->changed);
    pthread_mutex_destroy(&readers->lock);
    free(readers->path);
    free(readers);
}

enum status readers_put(struct readers *readers, struct question *question)
{
    enum status status = STATUS_BUSY;
    pthread_mutex_lock(&readers->lock);
    if (readers->n_waiting < READERS_MAX_WAITING && !atomic_load(&readers->stopping)) {
        question->next = NULL;
        *readers->end = question;
        readers->end = &question->next;
        readers->n_waiting++;
        pthread_cond_signal(&readers->changed);
        status = STATUS_OK;
    }
    pthread_mutex_unlock(&readers->lock);
    return status;
}
