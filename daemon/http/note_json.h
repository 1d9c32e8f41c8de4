/* From the body of a request to a note: one JSON object of texts, numbers and flags. */
#ifndef HTTP_NOTE_JSON_H
#define HTTP_NOTE_JSON_H

#include "base/status.h"
#include "rule/mark_line.h"
#include "rule/note.h"
#include <stddef.h>

/* A body may have the member `line` beside a note's fields: one typed line of rule/mark_line.h. */

/* Why a body is no note, for the person who sent it. */
struct note_refusal {
    char error[MARK_LINE_SENTENCE_SIZE];
    char field[64];      /* empty where no field is to blame */
    const char *allowed; /* static; "" where there is nothing to say */
};

/* STATUS_OK: *out is a complete note by note_check; else the refusal says why. */
enum status note_from_json(const char *body, size_t length, struct note *out, struct note_refusal *refusal);

#endif
