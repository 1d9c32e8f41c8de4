/* Writes outcomes down as entries and derives them again from the entries alone, as a rerun does: what a
 * ledger would hold must give the same again, to the byte. */
#ifndef SUPPORT_AGAIN_H
#define SUPPORT_AGAIN_H

#include "flow.h"
#include "rule/watch.h"
#include <stdbool.h>
#include <stddef.h>

struct again;

struct again *again_create(void);
void again_destroy(struct again *again);
/* In the order in which the watch gives them. */
void again_take(struct again *again, const struct outcome *outcome);
/* A new watch takes the inputs among them. False, with a sentence, where anything is not the same. */
bool again_same(const struct again *again, const struct watch_setup *setup, bool has_clock,
                int64_t zero_unix_ns, char *problem, size_t problem_size);

#endif
