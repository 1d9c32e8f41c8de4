/* Small things that the daemon reads whole. */
#ifndef FILES_H
#define FILES_H

#include "base/status.h"
#include "base/text.h"

/* Appends a file's text; STATUS_NOT_FOUND, STATUS_SYSTEM, STATUS_BAD_FORMAT when it holds a zero byte. */
enum status files_read(const char *path, struct text *out);
/* The program's own digest (SHA-256 of its file, lower-case hex; "unknown" where it cannot be read). */
void files_build_id(char out[65]);
/* The processor's name, or "unknown". */
void files_cpu_name(char *out, size_t size);

#endif
