/* The table of inputs. */
#include "input/input.h"
#include "input/kinds.h"
#include <string.h>

#define POINTER(name) &input_##name,
const struct input_kind *const input_kinds[] = {INPUT_KINDS(POINTER) NULL};

const struct input_kind *input_find(const char *name)
{
    for (const struct input_kind *const *kind = input_kinds; *kind; kind++)
        if (strcmp((*kind)->name, name) == 0)
            return *kind;
    return NULL;
}
