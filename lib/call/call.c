/* Names of the groups. */
#include "call/call.h"
#include <string.h>

static const char *const group_names[GROUP_COUNT] = {
    [GROUP_UNKNOWN] = "unknown",         [GROUP_BALEEN_WHALE] = "baleen whale",
    [GROUP_SPERM_WHALE] = "sperm whale", [GROUP_BEAKED_WHALE] = "beaked whale",
    [GROUP_DELPHINID] = "delphinid",     [GROUP_PORPOISE] = "porpoise",
    [GROUP_PHOCID] = "phocid",           [GROUP_OTARIID] = "otariid",
    [GROUP_SIRENIAN] = "sirenian",       [GROUP_SEA_OTTER] = "sea otter",
    [GROUP_TURTLE] = "turtle",
};

const char *group_text(enum group group)
{
    return (unsigned)group < GROUP_COUNT ? group_names[group] : "unknown";
}

bool group_from_text(const char *text, enum group *out)
{
    for (unsigned i = 0; i < GROUP_COUNT; i++)
        if (strcmp(text, group_names[i]) == 0) {
            *out = (enum group)i;
            return true;
        }
    return false;
}
