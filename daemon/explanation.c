/* What is behind an entry; see explanation.h. */
#include "explanation.h"
#include "base/text.h"
#include "explanation_words.h"
#include "record/views.h"
#include "recorded.h"
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define MAX_CAUSES 24
#define MAX_CLAUSES 64
#define ENTRY "FROM entry WHERE " VIEWS_ID_SQL " = ?1"

struct explaining {
    struct explanation_setup setup;
    uint32_t n_shown, n_clauses;
    char shown[EXPLANATION_MAX_ENTRIES][FLOW_ID_SIZE];
    char clauses[MAX_CLAUSES][FLOW_TEXT_SIZE];
    char seq[24]; /* of the entry that was asked for; "" before it is found */
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
    enum status status = ledger_select(explaining->setup.ledger, sql, 1, &id, take, context);
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
        "1 AND other.utc = contact.utc AND other.kind IN ('call', 'note') AND json_valid(other.body)"};
    causes->n = 0;
    for (size_t i = 0; i < sizeof questions / sizeof questions[0]; i++)
        ask(explaining, questions[i], id, take_cause, causes);
}

static bool was_shown(struct explaining *explaining, const char *id)
{
    for (uint32_t i = 0; i < explaining->n_shown; i++)
        if (strcmp(explaining->shown[i], id) == 0)
            return true;
    if (explaining->n_shown < EXPLANATION_MAX_ENTRIES)
        snprintf(explaining->shown[explaining->n_shown++], FLOW_ID_SIZE, "%s", id);
    return false;
}

static void keep_clause(struct explaining *explaining, const char *clause)
{
    if (!*clause || explaining->n_clauses == MAX_CLAUSES)
        return;
    snprintf(explaining->clauses[explaining->n_clauses++], FLOW_TEXT_SIZE, "%s", clause);
}

static void find_words(struct explaining *explaining, const char *id, const char *kind, struct text *words)
{
    struct text sql = {0};
    text_append(&sql, "SELECT ");
    explanation_words(kind, &sql);
    text_append(&sql, " " ENTRY);
    text_append(words, "");
    if (sql.failed)
        explaining->status = STATUS_NO_MEMORY;
    else
        ask(explaining, sql.data, id, take_words, words);
    text_destroy(&sql);
}

static void give_entry(struct explaining *explaining, const char *id, uint32_t level)
{
    struct row row = {0};
    struct causes causes = {0};
    struct text words = {0};
    ask(explaining, "SELECT seq, utc, kind, json_extract(body, '$.clause') " ENTRY, id, take_row, &row);
    if (level == 0 && (!row.found || explaining->status != STATUS_OK))
        return;
    struct explained explained = {.id = id, .level = level, .found = row.found, .kind = row.kind};
    if (level == 0)
        memcpy(explaining->seq, row.seq, sizeof explaining->seq);
    explained.above = row.found && was_shown(explaining, id);
    if (row.found && !explained.above) {
        find_words(explaining, id, row.kind, &words);
        keep_clause(explaining, row.clause);
        find_causes(explaining, id, &causes);
        explained.utc = row.utc;
        explained.clause = row.clause;
        explained.words = words.failed ? "" : words.data;
        explained.n_behind = level >= explaining->setup.depth ? causes.n : 0;
    }
    explaining->setup.entry(explaining->setup.context, &explained);
    text_destroy(&words);
    for (uint32_t i = 0; i < causes.n && level < explaining->setup.depth && explaining->status == STATUS_OK;
         i++)
        give_entry(explaining, causes.ids[i], level + 1);
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

static void give_values(const struct explaining *explaining, const struct permit *permit, const char *part)
{
    size_t length = strlen(part);
    for (uint32_t i = 0; i < permit->n_values; i++) {
        const struct permit_value *value = &permit->values[i];
        if (strncmp(value->key, part, length) == 0 && strchr(".\0", value->key[length]))
            explaining->setup.value(explaining->setup.context, value);
    }
}

static void give_parts(const struct explaining *explaining, const struct permit *permit)
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
            give_values(explaining, permit, parts[i].part);
    for (uint32_t i = 0; i < permit->n_zones; i++) {
        snprintf(part, sizeof part, "zones[%u]", i);
        if (is_named(explaining, permit->zones[i].clause))
            give_values(explaining, permit, part);
    }
    for (uint32_t i = 0; i < permit->n_clearances; i++) {
        snprintf(part, sizeof part, "clearances[%u]", i);
        if (is_named(explaining, permit->clearances[i].clause))
            give_values(explaining, permit, part);
    }
    if (explaining->n_clauses > 0)
        give_values(explaining, permit, "decisions");
}

static void give_permit(struct explaining *explaining)
{
    struct entries entries = {0};
    struct recorded *recorded = NULL;
    char problem[RECORDED_PROBLEM_SIZE];
    ask(explaining, "SELECT body FROM entry WHERE kind = 'run' AND seq <= ?1 + 0 ORDER BY seq DESC LIMIT 1",
        explaining->seq, take_body, &entries.run);
    ask(explaining,
        "SELECT body FROM entry WHERE kind = 'permit' AND seq <= ?1 + 0 ORDER BY seq DESC LIMIT 1",
        explaining->seq, take_body, &entries.permit);
    if (entries.run && entries.permit &&
        recorded_load(entries.run, entries.permit, NULL, &recorded, problem) != STATUS_OK)
        recorded = NULL;
    explaining->setup.permit(explaining->setup.context, recorded ? &recorded->rules->permit : NULL);
    if (recorded)
        give_parts(explaining, &recorded->rules->permit);
    recorded_destroy(recorded);
    free(entries.run);
    free(entries.permit);
}

enum status explanation_run(const struct explanation_setup *setup, const char *id)
{
    struct explaining *explaining = calloc(1, sizeof *explaining);
    if (!explaining)
        return STATUS_NO_MEMORY;
    explaining->setup = *setup;
    give_entry(explaining, id, 0);
    enum status status = explaining->status;
    if (status == STATUS_OK && !*explaining->seq)
        status = STATUS_NOT_FOUND;
    if (status == STATUS_OK && explaining->n_clauses > 0) {
        give_permit(explaining);
        status = explaining->status;
    }
    free(explaining);
    return status;
}
