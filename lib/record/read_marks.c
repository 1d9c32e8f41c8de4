/* What a rerun needs of the entries that begin a run; see marks.h. */
#include "record/marks.h"
#include "record/reading.h"

/* A text of any length; null and a missing key are not found. */
static enum status read_long_text(struct reading *reading, const char *key, struct text *out)
{
    json_t *value = reading_member(reading, key, false);
    text_reset(out);
    if (!value || json_is_null(value))
        return STATUS_NOT_FOUND;
    if (!json_is_string(value))
        return STATUS_BAD_FORMAT;
    text_append(out, json_string_value(value));
    return out->failed ? STATUS_NO_MEMORY : STATUS_OK;
}

static enum status read_counts(struct reading *reading, const char *key, uint32_t *n_streams,
                               uint32_t n_channels[ENTRY_MAX_STREAMS])
{
    json_t *array = reading_member(reading, key, false);
    if (!array || json_array_size(array) == 0)
        return STATUS_NOT_FOUND;
    if (json_array_size(array) > ENTRY_MAX_STREAMS)
        return STATUS_BAD_FORMAT;
    for (size_t i = 0; i < json_array_size(array); i++) {
        json_t *count = json_array_get(array, i);
        if (!json_is_integer(count) || json_integer_value(count) < 0 ||
            json_integer_value(count) > FLOW_MAX_CHANNELS)
            return STATUS_BAD_FORMAT;
        n_channels[i] = (uint32_t)json_integer_value(count);
    }
    *n_streams = (uint32_t)json_array_size(array);
    return STATUS_OK;
}

enum status entry_run_settings(const char *body, struct text *settings, uint32_t *n_streams,
                               uint32_t n_channels[ENTRY_MAX_STREAMS])
{
    struct reading reading;
    enum status status = reading_begin(body, &reading);
    if (status != STATUS_OK)
        return status;
    status = read_long_text(&reading, "settings", settings);
    if (status == STATUS_OK)
        status = read_counts(&reading, "channels", n_streams, n_channels);
    json_decref(reading.root);
    return status;
}

enum status entry_permit_text(const char *body, struct text *text)
{
    struct reading reading;
    enum status status = reading_begin(body, &reading);
    if (status != STATUS_OK)
        return status;
    status = read_long_text(&reading, "text", text);
    json_decref(reading.root);
    return status;
}
