/* hushwatch explain: the chain of entries behind any entry. */
#include "base/text.h"
#include "ledger/ledger.h"
#include "record/views.h"
#include "recorded.h"
#include "verb/explain_words.h"
#include "verb/options.h"
#include "verb/verb.h"
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define DEFAULT_DEPTH 6
#define MAX_DEPTH 50
#define MAX_CAUSES 24
#define MAX_SHOWN 400
#define MAX_CLAUSES 64
#define ENTRY "FROM entry WHERE " VIEWS_ID_SQL " = ?1"

static const char help[] =
    "usage: hushwatch explain LEDGER ID [--depth N]\n\n"
    "Prints an entry and the entries behind it, as far back as they name each other: for each its id, when "
    "it "
    "became\n"
    "known, what it says, and its clause of the permit; then the values of the permit that stand under those "
    "clauses,\n"
    "each with its mark (how well it is known) and its source. ID is an entry's id, like 1.0.advice.7. Reads "
    "only.\n\n"
    "  --depth N  how far back, 6 where it is not said; 0: the entry alone\n\n"
    "Exit code: 0 good, 2 wrong use or no such id, 3 the ledger could not be read.\n";

struct explaining {
    struct ledger *ledger;
    const char *path;
    long depth;
    uint32_t n_shown, n_clauses;
    char shown[MAX_SHOWN][FLOW_ID_SIZE];
    char clauses[MAX_CLAUSES][FLOW_TEXT_SIZE];
    bool found;
    char seq[24]; /* of the entry that was asked for */
    enum status status;
};

struct causes {
    uint32_t n;
    char ids[MAX_CAUSES][FLOW_ID_SIZE];
};

/* ---- one entry */

struct row {
    char kind[32], seq[24], utc[32], clause[FLOW_TEXT_SIZE];
    bool found;
};

static enum status take_row(void *context, int n, const char *const *columns)
{
    struct row *row = context;
    (void)n;
    row->found = true;
    snprintf(row->seq, sizeof row->seq, "%s", columns[0] ? columns[0] : "");
    snprintf(row->utc, sizeof row->utc, "%s", columns[1] ? columns[1] : "");
    snprintf(row->kind, sizeof row->kind, "%s", columns[2] ? columns[2] : "");
    snprintf(row->clause, sizeof row->clause, "%s", columns[3] ? columns[3] : "");
    return STATUS_OK;
}

static enum status take_words(void *context, int n, const char *const *columns)
{
    struct text *words = context;
    (void)n;
    text_append(words, columns[0] ? columns[0] : "");
    return STATUS_OK;
}

static enum status take_cause(void *context, int n, const char *const *columns)
{
    struct causes *causes = context;
    (void)n;
    for (uint32_t i = 0; i < causes->n; i++)
        if (columns[0] && strcmp(causes->ids[i], columns[0]) == 0)
            return STATUS_OK;
    if (columns[0] && causes->n < MAX_CAUSES)
        snprintf(causes->ids[causes->n++], FLOW_ID_SIZE, "%s", columns[0]);
    return STATUS_OK;
}

static void ask(struct explaining *explaining, const char *sql, const char *id,
                enum status (*take)(void *, int, const char *const *), void *context)
{
    enum status status = ledger_select(explaining->ledger, sql, 1, &id, take, context);
    if (explaining->status == STATUS_OK)
        explaining->status = status;
}

/* What an entry names as its causes; a note the advice or the impulse that it is about; a contact does not
 * name what made it, but it became known at that moment. */
static void find_causes(struct explaining *explaining, const char *id, struct causes *causes)
{
    static const char *const questions[] = {
        "SELECT value FROM (SELECT body " ENTRY "), json_each(body, '$.causes')",
        "SELECT json_extract(body, '$.advice') " ENTRY " AND kind = 'note'",
        "SELECT json_extract(body, '$.impulse') " ENTRY " AND kind = 'note'",
        "SELECT json_extract(other.body, '$.id') FROM (SELECT seq, utc " ENTRY
        " AND kind = 'contact') AS contact, entry AS other WHERE other.seq BETWEEN contact.seq - 40 AND "
        "contact.seq - "
        "1 AND other.utc = contact.utc AND other.kind IN ('call', 'note')"};
    causes->n = 0;
    for (size_t i = 0; i < sizeof questions / sizeof questions[0]; i++)
        ask(explaining, questions[i], id, take_cause, causes);
}

static bool was_shown(struct explaining *explaining, const char *id)
{
    for (uint32_t i = 0; i < explaining->n_shown; i++)
        if (strcmp(explaining->shown[i], id) == 0)
            return true;
    if (explaining->n_shown < MAX_SHOWN)
        snprintf(explaining->shown[explaining->n_shown++], FLOW_ID_SIZE, "%s", id);
    return false;
}

static void keep_clause(struct explaining *explaining, const char *clause)
{
    if (!*clause || explaining->n_clauses == MAX_CLAUSES)
        return;
    snprintf(explaining->clauses[explaining->n_clauses++], FLOW_TEXT_SIZE, "%s", clause);
}

static void print_words(struct explaining *explaining, const char *id, const char *kind)
{
    struct text sql = {0}, words = {0};
    text_append(&sql, "SELECT ");
    explain_words(kind, &sql);
    text_append(&sql, " " ENTRY);
    if (!sql.failed)
        ask(explaining, sql.data, id, take_words, &words);
    printf("%s", words.data ? words.data : "");
    text_destroy(&sql);
    text_destroy(&words);
}

static void print_entry(struct explaining *explaining, const char *id, long level)
{
    struct row row = {0};
    struct causes causes;
    int indent = (int)(3 * level);
    ask(explaining, "SELECT seq, utc, kind, json_extract(body, '$.clause') " ENTRY, id, take_row, &row);
    if (!row.found) {
        if (level > 0)
            printf("%*s%s: not in the ledger\n", indent, "", id);
        return;
    }
    if (level == 0) {
        explaining->found = true;
        memcpy(explaining->seq, row.seq, sizeof explaining->seq);
    }
    if (was_shown(explaining, id)) {
        printf("%*s%s: see above\n", indent, "", id);
        return;
    }
    printf("%*s%s  %s  ", indent, "", id, row.utc);
    print_words(explaining, id, row.kind);
    printf("%s%s%s\n", *row.clause ? " [" : "", row.clause, *row.clause ? "]" : "");
    keep_clause(explaining, row.clause);
    find_causes(explaining, id, &causes);
    if (level >= explaining->depth) {
        if (causes.n > 0)
            printf("%*s   (%u entries behind it: --depth %ld shows them)\n", indent, "", causes.n, level + 1);
        return;
    }
    for (uint32_t i = 0; i < causes.n && explaining->status == STATUS_OK; i++)
        print_entry(explaining, causes.ids[i], level + 1);
}

/* ---- the permit's values */

struct entries {
    char *run, *permit;
};

static enum status take_body(void *context, int n, const char *const *columns)
{
    char **body = context;
    (void)n;
    *body = strdup(columns[0] ? columns[0] : "");
    return *body ? STATUS_OK : STATUS_NO_MEMORY;
}

/* Whether one of the clauses that were shown is this; an entry may name several. */
static bool is_named(const struct explaining *explaining, const char *clause)
{
    for (uint32_t i = 0; *clause && i < explaining->n_clauses; i++)
        if (strstr(explaining->clauses[i], clause))
            return true;
    return false;
}

static void print_values(const struct permit *permit, const char *part)
{
    size_t length = strlen(part);
    for (uint32_t i = 0; i < permit->n_values; i++) {
        const struct permit_value *value = &permit->values[i];
        if (strncmp(value->key, part, length) == 0 && strchr(".\0", value->key[length]))
            printf("   %s = %s (%s: %s%s%s)\n", value->key, value->text, permit_mark_text(value->mark),
                   value->who, *value->who ? ": " : "", value->source);
    }
}

static void print_parts(const struct explaining *explaining, const struct permit *permit)
{
    const struct {
        const char *part, *clause;
    } parts[] = {{"pre_watch", permit->pre_watch_clause},
                 {"unknown_distance", permit->unknown_clause},
                 {"soft_start", permit->soft_start.clause},
                 {"break", permit->break_clause},
                 {"deterrent", permit->deterrent.clause},
                 {"quieting", permit->quieting.clause},
                 {"line_turn", permit->turn.clause},
                 {"mitigation_source", permit->mitigation_source.clause},
                 {"test", permit->test.clause},
                 {"vibro_and_drilling", permit->steady.clause},
                 {"start", permit->start.clause},
                 {"outage", permit->outage.clause},
                 {"override", permit->override.clause},
                 {"staff", permit->staff.clause},
                 {"post_watch", permit->post_watch_clause}};
    char part[PERMIT_NAME_SIZE];
    for (size_t i = 0; i < sizeof parts / sizeof parts[0]; i++)
        if (is_named(explaining, parts[i].clause))
            print_values(permit, parts[i].part);
    for (uint32_t i = 0; i < permit->n_zones; i++) {
        snprintf(part, sizeof part, "zones[%u]", i);
        if (is_named(explaining, permit->zones[i].clause))
            print_values(permit, part);
    }
    for (uint32_t i = 0; i < permit->n_clearances; i++) {
        snprintf(part, sizeof part, "clearances[%u]", i);
        if (is_named(explaining, permit->clearances[i].clause))
            print_values(permit, part);
    }
    if (explaining->n_clauses > 0)
        print_values(permit, "decisions");
}

static void print_permit(struct explaining *explaining)
{
    struct entries entries = {0};
    struct recorded *recorded = NULL;
    char problem[RECORDED_PROBLEM_SIZE];
    ask(explaining, "SELECT body FROM entry WHERE kind = 'run' AND seq <= ?1 + 0 ORDER BY seq DESC LIMIT 1",
        explaining->seq, take_body, &entries.run);
    ask(explaining,
        "SELECT body FROM entry WHERE kind = 'permit' AND seq <= ?1 + 0 ORDER BY seq DESC LIMIT 1",
        explaining->seq, take_body, &entries.permit);
    enum status status = STATUS_NOT_FOUND;
    if (entries.run && entries.permit)
        status = recorded_load(entries.run, entries.permit, NULL, &recorded, problem);
    if (status == STATUS_OK) {
        printf("\nUnder the permit %s, %s:\n", recorded->rules->permit.id, recorded->rules->permit.title);
        print_parts(explaining, &recorded->rules->permit);
    } else
        printf("\nThe permit's values cannot be shown: the ledger does not hold them.\n");
    recorded_destroy(recorded);
    free(entries.run);
    free(entries.permit);
}

/* ---- the verb */

static enum status take_example(void *context, int n, const char *const *columns)
{
    (void)context;
    (void)n;
    fprintf(stderr, "  %s\n", columns[0] ? columns[0] : "");
    return STATUS_OK;
}

static int say_unknown(struct explaining *explaining, const char *id)
{
    fprintf(
        stderr,
        "hushwatch explain: %s: has no entry \"%s\"\nAn id is run.stream.kind.counter, like 1.0.advice.7; "
        "stream 0 is the watch itself. The last of each kind here:\n",
        explaining->path, id);
    ask(explaining,
        "SELECT json_extract(body, '$.id') FROM entry WHERE ?1 <> '' AND seq IN (SELECT max(seq) FROM entry "
        "GROUP BY "
        "kind) ORDER BY kind",
        "x", take_example, NULL);
    return VERB_WRONG_USE;
}

static const char *take_option(void *context, int option, const char *value)
{
    struct explaining *explaining = context;
    char *end;
    (void)option;
    explaining->depth = strtol(value, &end, 10);
    return *value < '0' || *value > '9' || *end != '\0' || explaining->depth > MAX_DEPTH
               ? "--depth is not a number from 0 to 50: "
               : NULL;
}

static int explain(struct explaining *explaining, const char *id)
{
    print_entry(explaining, id, 0);
    if (explaining->status == STATUS_OK && !explaining->found)
        return say_unknown(explaining, id);
    if (explaining->status == STATUS_OK && explaining->n_clauses > 0)
        print_permit(explaining);
    if (explaining->status == STATUS_OK)
        return VERB_GOOD;
    fprintf(stderr, "hushwatch explain: %s: could not be read: %s\n", explaining->path,
            status_text(explaining->status));
    return VERB_SYSTEM;
}

int verb_explain(int argc, char **argv)
{
    static const struct option known[] = {
        {"depth", required_argument, NULL, 'd'}, {"help", no_argument, NULL, 'h'}, {NULL, 0, NULL, 0}};
    struct explaining *explaining = calloc(1, sizeof *explaining);
    char problem[LEDGER_PROBLEM_SIZE];
    int rest, code = VERB_SYSTEM;
    if (!explaining)
        return code;
    explaining->depth = DEFAULT_DEPTH;
    code = options_read(&(struct options_reading){"explain", help, known, take_option, explaining}, argc,
                        argv, &rest);
    if (code == VERB_GOOD && argc - rest != 2)
        code = options_wrong_use("explain", "a LEDGER and an ID are needed", "");
    if (code == VERB_GOOD) {
        explaining->path = argv[rest];
        enum status status = ledger_open(explaining->path, LEDGER_READ, &explaining->ledger, problem);
        if (status == STATUS_OK) {
            code = explain(explaining, argv[rest + 1]);
            ledger_close(explaining->ledger);
        } else {
            fprintf(stderr, "hushwatch explain: %s\n", problem);
            code = status == STATUS_NOT_FOUND ? VERB_WRONG_USE : VERB_SYSTEM;
        }
    }
    free(explaining);
    return code == OPTIONS_ASKED_HELP ? VERB_GOOD : code;
}
