/* The shipped permits with invented values where they leave some to be filled, for tests. */
#ifndef SUPPORT_PERMITS_H
#define SUPPORT_PERMITS_H

#include "settings/permit.h"
#include <stdbool.h>

/* The ids of config/permits in alphabetical order without the demonstration's; NULL after the last. */
extern const char *const test_permit_ids[];

/* What tests/support/permit-values.cfg states for a permit; n = 0 where it states nothing. Prints what is
 * wrong with the file and gives false. */
bool test_permit_fills(const char *id, struct permit_fills *out);

/* Loads config/permits/ID.cfg with those values; prints what is wrong and gives false where it cannot. */
bool test_load_permit(const char *id, struct permit *out);

#endif
