/* How sure a number taken from a document is: every value of a permit or a criterion carries one. */
#ifndef BASE_MARK_H
#define BASE_MARK_H

#include <stdbool.h>

enum value_mark {
    MARK_READ,
    MARK_SECONDARY,
    MARK_MEMORY_HIGH,
    MARK_MEMORY_MEDIUM,
    MARK_MEMORY_LOW,
    MARK_INVENTED,
    MARK_COUNT
};

/* "read", "secondary", "memory, high", "memory, medium", "memory, low", "invented"; never NULL. */
const char *mark_text(enum value_mark mark);

/* Whether people must check the value against the document before they rely on it: it was not read there. */
bool mark_unverified(enum value_mark mark);

#endif
