/* The form of an entry. */
#include "base/time.h"
#include "record/entry.h"
#include "record/views.h"
#include <jansson.h>
#include <stdio.h>
#include <string.h>

static enum status wrong(char out[ENTRY_SENTENCE_SIZE], const char *what, const char *which)
{
    snprintf(out, ENTRY_SENTENCE_SIZE, "%s%.60s", what, which);
    return STATUS_BAD_FORMAT;
}

/* The first key that is not after the one before it, here or inside; NULL when all are in order. */
static const char *key_out_of_order(json_t *value)
{
    const char *before = "", *key, *inside = NULL;
    json_t *member;
    size_t i;
    if (json_is_array(value)) {
        json_array_foreach(value, i, member)
        {
            if (!inside && (json_is_object(member) || json_is_array(member)))
                inside = key_out_of_order(member);
        }
        return inside;
    }
    json_object_foreach(value, key, member)
    {
        if (strcmp(before, key) >= 0)
            return key;
        before = key;
        if (!inside && (json_is_object(member) || json_is_array(member)))
            inside = key_out_of_order(member);
    }
    return inside;
}

static const char *skip_number(const char *text)
{
    const char *start = text;
    while (*text >= '0' && *text <= '9')
        text++;
    return text == start ? "x" : text; /* "x": neither a point nor the end */
}

/* "run.stream.kind.counter" */
static bool id_fits(const char *id, const char *kind)
{
    const char *at = skip_number(id);
    size_t length = strlen(kind);
    if (*at != '.')
        return false;
    at = skip_number(at + 1);
    if (*at != '.' || strncmp(at + 1, kind, length) != 0 || at[1 + length] != '.')
        return false;
    return *skip_number(at + 1 + length + 1) == '\0';
}

static enum status check_object(const struct entry *entry, json_t *root, char out[ENTRY_SENTENCE_SIZE])
{
    const char *key = key_out_of_order(root);
    if (key)
        return wrong(out, "its body's keys are not in byte order at ", key);
    const char *id = json_string_value(json_object_get(root, "id"));
    if (!id)
        return wrong(out, "its body has no id", "");
    if (!id_fits(id, entry->kind))
        return wrong(out, "its id does not fit its kind: ", id);
    struct event event;
    enum status status = entry_event(entry->kind, entry->body, 0, &event);
    if (status == STATUS_BAD_FORMAT)
        return wrong(out, "its body is not one of kind ", entry->kind);
    return status == STATUS_NO_MEMORY ? status : STATUS_OK;
}

enum status entry_check(const struct entry *entry, char out_sentence[ENTRY_SENTENCE_SIZE])
{
    int64_t unix_ns;
    if (time_parse_utc(entry->utc, &unix_ns) != STATUS_OK || strlen(entry->utc) != TIME_UTC_SIZE - 1)
        return wrong(out_sentence, "its time is not a UTC time: ", entry->utc);
    if (!views_has_kind(entry->kind))
        return wrong(out_sentence, "its kind is not known: ", entry->kind);
    for (const char *c = entry->body; *c; c++)
        if (*c < 0x20 || *c > 0x7e)
            return wrong(out_sentence, "its body is not one line of ASCII", "");
    json_error_t error;
    json_t *root = json_loads(entry->body, JSON_REJECT_DUPLICATES, &error);
    if (!root && json_error_code(&error) == json_error_out_of_memory)
        return STATUS_NO_MEMORY;
    enum status status = json_is_object(root) ? check_object(entry, root, out_sentence)
                                              : wrong(out_sentence, "its body is not a JSON object", "");
    json_decref(root);
    return status;
}
