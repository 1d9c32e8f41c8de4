/* A small pool of read-only handles on one ledger, for questions that may take long: each with a time limit,
 * on threads of low priority, so that no question delays what the watch writes.
 *
 * A question is its asker's until `done` was called. */
#ifndef LEDGER_READERS_H
#define LEDGER_READERS_H

#include "base/status.h"
#include "base/text.h"
#include "ledger/ledger.h"

#define READERS_COUNT 2
#define READERS_MAX_WAITING 32
#define READERS_LIMIT_S 2.0 /* a question's time, once it is its turn */
#define READERS_PRIORITY 10 /* nice(2) of the threads */

struct question {
    /* Asks the ledger and writes the answer; on a thread of the pool. */
    enum status (*ask)(struct ledger *ledger, struct question *question);
    /* Called once on that thread; the question may be gone when it returns. */
    void (*done)(struct question *question);
    enum status status; /* what ask said; STATUS_TIMEOUT: its time was over */
    struct text text;   /* the answer; the asker's to destroy */
    struct question *next;
};

struct readers;

/* Opens no file yet: a ledger that cannot be opened is the answer to each question. STATUS_NO_MEMORY;
 * STATUS_SYSTEM no thread. path is copied. The caller owns *out. */
enum status readers_create(const char *path, struct readers **out);
/* Ends what runs (STATUS_TIMEOUT), answers what waits with STATUS_BUSY, ends the threads. Takes NULL. */
void readers_stop(struct readers *readers);
/* Stops too; takes NULL. */
void readers_destroy(struct readers *readers);

/* STATUS_BUSY, and the question stays the asker's: too many wait, or the pool is stopped. */
enum status readers_put(struct readers *readers, struct question *question);

#endif
