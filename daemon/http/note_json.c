/* From JSON to a note: every field through note_set, the whole through note_check. */
#include "http/note_json.h"
#include <jansson.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#define KINDS_ALLOWED                                                                                        \
    "sign-on, sign-off, sighting, distance, verdict, release, acknowledgement, source state, job, weather, " \
    "quieting, deterrent, safety override, plan, answer to a finding, other source, whose, position, "       \
    "check, hand-over, mark, "                                                                               \
    "correction, remark"

__attribute__((format(printf, 4, 5))) static enum status
refuse(struct note_refusal *refusal, const char *field, const char *allowed, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(refusal->error, sizeof refusal->error, format, arguments);
    va_end(arguments);
    snprintf(refusal->field, sizeof refusal->field, "%s", field);
    refusal->allowed = allowed;
    return STATUS_BAD_FORMAT;
}

/* The value as text, as note_set wants it; false for null, arrays and objects. */
static bool value_text(const json_t *value, char *out, size_t size)
{
    int n = -1;
    if (json_is_string(value))
        n = snprintf(out, size, "%s", json_string_value(value));
    else if (json_is_integer(value))
        n = snprintf(out, size, "%" JSON_INTEGER_FORMAT, json_integer_value(value));
    else if (json_is_real(value))
        n = snprintf(out, size, "%.17g", json_real_value(value));
    else if (json_is_boolean(value))
        n = snprintf(out, size, "%s", json_is_true(value) ? "true" : "false");
    return n >= 0;
}

static enum status set_one(struct note *note, const char *field, const json_t *value,
                           struct note_refusal *refusal)
{
    char text[NOTE_TEXT_SIZE];
    if (!value_text(value, text, sizeof text))
        return refuse(refusal, field, "a text, a number, true or false", "the value has no fitting form");
    if (json_is_string(value) && json_string_length(value) >= sizeof text)
        return refuse(refusal, field, "at most 255 bytes", "the text is too long");
    const char *allowed = "";
    switch (note_set(note, field, text, &allowed)) {
    case STATUS_OK:
        return STATUS_OK;
    case STATUS_NOT_FOUND:
        return refuse(refusal, field, "", "a note has no such field");
    default:
        return refuse(refusal, field, allowed, "the value is not allowed");
    }
}

static enum status read_line(struct note *note, const json_t *value, struct note_refusal *refusal)
{
    char sentence[MARK_LINE_SENTENCE_SIZE] = "";
    if (!json_is_string(value))
        return refuse(refusal, "line", "a text", "the value has no fitting form");
    if (mark_line_read(json_string_value(value), note, sentence) != STATUS_OK)
        return refuse(refusal, "line", "", "%s", sentence);
    return STATUS_OK;
}

static enum status from_object(json_t *object, struct note *out, struct note_refusal *refusal)
{
    const char *kind_word = json_string_value(json_object_get(object, "kind"));
    enum note_kind kind;
    if (!kind_word || !note_kind_from_text(kind_word, &kind))
        return refuse(refusal, "kind", KINDS_ALLOWED, "the note's kind is missing or unknown");
    struct note note;
    note_reset(&note, kind);
    const char *field;
    json_t *value;
    json_object_foreach(object, field, value)
    {
        if (strcmp(field, "kind") == 0)
            continue;
        enum status status = strcmp(field, "line") == 0 ? read_line(&note, value, refusal)
                                                        : set_one(&note, field, value, refusal);
        if (status != STATUS_OK)
            return status;
    }
    const char *missing = "";
    if (note_check(&note, &missing) != STATUS_OK)
        return refuse(refusal, missing, "", "a note of kind '%s' needs this field", kind_word);
    *out = note;
    return STATUS_OK;
}

enum status note_from_json(const char *body, size_t length, struct note *out, struct note_refusal *refusal)
{
    *refusal = (struct note_refusal){.allowed = ""};
    json_error_t error;
    json_t *object = json_loadb(body, length, JSON_REJECT_DUPLICATES, &error);
    if (!object)
        return refuse(refusal, "", "one JSON object of texts, numbers and flags",
                      "not JSON at line %d, column %d", error.line, error.column);
    enum status status = json_is_object(object)
                             ? from_object(object, out, refusal)
                             : refuse(refusal, "", "one JSON object of texts, numbers and flags",
                                      "the body is not a JSON object");
    json_decref(object);
    return status;
}
