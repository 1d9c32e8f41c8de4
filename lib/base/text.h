/* A growing text, and the one JSON writer of the project. */
#ifndef BASE_TEXT_H
#define BASE_TEXT_H

#include <stdbool.h>
#include <stddef.h>

/* A growing text buffer owned by its user: reset keeps the memory, destroy frees it. */
struct text {
    char *data; /* always terminated; "" when empty; NULL before the first use */
    size_t length, capacity;
    bool failed; /* an allocation failed: the text is not complete */
};

void text_reset(struct text *text);
void text_destroy(struct text *text);
void text_append(struct text *text, const char *piece);
void text_format(struct text *text, const char *format, ...) __attribute__((format(printf, 2, 3)));
/* Appends a JSON string with quotes; everything outside printable ASCII is escaped (UTF-8 becomes \uXXXX,
 * bytes that are not UTF-8 become \ufffd). */
void text_json_string(struct text *text, const char *value);
/* Appends a number with fixed decimals, or null when it is not finite. */
void text_json_number(struct text *text, double value, int decimals);

#endif
