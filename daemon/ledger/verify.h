/* Whether a ledger is what its hashes say: what `hushwatch verify` prints and a report states. */
#ifndef LEDGER_VERIFY_H
#define LEDGER_VERIFY_H

#include "ledger/ledger.h"

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

#endif
