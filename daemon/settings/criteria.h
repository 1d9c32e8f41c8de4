/* Loads a set of criteria from its file in config/criteria. docs/criteria.md lists the keys. */
#ifndef SETTINGS_CRITERIA_H
#define SETTINGS_CRITERIA_H

#include "base/status.h"
#include "base/text.h"
#include "level/criterion.h"
#include "settings/reader.h"

/* Reads the set of `path` and adds it to *criteria (start with {0}). Adds a line to `problems` for everything
 * that is wrong: file, line, key, what is allowed; a missing weighting, unit, metric, reference, mark or
 * source among it, and a set whose id is there already. `effective` (may be NULL) gets every setting with its
 * value. STATUS_BAD_FORMAT when any problem was added, STATUS_NOT_FOUND, STATUS_NO_MEMORY; *criteria is
 * untouched then. */
enum status criteria_load(const char *path, struct problems *problems, struct text *effective,
                          struct criteria *criteria);
/* The same from effective settings; `length` bytes of text, without the line that names the file. */
enum status criteria_load_effective(const char *name, const char *text, size_t length,
                                    struct problems *problems, struct text *effective,
                                    struct criteria *criteria);

#endif
