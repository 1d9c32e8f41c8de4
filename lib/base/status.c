/* Texts of the status enum. */
#include "base/status.h"

const char *status_text(enum status status)
{
    switch (status) {
    case STATUS_OK:
        return "ok";
    case STATUS_BAD_ARGUMENT:
        return "bad argument";
    case STATUS_NO_MEMORY:
        return "out of memory";
    case STATUS_BAD_FORMAT:
        return "not in the expected form";
    case STATUS_OUT_OF_RANGE:
        return "value out of range";
    case STATUS_NOT_FOUND:
        return "not found";
    case STATUS_EXISTS:
        return "exists already";
    case STATUS_BUSY:
        return "in use by another";
    case STATUS_FULL:
        return "no room left";
    case STATUS_END:
        return "at the end";
    case STATUS_TIMEOUT:
        return "timed out";
    case STATUS_MISMATCH:
        return "does not match";
    case STATUS_SYSTEM:
        return "the system refused";
    case STATUS_BUG:
        return "internal error";
    }
    return "unknown status";
}
