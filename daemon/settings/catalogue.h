/* Loads the call catalogue: a folder of *.cfg files, one call class each, and what their certainty rests on.
 */
#ifndef SETTINGS_CATALOGUE_H
#define SETTINGS_CATALOGUE_H

#include "base/status.h"
#include "base/text.h"
#include "call/catalogue.h"
#include "settings/reader.h"

/* Weights of what is measured of calls, and grades of contacts; where it is absent the measures say nothing
 * and the grades are 1, 3 and 180 s. */
#define CATALOGUE_CERTAINTY_FILE "certainty.cfg"

/* Reads every *.cfg of the folder in the byte order of the file names; a class's index is its place in that
 * order. Adds a line to `problems` for everything that is wrong (file, line, key, what is allowed), a name
 * that two files give among it. `effective` (may be NULL) gets every setting with its value, after a line
 * with the file's name. STATUS_NOT_FOUND when the folder cannot be read or has no class, STATUS_BAD_FORMAT
 * when any problem was added, STATUS_NO_MEMORY; *out is untouched then. */
enum status catalogue_load(const char *folder, struct problems *problems, struct text *effective,
                           struct catalogue *out);

#endif
