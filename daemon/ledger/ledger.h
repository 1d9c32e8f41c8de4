/* The ledger file: the only code that sees SQLite.
 *
 * One writer at a time (a lock file beside the ledger, PATH.lock), any number of readers. An append is one
 * transaction in WAL mode with synchronous=FULL: when it returns STATUS_OK the entries survive a crash of the
 * program and of the power. A handle belongs to one thread. Every `problem` is a sentence for people that
 * names the file; it is written on failure only. */
#ifndef LEDGER_LEDGER_H
#define LEDGER_LEDGER_H

#include "base/status.h"
#include "record/entry.h"
#include <stdatomic.h>
#include <stddef.h>
#include <stdint.h>

#define LEDGER_PROBLEM_SIZE 512

struct ledger;

/* An entry to be: seq and hash are the ledger's. Texts are borrowed for the call. */
struct ledger_line {
    const char *utc;
    const char *kind;
    const char *body; /* holds "id" */
    int64_t seq;      /* set by ledger_append */
};

/* The last entry; seq 0, utc "" and the hash of 64 zeros for an empty ledger. */
struct ledger_tail {
    int64_t seq;
    char utc[32];
    char hash[ENTRY_HASH_SIZE];
    uint32_t run; /* of the last `run` entry; 0 where there is none */
};

enum ledger_open_mode {
    LEDGER_CREATE, /* a new file: STATUS_EXISTS where there is one */
    LEDGER_WRITE,  /* continue, or create where there is none */
    LEDGER_READ    /* read only; sees one state of the file per read */
};

/* STATUS_OK and a handle the caller closes; or: STATUS_NOT_FOUND no such file (LEDGER_READ) or folder;
 * STATUS_EXISTS; STATUS_BUSY another program writes it; STATUS_BAD_FORMAT not a ledger, or damaged;
 * STATUS_OUT_OF_RANGE a ledger of a newer program; STATUS_MISMATCH its table or a view is not what this
 * program makes (LEDGER_WRITE only: `verify` says which); STATUS_SYSTEM may not be written or read;
 * STATUS_FULL no room on the disk; STATUS_NO_MEMORY. */
enum status ledger_open(const char *path, enum ledger_open_mode mode, struct ledger **out,
                        char problem[LEDGER_PROBLEM_SIZE]);
/* Takes NULL. Moves what the -wal file holds into the ledger and gives up the lock. */
void ledger_close(struct ledger *ledger);

/* Writes n lines in one transaction and sets their seq. A line whose id is in the ledger already is not
 * written again; it gets the seq that it has. On failure nothing is written and the caller keeps the lines:
 * STATUS_FULL no room (try again later); STATUS_SYSTEM the disk refused: the next append first opens the file
 * again and reads where it stands, because a commit that failed may be there after all; STATUS_BUSY;
 * STATUS_BAD_FORMAT the file is damaged; STATUS_NO_MEMORY. */
enum status ledger_append(struct ledger *ledger, struct ledger_line *lines, size_t n,
                          char problem[LEDGER_PROBLEM_SIZE]);

/* Where the ledger stands: as last committed (writer), or now (reader). */
enum status ledger_get_tail(struct ledger *ledger, struct ledger_tail *out);

/* Which entries, in order of seq. Zero or NULL members leave free. */
struct ledger_query {
    int64_t after_seq;  /* only later ones */
    int64_t before_seq; /* only earlier ones */
    const char *kind;
    uint32_t limit;
    bool newest_first;
};

/* Calls take for each; a status other than STATUS_OK from it ends the reading and is returned.
 * STATUS_BAD_FORMAT damaged; STATUS_BUSY, STATUS_NO_MEMORY,
 * STATUS_SYSTEM. */
enum status ledger_read(struct ledger *ledger, const struct ledger_query *query,
                        enum status (*take)(void *context, const struct entry *entry), void *context);

/* Runs one SELECT over the views with up to n text parameters (?1, ?2 ...) and calls take for each row, with
 * a text or NULL a column. For reports; the views are in record/views.h. */
enum status ledger_select(struct ledger *ledger, const char *sql, size_t n_parameters,
                          const char *const *parameters,
                          enum status (*take)(void *context, int n_columns, const char *const *columns),
                          void *context);

/* From now on a reading that is not over at that time of the monotonic clock, or while *stop is true (NULL:
 * nobody stops it), ends with STATUS_TIMEOUT. 0: no limit. Of a reader's handle. */
void ledger_set_deadline(struct ledger *ledger, int64_t deadline_ns, const atomic_bool *stop);

/* Rises when another handle has written; STATUS_OK or what reading said. */
enum status ledger_get_version(struct ledger *ledger, int64_t *out);

/* The seq of the first entry whose utc is that text or later, found by halves, as utc never falls; one more
 * than the last entry's where there is none. */
enum status ledger_find_time(struct ledger *ledger, const char *utc, int64_t *out_seq);

/* Compares the schema with what the program itself defines, and lets SQLite check the file's own structure;
 * calls fault once for each difference, with a sentence. */
enum status ledger_check_schema(struct ledger *ledger, void (*fault)(void *context, const char *sentence),
                                void *context);

#endif
