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
    MARK_TO_BE_FILLED, /* the document leaves it to the project, or nobody has read it: the site must say it */
    MARK_FILLED,       /* the site's settings say it, and who says so */
    MARK_COUNT
};

/* "read", "secondary", "memory, high", "memory, medium", "memory, low", "invented", "to be filled", "filled";
 * never NULL. */
const char *mark_text(enum value_mark mark);

/* Whether people must check the value against the document before they rely on it: it was neither read there
 * nor stated by the site. */
bool mark_unverified(enum value_mark mark);

#endif
