/* Loads a permit from its file in config/permits. */
#ifndef SETTINGS_PERMIT_H
#define SETTINGS_PERMIT_H

#include "base/status.h"
#include "rule/permit.h"
#include "settings/reader.h"

#define PERMIT_MAX_FILLS 48

/* A value that the site's settings state in place of the permit file's. */
struct permit_fill {
    char key[PERMIT_NAME_SIZE];  /* "zones[0].radius_m" */
    char text[PERMIT_TEXT_SIZE]; /* a number, true or false, a word, or names joined by ", " */
    char who[PERMIT_NAME_SIZE];
    char source[PERMIT_TEXT_SIZE];
    char where[PERMIT_TEXT_SIZE]; /* file and line that state it, for messages; may be empty */
};

struct permit_fills {
    uint32_t n;
    struct permit_fill fills[PERMIT_MAX_FILLS];
};

/* Reads the block permit_values = ( { key; value; who; source }, ... ) of the settings; it may be absent. */
void permit_read_fills(struct group_reader *settings, struct permit_fills *out);

/* Reads the permit of `path` and adds all its problems, those of the file with their lines and those of
 * permit_check. STATUS_BAD_FORMAT when any was added, STATUS_NOT_FOUND, STATUS_NO_MEMORY; *out is then
 * untouched. Every value of the file is a group { value; mark; source } and is kept in out->values; one that
 * is 'to be filled', or rests on a low-confidence memory, is refused unless `fills` (may be NULL) states it.
 * docs/permits.md describes the form. */
enum status permit_load(const char *path, const struct permit_fills *fills, struct problems *problems,
                        struct permit *out);

/* The same from the file's text, as a ledger keeps it; `name` is for messages. */
enum status permit_load_text(const char *name, const char *text, const struct permit_fills *fills,
                             struct problems *problems, struct permit *out);

#endif
