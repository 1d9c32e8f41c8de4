/* What the files of daemon/ledger share: an open handle, its lock, and SQLite's errors in our words. */
#ifndef LEDGER_HANDLE_H
#define LEDGER_HANDLE_H

#include "ledger/ledger.h"
#include <sqlite3.h>
#include <stdbool.h>

struct ledger {
    sqlite3 *db;
    char *path;
    bool writing;
    int lock; /* the lock file's descriptor; -1 for a reader */
    sqlite3_stmt *find, *insert;
    struct ledger_tail tail; /* as last committed; of a writer */
    bool doubtful;           /* a commit failed: open again and read where the file stands */
    int64_t deadline_ns;     /* of a reader */
    const atomic_bool *stop;
};

/* Takes PATH.lock; STATUS_BUSY with the other's process number in the problem, STATUS_SYSTEM. */
enum status lock_take(const char *path, int *out, char problem[LEDGER_PROBLEM_SIZE]);
/* Gives it up and removes the file; -1 is nothing. */
void lock_release(const char *path, int lock);

/* SQLite's result in the project's words, and a sentence that names the file and what was tried. */
enum status handle_status(int sqlite_result);
enum status handle_problem(const struct ledger *ledger, const char *doing, char problem[LEDGER_PROBLEM_SIZE]);

/* One integer from a query without parameters; an SQLite result. */
int handle_integer(sqlite3 *db, const char *sql, int64_t *out);

/* Reads where the file stands. */
enum status handle_read_tail(sqlite3 *db, struct ledger_tail *out);

/* The reader's part of ledger_open. */
enum status handle_open_reading(struct ledger *ledger, char problem[LEDGER_PROBLEM_SIZE]);
/* Whether the file is a ledger that this program knows; *out_empty: a database with nothing in it yet. */
enum status handle_check_identity(const struct ledger *ledger, bool *out_empty,
                                  char problem[LEDGER_PROBLEM_SIZE]);
int handle_set_up(struct ledger *ledger);
/* Compares the schema only; STATUS_MISMATCH when a fault was called. Of an older format one fault says so. */
enum status handle_check_names(struct ledger *ledger, void (*fault)(void *context, const char *sentence),
                               void *context);

#endif
