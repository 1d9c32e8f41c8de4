/* Loads a permit from its file in config/permits. */
#ifndef SETTINGS_PERMIT_H
#define SETTINGS_PERMIT_H

#include "base/status.h"
#include "rule/permit.h"
#include "settings/reader.h"

/* Reads the permit of `path` and adds all its problems, those of the file with their lines and those of
 * permit_check. STATUS_BAD_FORMAT when any was added, STATUS_NOT_FOUND, STATUS_NO_MEMORY; *out is then
 * untouched. Every value of the file is a group { value; mark; source } and is kept in out->values; one that
 * rests on a low-confidence memory is refused. docs/permits.md describes the form. */
enum status permit_load(const char *path, struct problems *problems, struct permit *out);

#endif
