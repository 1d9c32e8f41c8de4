/* Says all the time whether a ledger is as it was written: verifies it in pieces on a thread of low priority,
 * follows what is added, and begins again when it was long ago or somebody else wrote into the file. Works
 * only while somebody looks. */
#ifndef LEDGER_CHECKER_H
#define LEDGER_CHECKER_H

#include "base/status.h"
#include "ledger/verify.h"
#include <stdint.h>

#define CHECKER_MAX_FAULTS 20
#define CHECKER_SENTENCE_SIZE 160

enum checker_state {
    CHECKER_CHECKING,  /* the first pass is not through, and no fault was found so far */
    CHECKER_GOOD,      /* everything up to facts.n_entries */
    CHECKER_FAULTS,    /* at least one was found */
    CHECKER_UNREADABLE /* see problem */
};

struct checker_view {
    enum checker_state state;
    struct verify_facts facts; /* of the last pass that was through; of the first one so far */
    int64_t last_seq;          /* of the ledger as it stands */
    int64_t checked_unix_ns;   /* when its end was last reached; 0: not yet */
    uint32_t n_faults;         /* the first ones */
    struct {
        int64_t seq; /* 0: of no entry */
        char sentence[CHECKER_SENTENCE_SIZE];
    } faults[CHECKER_MAX_FAULTS];
    char problem[LEDGER_PROBLEM_SIZE];
};

struct checker;

/* path is copied. STATUS_NO_MEMORY; STATUS_SYSTEM no thread. The caller owns *out. */
enum status checker_create(const char *path, struct checker **out);
void checker_destroy(struct checker *checker); /* takes NULL */

/* What is known now; somebody looks. Any thread, at once. */
void checker_get(struct checker *checker, struct checker_view *out);

#endif
