/* The JSON object of a body (RFC 8259), key by key. */
#include "record/body.h"
#include "base/round.h"
#include "base/time.h"
#include <inttypes.h>
#include <math.h>

void body_begin(struct body *body, struct text *out)
{
    text_reset(out);
    text_append(out, "{");
    *body = (struct body){.out = out};
}

enum status body_end(struct body *body)
{
    text_append(body->out, "}");
    return body->out->failed ? STATUS_NO_MEMORY : STATUS_OK;
}

void body_key(struct body *body, const char *key)
{
    text_append(body->out, body->any ? ",\"" : "\"");
    text_append(body->out, key);
    text_append(body->out, "\":");
    body->any = true;
}

void body_text(struct body *body, const char *key, const char *value)
{
    body_key(body, key);
    text_json_string(body->out, value);
}

void body_text_or_null(struct body *body, const char *key, const char *value)
{
    if (*value)
        body_text(body, key, value);
    else {
        body_key(body, key);
        text_append(body->out, "null");
    }
}

void body_text_if_given(struct body *body, const char *key, const char *value)
{
    if (*value)
        body_text(body, key, value);
}

void body_number(struct body *body, const char *key, double value, int decimals)
{
    body_key(body, key);
    text_json_number(body->out, round_decimals(value, decimals), decimals);
}

void body_number_if_given(struct body *body, const char *key, double value, int decimals)
{
    if (isfinite(value))
        body_number(body, key, value, decimals);
}

void body_integer(struct body *body, const char *key, int64_t value)
{
    body_key(body, key);
    text_format(body->out, "%" PRId64, value);
}

void body_bool(struct body *body, const char *key, bool value)
{
    body_key(body, key);
    text_append(body->out, value ? "true" : "false");
}

void body_append_time(struct text *out, int64_t ns)
{
    int64_t us = time_round_us(ns) / TIME_NS_PER_US;
    uint64_t size = us < 0 ? -(uint64_t)us : (uint64_t)us;
    text_format(out, "%s%" PRIu64 ".%06" PRIu64, us < 0 ? "-" : "", size / 1000000, size % 1000000);
}

void body_time(struct body *body, const char *key, int64_t ns)
{
    body_key(body, key);
    body_append_time(body->out, ns);
}

void body_object(struct body *body, const char *key, struct body *out)
{
    body_key(body, key);
    text_append(body->out, "{");
    *out = (struct body){.out = body->out};
}

void body_object_end(struct body *object)
{
    text_append(object->out, "}");
}

void body_decibels(struct body *body, const char *key, const double *levels_db, uint32_t n)
{
    body_key(body, key);
    body_append_decibels(body->out, levels_db, n);
}

void body_append_decibels(struct text *out, const double *levels_db, uint32_t n)
{
    text_append(out, "[");
    for (uint32_t i = 0; i < n; i++) {
        if (i > 0)
            text_append(out, ",");
        text_json_number(out, round_decimals(levels_db[i], ROUND_DECIMALS_DB), ROUND_DECIMALS_DB);
    }
    text_append(out, "]");
}

void body_id(struct body *body, uint32_t run, uint32_t stream, const char *kind, uint64_t counter)
{
    char id[FLOW_ID_SIZE];
    flow_id(run, stream, kind, counter, id);
    body_text(body, "id", id);
}

void body_causes(struct body *body, uint32_t n, const char causes[][FLOW_ID_SIZE])
{
    body_key(body, "causes");
    text_append(body->out, "[");
    for (uint32_t i = 0; i < n && i < FLOW_MAX_CAUSES; i++) {
        if (i > 0)
            text_append(body->out, ",");
        text_json_string(body->out, causes[i]);
    }
    text_append(body->out, "]");
}
