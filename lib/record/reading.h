/* A parsed body, read strictly. For lib/record only. */
#ifndef RECORD_READING_H
#define RECORD_READING_H

#include "base/status.h"
#include <jansson.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* The first thing that is wrong makes it not good, and the rest is then skipped. */
struct reading {
    json_t *root;
    bool good;
};

/* STATUS_BAD_FORMAT, STATUS_NO_MEMORY; else the caller calls reading_end. */
enum status reading_begin(const char *body, struct reading *out);
/* STATUS_BAD_FORMAT when something was wrong. */
enum status reading_end(struct reading *reading);
json_t *reading_member(struct reading *reading, const char *key, bool required);
void reading_text(struct reading *reading, const char *key, bool required, char *out, size_t size);
double reading_number(struct reading *reading, const char *key, bool required, double if_null);
uint32_t reading_count(struct reading *reading, const char *key, bool required);
bool reading_bool(struct reading *reading, const char *key, bool required);
/* "run.stream.kind.counter" of the expected kind. */
void reading_id(struct reading *reading, const char *kind, uint32_t *out_run, uint32_t *out_stream,
                uint64_t *out_counter);

#endif
