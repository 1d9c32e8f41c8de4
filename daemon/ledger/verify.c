/* One pass over the entries, then what only SQL can tell. */
#include "ledger/verify.h"
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct verification {
    void (*fault)(void *context, int64_t seq, const char *sentence);
    void *context;
    struct verify_facts facts;
    int64_t seq;                /* of the entry before */
    char hash[ENTRY_HASH_SIZE]; /* that the next one must follow */
    char sentence[LEDGER_PROBLEM_SIZE];
    const char *format; /* of the SQL check that runs */
};

static void found(struct verification *verification, int64_t seq, const char *sentence)
{
    verification->facts.n_faults++;
    if (verification->fault)
        verification->fault(verification->context, seq, sentence);
}

static void found_missing(struct verification *verification, int64_t seq)
{
    int64_t first = verification->seq + 1;
    if (seq - first == 1)
        snprintf(verification->sentence, sizeof verification->sentence, "is missing");
    else
        snprintf(verification->sentence, sizeof verification->sentence,
                 "and the %" PRId64 " after it are missing", seq - first - 1);
    found(verification, first, verification->sentence);
}

static enum status check_entry(void *context, const struct entry *entry)
{
    struct verification *verification = context;
    struct verify_facts *facts = &verification->facts;
    char hash[ENTRY_HASH_SIZE], sentence[ENTRY_SENTENCE_SIZE];
    if (entry->seq != verification->seq + 1)
        found_missing(verification, entry->seq);
    entry_hash(verification->hash, entry->seq, entry->utc, entry->kind, entry->body, hash);
    if (strcmp(hash, entry->hash) != 0)
        found(verification, entry->seq,
              "its hash is not that of itself after the entry before it: one of them was changed, added, "
              "moved, or one "
              "between them removed");
    enum status status = entry_check(entry, sentence);
    if (status == STATUS_BAD_FORMAT)
        found(verification, entry->seq, sentence);
    else if (status != STATUS_OK)
        return status;
    if (facts->n_entries++ == 0)
        snprintf(facts->first_utc, sizeof facts->first_utc, "%s", entry->utc);
    snprintf(facts->last_utc, sizeof facts->last_utc, "%s", entry->utc);
    verification->seq = entry->seq;
    /* The stored hash goes on, so that one change is one fault and not one for every later entry. */
    snprintf(verification->hash, sizeof verification->hash, "%s", entry->hash);
    memcpy(facts->last_hash, verification->hash, sizeof facts->last_hash);
    return STATUS_OK;
}

static enum status take_row(void *context, int n, const char *const *columns)
{
    struct verification *verification = context;
    (void)n;
    found(verification, columns[0] ? strtoll(columns[0], NULL, 10) : 0, verification->format);
    return STATUS_OK;
}

/* What a pass over texts does not see: values that are no texts, bytes behind a zero, an id used twice, a seq
 * of 0 or less. */
static enum status check_by_sql(struct verification *verification, struct ledger *ledger)
{
    static const char *const checks[][2] = {
        {"SELECT seq FROM entry WHERE typeof(utc) <> 'text' OR typeof(kind) <> 'text' OR typeof(body) <> "
         "'text' OR "
         "typeof(hash) <> 'text' OR instr(utc || kind || body || hash, char(0)) > 0",
         "holds something else than plain text"},
        {"SELECT seq FROM entry WHERE seq < 1", "its number is not allowed"},
        {"SELECT max(seq) FROM entry GROUP BY CASE WHEN json_valid(body) THEN json_extract(body, '$.id') END "
         "HAVING count(*) > 1",
         "its id is that of an earlier entry"}};
    for (size_t i = 0; i < sizeof checks / sizeof checks[0]; i++) {
        verification->format = checks[i][1];
        enum status status = ledger_select(ledger, checks[i][0], 0, NULL, take_row, verification);
        if (status != STATUS_OK)
            return status;
    }
    return STATUS_OK;
}

static void schema_fault(void *context, const char *sentence)
{
    found(context, 0, sentence);
}

enum status ledger_verify(struct ledger *ledger,
                          void (*fault)(void *context, int64_t seq, const char *sentence), void *context,
                          struct verify_facts *out)
{
    struct verification verification = {.fault = fault, .context = context};
    memset(verification.hash, '0', ENTRY_HASH_SIZE - 1);
    memcpy(verification.facts.last_hash, verification.hash, ENTRY_HASH_SIZE);
    enum status status = ledger_check_schema(ledger, schema_fault, &verification);
    if (status == STATUS_OK || status == STATUS_MISMATCH)
        status = ledger_read(ledger, &(struct ledger_query){0}, check_entry, &verification);
    if (status == STATUS_OK)
        status = check_by_sql(&verification, ledger);
    *out = verification.facts;
    return status == STATUS_OK && verification.facts.n_faults > 0 ? STATUS_MISMATCH : status;
}
