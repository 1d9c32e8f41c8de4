/* Families of lines: what stands at whole multiples of one frequency belongs together. For lib/call/lines*.c
 * only. */
#ifndef CALL_LINES_FAMILY_H
#define CALL_LINES_FAMILY_H

#include "call/others.h"
#include <stdbool.h>
#include <stdint.h>

#define LINES_MOST 48 /* of one period */
#define LINES_PERIOD_S 2.0

struct line {
    double hz, ratio, power;
    uint32_t bin, age;
    bool same; /* on both channels */
};

/* The class of one of the n lines that lets least through, by its frequency or by the family that it is of;
 * n_classes where none has it. */
uint32_t family_class(const struct other_setup *setup, const struct line *all, uint32_t n,
                      const struct line *line, double bin_hz);
/* What two thirds of a family's power are, all of it is: weak lines are not told well, and at some
 * frequencies any two hydrophones hear a sound in phase. At most LINES_MOST. */
void family_agree(struct line *all, uint32_t n, double bin_hz);

#endif
