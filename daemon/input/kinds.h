/* Every kind of input, one line each: NAME is defined in NAME.c as input_NAME. */
#ifndef INPUT_KINDS_H
#define INPUT_KINDS_H

#include "input/input.h"

#define INPUT_KINDS(KIND)                                                                                    \
    KIND(device)                                                                                             \
    KIND(recording)                                                                                          \
    KIND(pcm)                                                                                                \
    KIND(scene)

#define INPUT_DECLARE(name) extern const struct input_kind input_##name;
INPUT_KINDS(INPUT_DECLARE)
#undef INPUT_DECLARE

#endif
