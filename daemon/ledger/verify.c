/* One pass over the entries, piece by piece, and of each piece what only SQL can tell. */
#include "ledger/verify.h"
#include "record/views.h"
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct verifier {
    bool began;
    void (*fault)(void *context, int64_t seq, const char *sentence);
    void *context;
    struct verify_facts facts;
    int64_t seq;                /* of the entry before */
    char hash[ENTRY_HASH_SIZE]; /* that the next one must follow */
    char sentence[LEDGER_PROBLEM_SIZE];
    const char *format; /* of the SQL check that runs */
};

static void found(struct verifier *verifier, int64_t seq, const char *sentence)
{
    verifier->facts.n_faults++;
    if (verifier->fault)
        verifier->fault(verifier->context, seq, sentence);
}

static void found_missing(struct verifier *verifier, int64_t seq)
{
    int64_t first = verifier->seq + 1;
    if (seq - first == 1)
        snprintf(verifier->sentence, sizeof verifier->sentence, "is missing");
    else
        snprintf(verifier->sentence, sizeof verifier->sentence, "and the %" PRId64 " after it are missing",
                 seq - first - 1);
    found(verifier, first, verifier->sentence);
}

static enum status check_entry(void *context, const struct entry *entry)
{
    struct verifier *verifier = context;
    struct verify_facts *facts = &verifier->facts;
    char hash[ENTRY_HASH_SIZE], sentence[ENTRY_SENTENCE_SIZE];
    if (entry->seq != verifier->seq + 1)
        found_missing(verifier, entry->seq);
    entry_hash(verifier->hash, entry->seq, entry->utc, entry->kind, entry->body, hash);
    if (strcmp(hash, entry->hash) != 0)
        found(verifier, entry->seq,
              "its hash is not that of itself after the entry before it: one of them was changed, added, "
              "moved, or one "
              "between them removed");
    enum status status = entry_check(entry, sentence);
    if (status == STATUS_BAD_FORMAT)
        found(verifier, entry->seq, sentence);
    else if (status != STATUS_OK)
        return status;
    if (facts->n_entries++ == 0)
        snprintf(facts->first_utc, sizeof facts->first_utc, "%s", entry->utc);
    snprintf(facts->last_utc, sizeof facts->last_utc, "%s", entry->utc);
    verifier->seq = entry->seq;
    /* The stored hash goes on, so that one change is one fault and not one for every later entry. */
    snprintf(verifier->hash, sizeof verifier->hash, "%s", entry->hash);
    memcpy(facts->last_hash, verifier->hash, sizeof facts->last_hash);
    return STATUS_OK;
}

static enum status take_row(void *context, int n, const char *const *columns)
{
    struct verifier *verifier = context;
    (void)n;
    found(verifier, columns[0] ? strtoll(columns[0], NULL, 10) : 0, verifier->format);
    return STATUS_OK;
}

/* What a pass over texts does not see: values that are no texts, bytes behind a zero, an id used twice, a seq
 * of 0 or less. Of the entries after ?1 up to ?2. */
static enum status check_by_sql(struct verifier *verifier, struct ledger *ledger, int64_t after)
{
    static const char *const checks[][2] = {
        {"SELECT seq FROM entry WHERE seq > ?1 + 0 AND seq <= ?2 + 0 AND (typeof(utc) <> 'text' OR "
         "typeof(kind) <> 'text' OR typeof(body) <> 'text' OR typeof(hash) <> 'text' OR "
         "instr(utc || kind || body || hash, char(0)) > 0)",
         "holds something else than plain text"},
        {"SELECT seq FROM entry WHERE seq < 1 AND ?1 + 0 = 0", "its number is not allowed"},
        {"SELECT this FROM (SELECT seq AS this, " VIEWS_ID_SQL " AS id FROM entry WHERE seq > ?1 + 0 AND "
         "seq <= ?2 + 0) WHERE EXISTS (SELECT 1 FROM entry WHERE " VIEWS_ID_SQL " = id AND seq < this)",
         "its id is that of an earlier entry"}};
    char first[24], last[24];
    const char *range[] = {first, last};
    snprintf(first, sizeof first, "%" PRId64, after);
    snprintf(last, sizeof last, "%" PRId64, verifier->seq);
    for (size_t i = 0; i < sizeof checks / sizeof checks[0]; i++) {
        verifier->format = checks[i][1];
        enum status status = ledger_select(ledger, checks[i][0], 2, range, take_row, verifier);
        if (status != STATUS_OK)
            return status;
    }
    return STATUS_OK;
}

static void schema_fault(void *context, const char *sentence)
{
    found(context, 0, sentence);
}

enum status verifier_create(void (*fault)(void *context, int64_t seq, const char *sentence), void *context,
                            struct verifier **out)
{
    struct verifier *verifier = calloc(1, sizeof *verifier);
    if (!verifier)
        return STATUS_NO_MEMORY;
    verifier->fault = fault;
    verifier->context = context;
    memset(verifier->hash, '0', ENTRY_HASH_SIZE - 1);
    memcpy(verifier->facts.last_hash, verifier->hash, ENTRY_HASH_SIZE);
    *out = verifier;
    return STATUS_OK;
}

void verifier_destroy(struct verifier *verifier)
{
    free(verifier);
}

enum status verifier_step(struct verifier *verifier, struct ledger *ledger, uint32_t max_entries,
                          bool *out_more)
{
    enum status status = verifier->began ? STATUS_OK : ledger_check_schema(ledger, schema_fault, verifier);
    if (status != STATUS_OK && status != STATUS_MISMATCH)
        return status;
    bool first = !verifier->began;
    int64_t after = verifier->seq, n = verifier->facts.n_entries;
    verifier->began = true;
    const struct ledger_query query = {.after_seq = after, .limit = max_entries};
    status = ledger_read(ledger, &query, check_entry, verifier);
    n = verifier->facts.n_entries - n;
    *out_more = max_entries > 0 && n >= max_entries;
    return status == STATUS_OK && (n > 0 || first) ? check_by_sql(verifier, ledger, after) : status;
}

void verifier_get_facts(const struct verifier *verifier, struct verify_facts *out)
{
    *out = verifier->facts;
}

enum status ledger_verify(struct ledger *ledger,
                          void (*fault)(void *context, int64_t seq, const char *sentence), void *context,
                          struct verify_facts *out)
{
    struct verifier *verifier;
    bool more;
    enum status status = verifier_create(fault, context, &verifier);
    if (status != STATUS_OK)
        return status;
    status = verifier_step(verifier, ledger, 0, &more);
    *out = verifier->facts;
    verifier_destroy(verifier);
    return status == STATUS_OK && out->n_faults > 0 ? STATUS_MISMATCH : status;
}
