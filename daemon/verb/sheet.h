/* A printable page made from a ledger, piece by piece: headings, sentences, and tables that are a query each.
 */
#ifndef VERB_SHEET_H
#define VERB_SHEET_H

#include "base/status.h"
#include "base/text.h"
#include "ledger/ledger.h"

#define SHEET_MAX_COLUMNS 12

struct sheet {
    struct ledger *ledger; /* borrowed */
    struct text html;
    enum status status; /* of the first query that failed; the page is then not complete */
};

struct sheet_table {
    const char *title;
    const char *remark; /* a sentence under the title, or NULL */
    const char *empty;  /* what to say when there is no row */
    /* One a column of the query, closed by NULL; "#name": numbers, "@name": times. */
    const char *heads[SHEET_MAX_COLUMNS + 1];
    const char *sql;
};

/* Text with what HTML gives a meaning escaped; NULL is nothing. */
void sheet_text(struct sheet *sheet, const char *text);
void sheet_heading(struct sheet *sheet, const char *title);
void sheet_table(struct sheet *sheet, const struct sheet_table *table);
/* Calls take for each row of a query without parameters; remembers a failure. */
void sheet_rows(struct sheet *sheet, const char *sql,
                enum status (*take)(void *context, int n, const char *const *columns), void *context);
/* The one number of a query, or `otherwise` where it gives none. */
double sheet_number(struct sheet *sheet, const char *sql, double otherwise);

/* The watch at a glance as a picture (SVG): who watched, what was unheard, contacts, phases, advice,
 * impulses. */
void sheet_strip(struct sheet *sheet);

/* The sections of the report in their order; closed by a NULL title. */
extern const struct sheet_table report_tables[];

#endif
