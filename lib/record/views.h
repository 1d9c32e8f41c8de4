/* The ledger's schema as SQL text: the table, its indexes and a view for each kind of entry.
 *
 * The views read bodies with plain SQL and json functions, so that anybody with the sqlite3 program sees what
 * the program sees; `hushwatch verify` compares what a ledger file holds with this text, character by
 * character. */
#ifndef RECORD_VIEWS_H
#define RECORD_VIEWS_H

#include <stddef.h>

/* PRAGMA user_version: rises by one from a release to the next in which the table or a view has changed. */
#define VIEWS_FORMAT 2
#define VIEWS_APPLICATION_ID 0x48555348 /* PRAGMA application_id: "HUSH" */

/* The id of an entry as an SQL expression over `body`; the index entry_id is on this very expression. */
#define VIEWS_ID_SQL "CASE WHEN json_valid(body) THEN json_extract(body, '$.id') END"

struct schema_object {
    const char *type; /* "table", "index", "view": as in sqlite_schema */
    const char *name;
    const char *sql; /* the CREATE statement, exactly as sqlite_schema stores it */
};

/* In the order in which they are made; views_count of them. */
extern const struct schema_object views_schema[];
extern const size_t views_count;

/* Whether the ledger knows this kind of entry: there is a view of its name. */
int views_has_kind(const char *kind);

#endif
