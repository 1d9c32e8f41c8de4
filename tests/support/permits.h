/* The shipped permits with invented values where they leave some to be filled, for tests. */
#ifndef SUPPORT_PERMITS_H
#define SUPPORT_PERMITS_H

#include "settings/permit.h"
#include <stdbool.h>

#define TEST_MAX_PERMITS 64

/* The ids of config/permits in alphabetical order without the demonstration's; returns how many. */
unsigned test_list_permits(char ids[TEST_MAX_PERMITS][PERMIT_NAME_SIZE]);

/* What tests/support/permit-values.cfg states for a permit; n = 0 where it states nothing. Prints what is
 * wrong with the file and gives false. */
bool test_permit_fills(const char *id, struct permit_fills *out);

/* Loads config/permits/ID.cfg with those values; prints what is wrong and gives false where it cannot. */
bool test_load_permit(const char *id, struct permit *out);

/* Fails the test where the value of that key has another text or another mark, or there is none. */
void test_permit_states(const struct permit *permit, const char *key, const char *text, enum value_mark mark);

#endif
