/* The chain of entries behind any entry, and the values of the permit under their clauses: what `hushwatch
 * explain` prints and the review page shows. */
#ifndef EXPLANATION_H
#define EXPLANATION_H

#include "base/status.h"
#include "ledger/ledger.h"
#include "rule/permit.h"
#include <stdbool.h>
#include <stdint.h>

#define EXPLANATION_DEPTH 6
#define EXPLANATION_MAX_DEPTH 50
#define EXPLANATION_MAX_ENTRIES 400

/* One entry of the chain; texts are borrowed for the call. */
struct explained {
    const char *id;
    uint32_t level; /* 0: the one that was asked for; those behind it follow with one more */
    bool found;     /* false: it is named, and the ledger does not have it */
    bool above;     /* it was given before; its causes are not given again */
    const char *utc, *kind, *words, *clause; /* "" where there are none; of one that is found and not above */
    uint32_t n_behind;                       /* entries behind it that the depth leaves out */
};

struct explanation_setup {
    struct ledger *ledger; /* borrowed */
    uint32_t depth;        /* how far back; 0: the entry alone */
    void (*entry)(void *context, const struct explained *explained);
    /* Once, where a clause was named: the permit in force, NULL where the ledger does not hold it. Then each
     * of its values that stands under those clauses. */
    void (*permit)(void *context, const struct permit *permit);
    void (*value)(void *context, const struct permit_value *value);
    void *context;
};

/* STATUS_NOT_FOUND: there is no such entry (nothing was called); STATUS_NO_MEMORY; others as ledger_select.
 */
enum status explanation_run(const struct explanation_setup *setup, const char *id);

#endif
