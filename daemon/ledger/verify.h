/* Whether a ledger is what its hashes say: what `hushwatch verify` prints, a report and the review state. */
#ifndef LEDGER_VERIFY_H
#define LEDGER_VERIFY_H

#include "ledger/ledger.h"
#include <stdbool.h>

struct verify_facts {
    int64_t n_entries;
    uint64_t n_faults;
    char first_utc[32], last_utc[32];
    char last_hash[ENTRY_HASH_SIZE]; /* fixes everything before it */
};

/* Checks order, hashes, the form of every entry, ids, the schema and SQLite's own structure; calls fault
 * (which may be NULL) once for each, seq 0 where it is of no entry. STATUS_OK; STATUS_MISMATCH when there was
 * a fault; another status when it could not be read to the end. */
enum status ledger_verify(struct ledger *ledger,
                          void (*fault)(void *context, int64_t seq, const char *sentence), void *context,
                          struct verify_facts *out);

/* The same piece by piece, so that a long ledger is never read in one go and one that grows is followed. */
struct verifier;

/* STATUS_NO_MEMORY. The caller owns *out. */
enum status verifier_create(void (*fault)(void *context, int64_t seq, const char *sentence), void *context,
                            struct verifier **out);
void verifier_destroy(struct verifier *verifier);

/* Checks schema and structure the first time, and the next max_entries entries (0: all). *out_more: there
 * were as many, and may be more. STATUS_OK, faults or not; another status when the ledger could not be read.
 */
enum status verifier_step(struct verifier *verifier, struct ledger *ledger, uint32_t max_entries,
                          bool *out_more);

/* What is known so far. */
void verifier_get_facts(const struct verifier *verifier, struct verify_facts *out);

#endif
