/* Writes one body: a JSON object on one line, ASCII, with fixed decimals. The caller gives the keys in byte
 * order; tests check that every body keeps it. For lib/record only. */
#ifndef RECORD_BODY_H
#define RECORD_BODY_H

#include "base/status.h"
#include "base/text.h"
#include "flow.h"
#include <stdbool.h>
#include <stdint.h>

struct body {
    struct text *out; /* borrowed; emptied by begin */
    bool any;         /* a key was written: the next one needs a comma */
};

void body_begin(struct body *body, struct text *out);
/* Closes the object; STATUS_NO_MEMORY when the text is not complete. */
enum status body_end(struct body *body);

/* A key alone; the caller appends its value to body->out. */
void body_key(struct body *body, const char *key);
void body_text(struct body *body, const char *key, const char *value);
/* null for an empty text: what was not said is not a text. */
void body_text_or_null(struct body *body, const char *key, const char *value);
/* Leaves the key out for an empty text. */
void body_text_if_given(struct body *body, const char *key, const char *value);
/* Rounded by base/round.h, then with fixed decimals; null when not finite. */
void body_number(struct body *body, const char *key, double value, int decimals);
/* Leaves the key out when the value is not finite. */
void body_number_if_given(struct body *body, const char *key, double value, int decimals);
void body_integer(struct body *body, const char *key, int64_t value);
void body_bool(struct body *body, const char *key, bool value);
/* Watch time in seconds with six decimals, exactly the whole microseconds of ns. */
void body_time(struct body *body, const char *key, int64_t ns);
/* "id": "run.stream.kind.counter". */
void body_id(struct body *body, uint32_t run, uint32_t stream, const char *kind, uint64_t counter);
/* An array of ids. */
void body_causes(struct body *body, uint32_t n, const char causes[][FLOW_ID_SIZE]);

/* An object within the body: its members go through *out until body_object_end. */
void body_object(struct body *body, const char *key, struct body *out);
void body_object_end(struct body *object);
/* An array of n levels in dB, null where not finite; as a member, or alone. */
void body_decibels(struct body *body, const char *key, const double *levels_db, uint32_t n);
void body_append_decibels(struct text *out, const double *levels_db, uint32_t n);
/* Seconds with six decimals, alone. */
void body_append_time(struct text *out, int64_t ns);

/* The bodies of what the tally says. */
enum status body_of_exposure(const struct outcome *outcome, struct text *out);
enum status body_of_source(const struct outcome *outcome, struct text *out);

#endif
