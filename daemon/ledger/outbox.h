/* The bounded queue between the watch and the disk, and the one thread that waits for the disk.
 *
 * The watch thread pushes and never waits for the disk; the writer thread commits what has gathered, at once
 * when it has nothing else to do. A full or failing disk loses nothing while there is room here: entries are
 * kept and go in when the disk takes them. Levels are refused first; every other kind keeps a reserve of
 * OUTBOX_RESERVE entries. What is refused is counted, and the count becomes a `health` entry when there is
 * room again. */
#ifndef LEDGER_OUTBOX_H
#define LEDGER_OUTBOX_H

#include "base/status.h"
#include "ledger/ledger.h"
#include <stdbool.h>
#include <stdint.h>

#define OUTBOX_RESERVE 20000
#define OUTBOX_CAPACITY (OUTBOX_RESERVE + 4000)
#define OUTBOX_MAX_STREAM 64

struct outbox;

struct outbox_setup {
    struct ledger *ledger; /* opened for writing; the writer thread's alone until destroy returns STATUS_OK */
    uint32_t run;
    /* Called on the writer thread after each commit, with the lines and their seq; may be NULL. */
    void (*committed)(void *context, const struct ledger_line *lines, size_t n);
    void *context;
    /* Push waits for room while the ledger takes entries: for sound that can wait (a scan, a recording at
     * fast pace). A full or failing disk still does not hold it up. */
    bool wait_for_room;
};

/* Starts the writer thread. STATUS_NO_MEMORY; STATUS_SYSTEM no thread. The caller owns *out. */
enum status outbox_create(const struct outbox_setup *setup, struct outbox **out);

/* Copies the line and returns. STATUS_FULL or STATUS_NO_MEMORY: it was refused and counted. Any thread. */
enum status outbox_push(struct outbox *outbox, const char *utc, const char *kind, const char *body);

/* A `health` entry: its counter is the outbox's, so every one of them must come through here. */
enum status outbox_push_health(struct outbox *outbox, const char *utc, uint32_t stream, bool ok,
                               const char *sentence);

enum outbox_state {
    OUTBOX_OK,     /* entries are committed as they come */
    OUTBOX_FULL,   /* the disk is full: kept here, tried again twice a second */
    OUTBOX_FAILING /* the disk refuses otherwise: kept here, opened again twice a second */
};

/* What the pages say of recording. */
struct outbox_view {
    enum outbox_state state;
    bool recording;     /* false: entries that matter are being refused: 'not recording' */
    uint32_t n_waiting; /* entries that are not committed yet */
    int64_t waiting_ns; /* how long the oldest of them has waited, by the monotonic clock */
    uint64_t n_refused; /* entries refused since create, levels not counted */
    uint64_t n_refused_levels;
    int64_t last_seq; /* last committed */
    char last_utc[32];
    char problem[LEDGER_PROBLEM_SIZE]; /* "" when all is well */
};
void outbox_get_view(struct outbox *outbox, struct outbox_view *out);

/* Waits until everything pushed so far is committed. STATUS_TIMEOUT. */
enum status outbox_wait(struct outbox *outbox, double timeout_s);

/* Lets the writer commit what is there, ends it and frees the outbox. *out_lost (may be NULL): entries that
 * could not be written. STATUS_TIMEOUT: the disk did not come back in time; the thread is left to itself,
 * nothing was freed, and the ledger must not be closed: end the program. Takes NULL. */
enum status outbox_destroy(struct outbox *outbox, double timeout_s, uint64_t *out_lost);

#endif
