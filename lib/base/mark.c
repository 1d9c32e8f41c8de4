/* Marks: see mark.h. */
#include "base/mark.h"

const char *mark_text(enum value_mark mark)
{
    static const char *const words[MARK_COUNT] = {"read",           "secondary",   "memory, high",
                                                  "memory, medium", "memory, low", "invented",
                                                  "to be filled",   "filled"};
    return (unsigned)mark < MARK_COUNT ? words[mark] : "";
}

bool mark_unverified(enum value_mark mark)
{
    return mark != MARK_READ && mark != MARK_FILLED;
}
