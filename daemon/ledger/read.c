/* Reading: entries in order, one by id, rows of the views, and whether the schema is the program's own. */
#include "ledger/handle.h"
#include "record/views.h"
#include <errno.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define MAX_COLUMNS 64

/* ---- opening */

static enum status open_with(struct ledger *ledger, const char *name, int flags,
                             char problem[LEDGER_PROBLEM_SIZE])
{
    int result = sqlite3_open_v2(name, &ledger->db, SQLITE_OPEN_READONLY | SQLITE_OPEN_NOMUTEX | flags, NULL);
    if (!ledger->db)
        return STATUS_NO_MEMORY;
    if (result != SQLITE_OK || handle_set_up(ledger) != SQLITE_OK)
        return handle_problem(ledger, "opening", problem);
    bool empty = false;
    enum status status = handle_check_identity(ledger, &empty, problem);
    if (status == STATUS_OK && empty) {
        snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: is empty, not a ledger", ledger->path);
        return STATUS_BAD_FORMAT;
    }
    return status;
}

/* "file:PATH?immutable=1", percent-encoded (sqlite.org/uri.html). */
static char *immutable_name(const char *path)
{
    static const char tail[] = "?immutable=1";
    char *name = malloc(3 * strlen(path) + sizeof "file:" + sizeof tail);
    if (!name)
        return NULL;
    char *out = name + sprintf(name, "file:");
    for (; *path; path++)
        out += sprintf(out, strchr("%?#", *path) ? "%%%02X" : "%c", (unsigned char)*path);
    memcpy(out, tail, sizeof tail);
    return name;
}

/* A ledger at rest in a folder that cannot be written: SQLite cannot make its index of the WAL there, and
 * needs none when there is no WAL. */
static enum status open_at_rest(struct ledger *ledger, char problem[LEDGER_PROBLEM_SIZE])
{
    char wal[4096];
    struct stat facts;
    snprintf(wal, sizeof wal, "%s-wal", ledger->path);
    if (stat(wal, &facts) == 0 && facts.st_size > 0) {
        snprintf(problem, LEDGER_PROBLEM_SIZE,
                 "%s: has entries in %.200s that can only be read in a folder that may be written; copy both "
                 "there",
                 ledger->path, wal);
        return STATUS_SYSTEM;
    }
    char *name = immutable_name(ledger->path);
    if (!name)
        return STATUS_NO_MEMORY;
    sqlite3_close(ledger->db);
    ledger->db = NULL;
    enum status status = open_with(ledger, name, SQLITE_OPEN_URI, problem);
    free(name);
    return status;
}

enum status handle_open_reading(struct ledger *ledger, char problem[LEDGER_PROBLEM_SIZE])
{
    if (access(ledger->path, R_OK) != 0) {
        snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: cannot be read (%s)", ledger->path, strerror(errno));
        return errno == ENOENT || errno == ENOTDIR ? STATUS_NOT_FOUND : STATUS_SYSTEM;
    }
    struct stat facts;
    if (stat(ledger->path, &facts) == 0 && !S_ISREG(facts.st_mode)) {
        snprintf(problem, LEDGER_PROBLEM_SIZE, "%s: is not a file", ledger->path);
        return STATUS_BAD_FORMAT;
    }
    enum status status = open_with(ledger, ledger->path, 0, problem);
    return status == STATUS_SYSTEM ? open_at_rest(ledger, problem) : status;
}

/* ---- entries */

static const char *column(sqlite3_stmt *statement, int i)
{
    const unsigned char *text = sqlite3_column_text(statement, i);
    return text ? (const char *)text : "";
}

/* Steps through "seq, utc, kind, body, hash" rows and finalizes. */
static enum status give_entries(sqlite3_stmt *statement,
                                enum status (*take)(void *context, const struct entry *entry), void *context)
{
    enum status status = STATUS_OK;
    int result = SQLITE_ROW;
    while (status == STATUS_OK && (result = sqlite3_step(statement)) == SQLITE_ROW) {
        struct entry entry = {.seq = sqlite3_column_int64(statement, 0),
                              .utc = column(statement, 1),
                              .kind = column(statement, 2),
                              .body = column(statement, 3),
                              .hash = column(statement, 4)};
        status = take(context, &entry);
    }
    sqlite3_finalize(statement);
    return status != STATUS_OK ? status : handle_status(result);
}

enum status ledger_read(struct ledger *ledger, const struct ledger_query *query,
                        enum status (*take)(void *context, const struct entry *entry), void *context)
{
    char sql[256];
    snprintf(sql, sizeof sql,
             "SELECT seq, utc, kind, body, hash FROM entry WHERE seq > ?1%s%s ORDER BY seq%s%s",
             query->before_seq > 0 ? " AND seq < ?2" : "", query->kind ? " AND kind = ?3" : "",
             query->newest_first ? " DESC" : "", query->limit > 0 ? " LIMIT ?4" : "");
    sqlite3_stmt *statement;
    int result = sqlite3_prepare_v2(ledger->db, sql, -1, &statement, NULL);
    if (result != SQLITE_OK)
        return handle_status(result);
    sqlite3_bind_int64(statement, 1, query->after_seq);
    if (query->before_seq > 0)
        sqlite3_bind_int64(statement, 2, query->before_seq);
    if (query->kind)
        sqlite3_bind_text(statement, 3, query->kind, -1, SQLITE_STATIC);
    if (query->limit > 0)
        sqlite3_bind_int64(statement, 4, query->limit);
    return give_entries(statement, take, context);
}

enum status ledger_select(struct ledger *ledger, const char *sql, size_t n_parameters,
                          const char *const *parameters,
                          enum status (*take)(void *context, int n_columns, const char *const *columns),
                          void *context)
{
    sqlite3_stmt *statement;
    int result = sqlite3_prepare_v2(ledger->db, sql, -1, &statement, NULL);
    if (result != SQLITE_OK)
        return handle_status(result);
    for (size_t i = 0; i < n_parameters; i++)
        sqlite3_bind_text(statement, (int)i + 1, parameters[i], -1, SQLITE_STATIC);
    enum status status = STATUS_OK;
    while (status == STATUS_OK && (result = sqlite3_step(statement)) == SQLITE_ROW) {
        const char *columns[MAX_COLUMNS];
        int n = sqlite3_column_count(statement);
        for (int i = 0; i < n && i < MAX_COLUMNS; i++)
            columns[i] = (const char *)sqlite3_column_text(statement, i);
        status = take(context, n < MAX_COLUMNS ? n : MAX_COLUMNS, columns);
    }
    sqlite3_finalize(statement);
    return status != STATUS_OK ? status : handle_status(result);
}

/* ---- the schema */

struct schema_check {
    void (*fault)(void *context, const char *sentence);
    void *context;
    bool *seen; /* [views_count] */
    bool any;
};

static void say(struct schema_check *check, const char *format, ...) __attribute__((format(printf, 2, 3)));

static void say(struct schema_check *check, const char *format, ...)
{
    char sentence[LEDGER_PROBLEM_SIZE / 2];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(sentence, sizeof sentence, format, arguments);
    va_end(arguments);
    check->any = true;
    check->fault(check->context, sentence);
}

static enum status compare_object(void *context, int n, const char *const *columns)
{
    struct schema_check *check = context;
    const char *type = columns[0] ? columns[0] : "", *name = columns[1] ? columns[1] : "";
    (void)n;
    for (size_t i = 0; i < views_count; i++) {
        if (strcmp(views_schema[i].name, name) != 0 || strcmp(views_schema[i].type, type) != 0)
            continue;
        check->seen[i] = true;
        if (!columns[2] || strcmp(columns[2], views_schema[i].sql) != 0)
            say(check, "the %.20s '%.80s' is not what the program makes", type, name);
        return STATUS_OK;
    }
    say(check, "the %.20s '%.80s' does not belong into a ledger", type, name);
    return STATUS_OK;
}

enum status handle_check_names(struct ledger *ledger, void (*fault)(void *context, const char *sentence),
                               void *context)
{
    struct schema_check check = {.fault = fault, .context = context};
    int64_t format;
    if (handle_integer(ledger->db, "PRAGMA user_version", &format) == SQLITE_OK && format < VIEWS_FORMAT) {
        say(&check,
            "was written by another version (format %lld, this one makes %d): its table and views cannot be "
            "compared here",
            (long long)format, VIEWS_FORMAT);
        return STATUS_MISMATCH;
    }
    check.seen = calloc(views_count, sizeof(bool));
    if (!check.seen)
        return STATUS_NO_MEMORY;
    enum status status =
        ledger_select(ledger, "SELECT type, name, sql FROM sqlite_schema", 0, NULL, compare_object, &check);
    for (size_t i = 0; i < views_count && status == STATUS_OK; i++)
        if (!check.seen[i])
            say(&check, "the %.20s '%.80s' is missing", views_schema[i].type, views_schema[i].name);
    free(check.seen);
    return status == STATUS_OK && check.any ? STATUS_MISMATCH : status;
}

static enum status take_integrity(void *context, int n, const char *const *columns)
{
    struct schema_check *check = context;
    (void)n;
    if (columns[0] && strcmp(columns[0], "ok") != 0)
        say(check, "SQLite finds the file damaged: %.200s", columns[0]);
    return STATUS_OK;
}

enum status ledger_check_schema(struct ledger *ledger, void (*fault)(void *context, const char *sentence),
                                void *context)
{
    enum status status = handle_check_names(ledger, fault, context);
    if (status != STATUS_OK && status != STATUS_MISMATCH)
        return status;
    struct schema_check check = {.fault = fault, .context = context};
    enum status integrity =
        ledger_select(ledger, "PRAGMA integrity_check(10)", 0, NULL, take_integrity, &check);
    if (integrity != STATUS_OK)
        return integrity;
    return check.any ? STATUS_MISMATCH : status;
}
