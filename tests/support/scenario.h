/* Plays a scenario file against the watch: given, what happens, what must follow. docs/watch.md describes the
 * form. */
#ifndef SUPPORT_SCENARIO_H
#define SUPPORT_SCENARIO_H

#include "rule/permit.h"
#include <stdbool.h>
#include <stddef.h>

/* The title line of the file, and the id of the permit that it names. False when it has none. */
bool scenario_head(const char *path, char *title, size_t title_size, char *permit, size_t permit_size);

/* Plays the file. False after writing what went wrong, with file and line, into `problem`. With writes_all
 * each outcome is printed as a line of the form. The outcomes are counted into *out_outcomes. */
bool scenario_play(const char *path, const struct permit *permit, bool writes_all, unsigned *out_outcomes,
                   char *problem, size_t problem_size);

#endif
