/* Strips of sound as JSON, with the columns in base64 (RFC 4648). */
#ifndef HTTP_SOUND_H
#define HTTP_SOUND_H

#include "base/status.h"
#include "base/text.h"
#include "http/columns.h"

#define SOUND_MAX_COLUMNS 1200 /* a band and answer: 5 min at 4 a second */

/* All bands of a stream that have columns, from_ns < begin <= to_ns, the newest SOUND_MAX_COLUMNS.
 * STATUS_NO_MEMORY. */
enum status sound_json(struct text *text, struct columns *columns, uint32_t stream, int64_t from_ns,
                       int64_t to_ns);

#endif
