/* A growing text, and the one JSON writer of the project (RFC 8259 strings, ASCII only). */
#include "base/text.h"
#include <math.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

void text_reset(struct text *text)
{
    text->length = 0;
    text->failed = false;
    if (text->data)
        text->data[0] = '\0';
}

void text_destroy(struct text *text)
{
    if (!text)
        return;
    free(text->data);
    *text = (struct text){0};
}

static bool make_room(struct text *text, size_t more)
{
    if (text->failed)
        return false;
    size_t wanted = text->length + more + 1;
    if (wanted <= text->capacity)
        return true;
    size_t capacity = text->capacity ? text->capacity : 256;
    while (capacity < wanted)
        capacity *= 2;
    char *data = realloc(text->data, capacity);
    if (!data) {
        text->failed = true;
        return false;
    }
    text->data = data;
    text->capacity = capacity;
    return true;
}

static void append_bytes(struct text *text, const char *bytes, size_t n)
{
    if (!make_room(text, n))
        return;
    memcpy(text->data + text->length, bytes, n);
    text->length += n;
    text->data[text->length] = '\0';
}

void text_append(struct text *text, const char *piece)
{
    append_bytes(text, piece, strlen(piece));
}

void text_format(struct text *text, const char *format, ...)
{
    va_list arguments, again;
    va_start(arguments, format);
    va_copy(again, arguments);
    int n = vsnprintf(NULL, 0, format, arguments);
    va_end(arguments);
    if (n < 0)
        text->failed = true;
    else if (make_room(text, (size_t)n)) {
        vsnprintf(text->data + text->length, (size_t)n + 1, format, again);
        text->length += (size_t)n;
    }
    va_end(again);
}

/* The code point at *s and how many bytes it takes; U+FFFD and 1 byte for what is not UTF-8 (RFC 3629). */
static uint32_t next_code_point(const unsigned char *s, size_t *out_bytes)
{
    static const uint32_t lowest[] = {0, 0, 0x80, 0x800, 0x10000};
    size_t n = s[0] < 0x80             ? 1
               : (s[0] & 0xe0) == 0xc0 ? 2
               : (s[0] & 0xf0) == 0xe0 ? 3
               : (s[0] & 0xf8) == 0xf0 ? 4
                                       : 0;
    *out_bytes = 1;
    if (n == 0)
        return 0xfffd;
    if (n == 1)
        return s[0];
    uint32_t code = s[0] & (0x7fU >> n);
    for (size_t i = 1; i < n; i++) {
        if ((s[i] & 0xc0) != 0x80)
            return 0xfffd;
        code = code << 6 | (s[i] & 0x3fU);
    }
    if (code < lowest[n] || code > 0x10ffff || (code >= 0xd800 && code <= 0xdfff))
        return 0xfffd;
    *out_bytes = n;
    return code;
}

static void append_escaped(struct text *text, uint32_t code)
{
    if (code == '"' || code == '\\')
        text_format(text, "\\%c", (int)code);
    else if (code >= 0x20 && code < 0x7f)
        append_bytes(text, &(char){(char)code}, 1);
    else if (code < 0x10000)
        text_format(text, "\\u%04x", code);
    else
        text_format(text, "\\u%04x\\u%04x", 0xd800 + ((code - 0x10000) >> 10),
                    0xdc00 + ((code - 0x10000) & 0x3ff));
}

void text_json_string(struct text *text, const char *value)
{
    append_bytes(text, "\"", 1);
    const unsigned char *s = (const unsigned char *)value;
    while (*s) {
        size_t bytes;
        append_escaped(text, next_code_point(s, &bytes));
        s += bytes;
    }
    append_bytes(text, "\"", 1);
}

void text_json_number(struct text *text, double value, int decimals)
{
    if (isfinite(value))
        text_format(text, "%.*f", decimals, value == 0 ? 0.0 : value);
    else
        text_append(text, "null");
}
