/* One thread: a step, a rest of the same length, a look at the file. */
#include "ledger/checker.h"
#include "base/time.h"
#include "clock.h"
#include "ledger/readers.h"
#include <pthread.h>
#include <stdatomic.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>

#define STEP_ENTRIES 2000
#define LOOK_NS (TIME_NS_PER_S / 2)
#define ASKED_NS (30 * TIME_NS_PER_S)  /* somebody looks while the last question is not older */
#define AGAIN_NS (600 * TIME_NS_PER_S) /* what was checked may have been changed since */

struct checker {
    char *path;
    pthread_mutex_t lock;
    pthread_cond_t asked;
    pthread_t thread;
    bool has_thread;
    atomic_bool stopping;
    int64_t asked_ns;
    struct checker_view view; /* what is shown */
    /* The thread's own. */
    struct ledger *ledger;
    struct verifier *verifier;
    struct checker_view pass; /* the one that runs */
    int64_t begun_ns, version;
    bool through; /* a pass was through: it is shown until the next one is, or finds more */
};

static void take_fault(void *context, int64_t seq, const char *sentence)
{
    struct checker_view *pass = &((struct checker *)context)->pass;
    if (pass->n_faults == CHECKER_MAX_FAULTS)
        return;
    pass->faults[pass->n_faults].seq = seq;
    snprintf(pass->faults[pass->n_faults++].sentence, CHECKER_SENTENCE_SIZE, "%s", sentence);
}

static void show(struct checker *checker)
{
    pthread_mutex_lock(&checker->lock);
    int64_t last_seq = checker->pass.last_seq;
    if (!checker->through || checker->pass.state != CHECKER_CHECKING)
        checker->view = checker->pass;
    checker->view.last_seq = last_seq;
    pthread_mutex_unlock(&checker->lock);
}

static enum status begin(struct checker *checker)
{
    verifier_destroy(checker->verifier);
    checker->verifier = NULL;
    checker->pass = (struct checker_view){.state = CHECKER_CHECKING};
    checker->begun_ns = clock_monotonic_ns();
    enum status status = STATUS_OK;
    if (!checker->ledger)
        status = ledger_open(checker->path, LEDGER_READ, &checker->ledger, checker->pass.problem);
    if (status == STATUS_OK) {
        ledger_set_deadline(checker->ledger, 0, &checker->stopping);
        status = verifier_create(take_fault, checker, &checker->verifier);
    }
    return status;
}

static void give_up(struct checker *checker, enum status status)
{
    struct checker_view *pass = &checker->pass;
    if (!*pass->problem)
        snprintf(pass->problem, sizeof pass->problem, "the ledger could not be read: %s",
                 status_text(status));
    pass->state = CHECKER_UNREADABLE;
    verifier_destroy(checker->verifier);
    checker->verifier = NULL;
    ledger_close(checker->ledger);
    checker->ledger = NULL;
}

/* One piece; whether there is more at once. */
static bool step(struct checker *checker)
{
    struct checker_view *pass = &checker->pass;
    bool more = false;
    struct ledger_tail tail = {0};
    enum status status = checker->verifier ? STATUS_OK : begin(checker);
    if (status == STATUS_OK)
        status = verifier_step(checker->verifier, checker->ledger, STEP_ENTRIES, &more);
    if (status == STATUS_OK)
        status = ledger_get_tail(checker->ledger, &tail);
    if (status == STATUS_OK) /* after the tail: what is written in between is found at its end */
        status = ledger_get_version(checker->ledger, &checker->version);
    if (status != STATUS_OK)
        give_up(checker, status);
    else {
        verifier_get_facts(checker->verifier, &pass->facts);
        pass->last_seq = tail.seq;
        if (!more)
            pass->checked_unix_ns = clock_utc_ns();
        pass->state = pass->facts.n_faults > 0 ? CHECKER_FAULTS : more ? CHECKER_CHECKING : CHECKER_GOOD;
    }
    show(checker);
    checker->through |= !more;
    return more;
}

/* Whether what is known may no longer hold: it is old, or the file was written with nothing new at its end.
 */
static bool is_stale(struct checker *checker)
{
    int64_t version = checker->version;
    struct ledger_tail tail;
    if (!checker->ledger || clock_monotonic_ns() - checker->begun_ns > AGAIN_NS ||
        ledger_get_version(checker->ledger, &version) != STATUS_OK ||
        ledger_get_tail(checker->ledger, &tail) != STATUS_OK)
        return true;
    bool written = version != checker->version;
    checker->version = version;
    return written && tail.seq <= checker->pass.last_seq;
}

static void rest(struct checker *checker, int64_t wait_ns)
{
    struct timespec until;
    int64_t until_ns = clock_monotonic_ns() + wait_ns;
    until.tv_sec = until_ns / TIME_NS_PER_S;
    until.tv_nsec = until_ns % TIME_NS_PER_S;
    pthread_mutex_lock(&checker->lock);
    if (!atomic_load(&checker->stopping))
        pthread_cond_timedwait(&checker->asked, &checker->lock, &until);
    while (!atomic_load(&checker->stopping) &&
           (checker->asked_ns == 0 || clock_monotonic_ns() - checker->asked_ns > ASKED_NS))
        pthread_cond_wait(&checker->asked, &checker->lock);
    pthread_mutex_unlock(&checker->lock);
}

static void *work(void *context)
{
    struct checker *checker = context;
    setpriority(PRIO_PROCESS, 0, READERS_PRIORITY);
    rest(checker, 0);
    while (!atomic_load(&checker->stopping)) {
        int64_t began_ns = clock_monotonic_ns();
        bool more = step(checker);
        rest(checker, more ? clock_monotonic_ns() - began_ns : LOOK_NS);
        if (!more && !atomic_load(&checker->stopping) && is_stale(checker)) {
            verifier_destroy(checker->verifier);
            checker->verifier = NULL;
        }
    }
    verifier_destroy(checker->verifier);
    ledger_close(checker->ledger);
    return NULL;
}

enum status checker_create(const char *path, struct checker **out)
{
    struct checker *checker = calloc(1, sizeof *checker);
    pthread_condattr_t monotonic;
    if (!checker)
        return STATUS_NO_MEMORY;
    pthread_mutex_init(&checker->lock, NULL);
    pthread_condattr_init(&monotonic);
    pthread_condattr_setclock(&monotonic, CLOCK_MONOTONIC);
    pthread_cond_init(&checker->asked, &monotonic);
    pthread_condattr_destroy(&monotonic);
    checker->path = strdup(path);
    enum status status = checker->path ? STATUS_OK : STATUS_NO_MEMORY;
    if (status == STATUS_OK) {
        checker->has_thread = pthread_create(&checker->thread, NULL, work, checker) == 0;
        status = checker->has_thread ? STATUS_OK : STATUS_SYSTEM;
    }
    if (status != STATUS_OK) {
        checker_destroy(checker);
        return status;
    }
    *out = checker;
    return STATUS_OK;
}

void checker_destroy(struct checker *checker)
{
    if (!checker)
        return;
    pthread_mutex_lock(&checker->lock);
    atomic_store(&checker->stopping, true);
    pthread_cond_broadcast(&checker->asked);
    pthread_mutex_unlock(&checker->lock);
    if (checker->has_thread)
        pthread_join(checker->thread, NULL);
    pthread_cond_destroy(&checker->asked);
    pthread_mutex_destroy(&checker->lock);
    free(checker->path);
    free(checker);
}

void checker_get(struct checker *checker, struct checker_view *out)
{
    pthread_mutex_lock(&checker->lock);
    bool first = checker->asked_ns == 0 || clock_monotonic_ns() - checker->asked_ns > ASKED_NS;
    checker->asked_ns = clock_monotonic_ns();
    *out = checker->view;
    if (first)
        pthread_cond_broadcast(&checker->asked);
    pthread_mutex_unlock(&checker->lock);
}
