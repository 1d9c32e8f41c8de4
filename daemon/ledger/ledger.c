/* Opening, appending, closing. Settings of SQLite after its own documentation (pragma.html, wal.html,
 * security.html): WAL with synchronous=FULL is what keeps an acknowledged transaction through a power cut. */
#include "ledger/ledger.h"
#include "ledger/handle.h"
#include "record/views.h"
#include <pthread.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define BUSY_MS 2000
#define FIRST_HASH "0000000000000000000000000000000000000000000000000000000000000000"

enum status handle_status(int sqlite_result)
{
    switch (sqlite_result & 0xff) {
    case SQLITE_OK:
    case SQLITE_ROW:
    case SQLITE_DONE:
        return STATUS_OK;
    case SQLITE_FULL:
        return STATUS_FULL;
    case SQLITE_NOMEM:
        return STATUS_NO_MEMORY;
    case SQLITE_INTERRUPT:
        return STATUS_TIMEOUT;
    case SQLITE_BUSY:
    case SQLITE_LOCKED:
        return STATUS_BUSY;
    case SQLITE_CORRUPT:
    case SQLITE_NOTADB:
        return STATUS_BAD_FORMAT;
    default:
        return STATUS_SYSTEM;
    }
}

enum status handle_problem(const struct ledger *ledger, const char *doing, char problem[LEDGER_PROBLEM_SIZE])
{
    int result = sqlite3_extended_errcode(ledger->db);
    snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: %s failed: %s (SQLite %d)", ledger->path, doing,
             sqlite3_errmsg(ledger->db), result);
    return result == SQLITE_OK ? STATUS_SYSTEM : handle_status(result);
}

int handle_integer(sqlite3 *db, const char *sql, int64_t *out)
{
    sqlite3_stmt *statement;
    int result = sqlite3_prepare_v2(db, sql, -1, &statement, NULL);
    if (result != SQLITE_OK)
        return result;
    result = sqlite3_step(statement);
    if (result == SQLITE_ROW)
        *out = sqlite3_column_int64(statement, 0);
    int finish = sqlite3_finalize(statement);
    return result == SQLITE_ROW || result == SQLITE_DONE ? finish : result;
}

static const char *column(sqlite3_stmt *statement, int i)
{
    const unsigned char *text = sqlite3_column_text(statement, i);
    return text ? (const char *)text : "";
}

enum status handle_read_tail(sqlite3 *db, struct ledger_tail *out)
{
    struct ledger_tail tail = {.hash = FIRST_HASH};
    sqlite3_stmt *statement;
    int result = sqlite3_prepare_v2(db, "SELECT seq, utc, hash FROM entry ORDER BY seq DESC LIMIT 1", -1,
                                    &statement, NULL);
    if (result != SQLITE_OK)
        return handle_status(result);
    result = sqlite3_step(statement);
    if (result == SQLITE_ROW) {
        tail.seq = sqlite3_column_int64(statement, 0);
        snprintf(tail.utc, sizeof tail.utc, "%s", column(statement, 1));
        snprintf(tail.hash, sizeof tail.hash, "%s", column(statement, 2));
    }
    sqlite3_finalize(statement);
    int64_t run = 0;
    if (result == SQLITE_ROW || result == SQLITE_DONE)
        result = handle_integer(db,
                                "SELECT CAST(" VIEWS_ID_SQL " AS INTEGER) FROM entry WHERE kind = 'run' "
                                "ORDER BY seq DESC LIMIT 1",
                                &run);
    if (handle_status(result) != STATUS_OK)
        return handle_status(result);
    tail.run = (uint32_t)run;
    *out = tail;
    return STATUS_OK;
}

/* ---- opening */

int handle_set_up(struct ledger *ledger)
{
    sqlite3 *db = ledger->db;
    sqlite3_extended_result_codes(db, 1);
    sqlite3_busy_timeout(db, BUSY_MS);
    sqlite3_db_config(db, SQLITE_DBCONFIG_DEFENSIVE, 1, NULL);
    /* trusted_schema stays on: SQLite 3.40 does not count json_extract among the harmless functions. */
    return sqlite3_exec(db, "PRAGMA cell_size_check=ON; PRAGMA mmap_size=0;", NULL, NULL, NULL);
}

static enum status set_up_writing(struct ledger *ledger, char problem[LEDGER_PROBLEM_SIZE])
{
    sqlite3_stmt *statement;
    int result = sqlite3_prepare_v2(ledger->db, "PRAGMA journal_mode=WAL", -1, &statement, NULL);
    if (result != SQLITE_OK)
        return handle_problem(ledger, "setting up", problem);
    result = sqlite3_step(statement);
    bool wal = result == SQLITE_ROW && strcmp(column(statement, 0), "wal") == 0;
    result = sqlite3_finalize(statement);
    if (result == SQLITE_OK && !wal) {
        snprintf(problem, LEDGER_PROBLEM_SIZE,
                 "%s: this file system cannot hold a ledger (no shared memory for a write-ahead log)",
                 ledger->path);
        return STATUS_SYSTEM;
    }
    if (result == SQLITE_OK)
        result = sqlite3_exec(ledger->db, "PRAGMA synchronous=FULL", NULL, NULL, NULL);
    return result == SQLITE_OK ? STATUS_OK : handle_problem(ledger, "setting up", problem);
}

enum status handle_check_identity(const struct ledger *ledger, bool *out_empty,
                                  char problem[LEDGER_PROBLEM_SIZE])
{
    int64_t application = 0, format = 0, objects = 0;
    if (handle_integer(ledger->db, "PRAGMA application_id", &application) != SQLITE_OK ||
        handle_integer(ledger->db, "PRAGMA user_version", &format) != SQLITE_OK ||
        handle_integer(ledger->db, "SELECT count(*) FROM sqlite_schema", &objects) != SQLITE_OK) {
        enum status status = handle_problem(ledger, "reading", problem);
        if (status == STATUS_BAD_FORMAT)
            snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: is not a ledger, or is damaged: %s", ledger->path,
                     sqlite3_errmsg(ledger->db));
        return status;
    }
    *out_empty = application == 0 && objects == 0;
    if (*out_empty)
        return STATUS_OK;
    if (application != VIEWS_APPLICATION_ID) {
        snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: is an SQLite file, but not a ledger", ledger->path);
        return STATUS_BAD_FORMAT;
    }
    if (format > VIEWS_FORMAT) {
        snprintf(problem, LEDGER_PROBLEM_SIZE,
                 "%s: was made by a newer program (format %lld; this one knows up to %d)", ledger->path,
                 (long long)format, VIEWS_FORMAT);
        return STATUS_OUT_OF_RANGE;
    }
    return STATUS_OK;
}

static enum status make_schema(const struct ledger *ledger, char problem[LEDGER_PROBLEM_SIZE])
{
    char pragmas[128];
    snprintf(pragmas, sizeof pragmas, "PRAGMA application_id=%d; PRAGMA user_version=%d;",
             VIEWS_APPLICATION_ID, VIEWS_FORMAT);
    int result = sqlite3_exec(ledger->db, "BEGIN IMMEDIATE", NULL, NULL, NULL);
    for (size_t i = 0; i < views_count && result == SQLITE_OK; i++)
        result = sqlite3_exec(ledger->db, views_schema[i].sql, NULL, NULL, NULL);
    if (result == SQLITE_OK)
        result = sqlite3_exec(ledger->db, pragmas, NULL, NULL, NULL);
    if (result == SQLITE_OK)
        result = sqlite3_exec(ledger->db, "COMMIT", NULL, NULL, NULL);
    return result == SQLITE_OK ? STATUS_OK : handle_problem(ledger, "making the ledger", problem);
}

static void first_fault(void *context, const char *sentence)
{
    char *first = context;
    if (!*first)
        snprintf(first, LEDGER_PROBLEM_SIZE / 2, "%s", sentence);
}

static enum status check_writable(struct ledger *ledger, bool empty, char problem[LEDGER_PROBLEM_SIZE])
{
    if (sqlite3_db_readonly(ledger->db, "main")) {
        snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: may only be read, not written", ledger->path);
        return STATUS_SYSTEM;
    }
    enum status status = set_up_writing(ledger, problem);
    if (status != STATUS_OK)
        return status;
    if (empty)
        return make_schema(ledger, problem);
    char fault[LEDGER_PROBLEM_SIZE / 2] = "";
    status = handle_check_names(ledger, first_fault, fault);
    if (status == STATUS_MISMATCH)
        snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: %s; 'hushwatch verify' tells more", ledger->path, fault);
    else if (status != STATUS_OK)
        handle_problem(ledger, "reading", problem);
    return status;
}

static enum status prepare(struct ledger *ledger, char problem[LEDGER_PROBLEM_SIZE])
{
    /* The id is looked for through the index entry_id, which is on the same expression. */
    static const char find[] = "SELECT seq FROM entry WHERE " VIEWS_ID_SQL
                               " = (CASE WHEN json_valid(?1) THEN json_extract(?1, '$.id') END)";
    static const char insert[] = "INSERT INTO entry(seq, utc, kind, body, hash) VALUES(?1, ?2, ?3, ?4, ?5)";
    if (sqlite3_prepare_v3(ledger->db, find, -1, SQLITE_PREPARE_PERSISTENT, &ledger->find, NULL) !=
            SQLITE_OK ||
        sqlite3_prepare_v3(ledger->db, insert, -1, SQLITE_PREPARE_PERSISTENT, &ledger->insert, NULL) !=
            SQLITE_OK)
        return handle_problem(ledger, "setting up", problem);
    return STATUS_OK;
}

static void close_database(struct ledger *ledger)
{
    sqlite3_finalize(ledger->find);
    sqlite3_finalize(ledger->insert);
    ledger->find = ledger->insert = NULL;
    sqlite3_close(ledger->db);
    ledger->db = NULL;
}

static enum status open_writing(struct ledger *ledger, char problem[LEDGER_PROBLEM_SIZE])
{
    int result = sqlite3_open_v2(ledger->path, &ledger->db,
                                 SQLITE_OPEN_READWRITE | SQLITE_OPEN_CREATE | SQLITE_OPEN_NOMUTEX, NULL);
    if (!ledger->db)
        return STATUS_NO_MEMORY;
    if (result != SQLITE_OK || handle_set_up(ledger) != SQLITE_OK)
        return handle_problem(ledger, "opening", problem);
    bool empty = false;
    enum status status = handle_check_identity(ledger, &empty, problem);
    if (status == STATUS_OK)
        status = check_writable(ledger, empty, problem);
    if (status == STATUS_OK)
        status = prepare(ledger, problem);
    if (status == STATUS_OK && (status = handle_read_tail(ledger->db, &ledger->tail)) != STATUS_OK)
        status = handle_problem(ledger, "reading", problem);
    return status;
}

/* A file that sticks out of a size limit must be an error, not the end of the program: setrlimit(2), SIGXFSZ.
 */
static void ignore_size_signal(void)
{
    struct sigaction now;
    if (sigaction(SIGXFSZ, NULL, &now) == 0 && now.sa_handler == SIG_DFL)
        signal(SIGXFSZ, SIG_IGN);
}

static enum status lock_and_open(struct ledger *ledger, enum ledger_open_mode mode,
                                 char problem[LEDGER_PROBLEM_SIZE])
{
    struct stat facts;
    bool exists = stat(ledger->path, &facts) == 0;
    if (exists && mode == LEDGER_CREATE) {
        snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: exists already; it is not overwritten", ledger->path);
        return STATUS_EXISTS;
    }
    if (exists && access(ledger->path, W_OK) != 0) {
        snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: may only be read, not written", ledger->path);
        return STATUS_SYSTEM;
    }
    enum status status = lock_take(ledger->path, &ledger->lock, problem);
    if (status != STATUS_OK)
        return status;
    ignore_size_signal();
    status = open_writing(ledger, problem);
    if (status != STATUS_OK && !exists)
        unlink(ledger->path); /* nothing is in it */
    return status;
}

/* SQLite's sums of its memory, which nobody reads, cost a lock that all handles share: a reader of low priority
 * that was taken off the processor in it would hold up the writer. (SQLITE_CONFIG_MEMSTATUS of its manual; before
 * the first handle, once.) */
static void set_up_library(void)
{
    sqlite3_config(SQLITE_CONFIG_MEMSTATUS, 0);
}

enum status ledger_open(const char *path, enum ledger_open_mode mode, struct ledger **out,
                        char problem[LEDGER_PROBLEM_SIZE])
{
    static pthread_once_t once = PTHREAD_ONCE_INIT;
    pthread_once(&once, set_up_library);
    struct ledger *ledger = calloc(1, sizeof *ledger);
    if (ledger)
        ledger->path = strdup(path);
    if (!ledger || !ledger->path) {
        free(ledger);
        snprintf(problem, LEDGER_PROBLEM_SIZE, "out of memory");
        return STATUS_NO_MEMORY;
    }
    ledger->lock = -1;
    ledger->writing = mode != LEDGER_READ;
    enum status status =
        ledger->writing ? lock_and_open(ledger, mode, problem) : handle_open_reading(ledger, problem);
    if (status != STATUS_OK) {
        ledger_close(ledger);
        return status;
    }
    *out = ledger;
    return STATUS_OK;
}

void ledger_close(struct ledger *ledger)
{
    if (!ledger)
        return;
    close_database(ledger);
    lock_release(ledger->path, ledger->lock);
    free(ledger->path);
    free(ledger);
}

enum status ledger_get_tail(struct ledger *ledger, struct ledger_tail *out)
{
    if (!ledger->writing)
        return handle_read_tail(ledger->db, out);
    *out = ledger->tail;
    return STATUS_OK;
}

/* ---- appending */

static int find_seq(struct ledger *ledger, const char *body, int64_t *out)
{
    sqlite3_reset(ledger->find);
    sqlite3_bind_text(ledger->find, 1, body, -1, SQLITE_STATIC);
    int result = sqlite3_step(ledger->find);
    *out = result == SQLITE_ROW ? sqlite3_column_int64(ledger->find, 0) : 0;
    sqlite3_reset(ledger->find);
    return result == SQLITE_ROW || result == SQLITE_DONE ? SQLITE_OK : result;
}

static int insert_line(struct ledger *ledger, struct ledger_tail *tail, struct ledger_line *line)
{
    char hash[ENTRY_HASH_SIZE];
    entry_hash(tail->hash, tail->seq + 1, line->utc, line->kind, line->body, hash);
    sqlite3_reset(ledger->insert);
    sqlite3_bind_int64(ledger->insert, 1, tail->seq + 1);
    sqlite3_bind_text(ledger->insert, 2, line->utc, -1, SQLITE_STATIC);
    sqlite3_bind_text(ledger->insert, 3, line->kind, -1, SQLITE_STATIC);
    sqlite3_bind_text(ledger->insert, 4, line->body, -1, SQLITE_STATIC);
    sqlite3_bind_text(ledger->insert, 5, hash, -1, SQLITE_STATIC);
    int result = sqlite3_step(ledger->insert);
    int reset = sqlite3_reset(ledger->insert);
    if (result != SQLITE_DONE)
        return reset != SQLITE_OK ? reset : result;
    line->seq = ++tail->seq;
    snprintf(tail->utc, sizeof tail->utc, "%s", line->utc);
    memcpy(tail->hash, hash, sizeof hash);
    const char *id = strcmp(line->kind, "run") == 0 ? strstr(line->body, "\"id\":\"") : NULL;
    if (id)
        tail->run = (uint32_t)strtoul(id + 6, NULL, 10);
    return SQLITE_OK;
}

static int insert_lines(struct ledger *ledger, struct ledger_tail *tail, struct ledger_line *lines, size_t n)
{
    int result = sqlite3_exec(ledger->db, "BEGIN IMMEDIATE", NULL, NULL, NULL);
    for (size_t i = 0; i < n && result == SQLITE_OK; i++) {
        result = find_seq(ledger, lines[i].body, &lines[i].seq);
        if (result == SQLITE_OK && lines[i].seq == 0)
            result = insert_line(ledger, tail, &lines[i]);
    }
    return result == SQLITE_OK ? sqlite3_exec(ledger->db, "COMMIT", NULL, NULL, NULL) : result;
}

/* Opens again after a refused commit. What that commit wrote may be in the write-ahead log and yet not on the
 * disk: after a failed sync the kernel may count the lost pages as written. Copying the log into the ledger
 * writes and syncs them anew; until that has worked nothing may count as committed. */
static enum status open_again(struct ledger *ledger, char problem[LEDGER_PROBLEM_SIZE])
{
    close_database(ledger);
    enum status status = open_writing(ledger, problem);
    if (status != STATUS_OK)
        return status;
    if (sqlite3_wal_checkpoint_v2(ledger->db, NULL, SQLITE_CHECKPOINT_FULL, NULL, NULL) != SQLITE_OK)
        return handle_problem(ledger, "writing after an error", problem);
    ledger->doubtful = false;
    return STATUS_OK;
}

enum status ledger_append(struct ledger *ledger, struct ledger_line *lines, size_t n,
                          char problem[LEDGER_PROBLEM_SIZE])
{
    if (!ledger->writing)
        return STATUS_BAD_ARGUMENT;
    if (ledger->doubtful) {
        enum status status = open_again(ledger, problem);
        if (status != STATUS_OK)
            return status;
    }
    struct ledger_tail tail = ledger->tail;
    int result = insert_lines(ledger, &tail, lines, n);
    if (result == SQLITE_OK) {
        ledger->tail = tail;
        return STATUS_OK;
    }
    enum status status = handle_status(result);
    snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: writing failed: %s (SQLite %d)", ledger->path,
             sqlite3_errstr(result), result);
    if (!sqlite3_get_autocommit(ledger->db))
        sqlite3_exec(ledger->db, "ROLLBACK", NULL, NULL, NULL);
    /* A file-size limit or quota says IOERR_WRITE where a full disk says FULL; both pass when there is room.
     */
    if (result == SQLITE_IOERR_WRITE)
        return STATUS_FULL;
    ledger->doubtful = status == STATUS_SYSTEM || status == STATUS_BAD_FORMAT;
    return status;
}
