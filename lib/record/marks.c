/* Bodies of run, permit, health, calibration, clock, sound and stamp entries. */
#include "record/marks.h"
#include "base/round.h"
#include "record/body.h"
#include <sodium.h>
#include <string.h>

#define SHA256_SIZE 65 /* lower-case hex and its terminator */

static void put_text(struct body *body, const char *key, const char *value)
{
    body_text_or_null(body, key, value ? value : "");
}

static void put_counts(struct body *body, const char *key, uint32_t n, const uint32_t *counts)
{
    body_key(body, key);
    text_append(body->out, "[");
    for (uint32_t i = 0; i < n; i++)
        text_format(body->out, i ? ",%u" : "%u", counts[i]);
    text_append(body->out, "]");
}

/* In lower-case hex. */
static void hash_text(const char *text, char out[SHA256_SIZE])
{
    unsigned char digest[crypto_hash_sha256_BYTES];
    crypto_hash_sha256(digest, (const unsigned char *)text, strlen(text));
    sodium_bin2hex(out, SHA256_SIZE, digest, sizeof digest);
}

enum status entry_body_run(uint32_t run, const struct run_mark *mark, int64_t zero_unix_ns,
                           const struct run_facts *facts, struct text *out)
{
    static const struct run_facts none;
    const struct run_facts *said = facts ? facts : &none;
    char zero[TIME_UTC_SIZE];
    time_format_utc(zero_unix_ns, zero);
    struct body body;
    body_begin(&body, out);
    put_text(&body, "build", said->build);
    put_counts(&body, "channels", said->n_channels ? said->n_streams : 0, said->n_channels);
    put_text(&body, "command", said->command);
    put_text(&body, "cpu", said->cpu);
    body_id(&body, run, 0, "run", 1);
    put_text(&body, "input", said->input);
    body_time(&body, "outage_end_s", mark->outage_end_ns);
    body_time(&body, "outage_start_s", mark->outage_start_ns);
    put_text(&body, "permit", said->permit);
    put_text(&body, "settings", said->settings);
    put_text(&body, "site", said->site);
    put_text(&body, "start_from", said->start_from);
    put_text(&body, "version", said->version);
    body_time(&body, "watch_start_s", mark->outage_end_ns);
    if (facts)
        body_text(&body, "watch_zero_utc", zero);
    return body_end(&body);
}

static void put_value(struct text *out, const struct permit_value *value)
{
    struct body item = {.out = out};
    text_append(out, "{");
    body_text(&item, "key", value->key);
    body_text(&item, "mark", permit_mark_text(value->mark));
    put_text(&item, "source", value->source);
    body_text(&item, "value", value->text);
    put_text(&item, "who", value->who);
    text_append(out, "}");
}

enum status entry_body_permit(uint32_t run, uint64_t counter, const struct permit *permit,
                              const char *file_text, struct text *out)
{
    char sha256[SHA256_SIZE];
    hash_text(file_text, sha256);
    struct body body;
    body_begin(&body, out);
    body_bool(&body, "demonstration", permit->demonstration);
    put_text(&body, "document", permit->document);
    put_text(&body, "document_sha256", permit->document_sha256);
    put_text(&body, "ended", permit->ended);
    body_id(&body, run, 0, "permit", counter);
    body_text(&body, "permit", permit->id);
    put_text(&body, "revision", permit->revision);
    body_text(&body, "sha256", sha256);
    body_text(&body, "text", file_text);
    body_text(&body, "title", permit->title);
    body_key(&body, "values");
    text_append(out, "[");
    for (uint32_t i = 0; i < permit->n_values; i++) {
        if (i > 0)
            text_append(out, ",");
        put_value(out, &permit->values[i]);
    }
    text_append(out, "]");
    body_integer(&body, "year", permit->year);
    return body_end(&body);
}

enum status entry_body_health(uint32_t run, uint32_t stream, uint64_t counter, bool ok, const char *text,
                              struct text *out)
{
    struct body body;
    body_begin(&body, out);
    body_text(&body, "health", text);
    body_id(&body, run, stream, "health", counter);
    body_bool(&body, "ok", ok);
    body_integer(&body, "stream", stream);
    return body_end(&body);
}

static const char *role_text(enum channel_role role)
{
    return role == ROLE_LISTEN ? "listen" : role == ROLE_MEASURE ? "measure" : "both";
}

/* Sensitivity against frequency: [[hz, db], ...], null for one value. */
static void put_points(struct body *body, const struct calibration *calibration)
{
    body_key(body, "sensitivity_points");
    if (calibration->n_points == 0) {
        text_append(body->out, "null");
        return;
    }
    for (uint32_t i = 0; i < calibration->n_points; i++) {
        text_append(body->out, i ? ",[" : "[[");
        text_json_number(body->out, calibration->point_hz[i], ROUND_DECIMALS_HZ);
        text_append(body->out, ",");
        text_json_number(body->out, calibration->point_db[i], ROUND_DECIMALS_DB);
        text_append(body->out, "]");
    }
    text_append(body->out, "]");
}

enum status entry_body_calibration(uint32_t run, uint32_t stream, uint64_t counter,
                                   const struct calibration *calibration, const struct channel_facts *facts,
                                   struct text *out)
{
    double clip_db = calibration_clip_db(calibration);
    struct body body;
    body_begin(&body, out);
    put_text(&body, "certificate_date", facts->certificate_date);
    body_integer(&body, "channel", facts->channel);
    body_number(&body, "clip_db", clip_db, ROUND_DECIMALS_DB);
    put_text(&body, "due_date", facts->due_date);
    body_number(&body, "expected_peak_db", calibration->expected_peak_db, ROUND_DECIMALS_DB);
    body_number(&body, "full_scale_v", calibration->full_scale_v, 6);
    body_number(&body, "gain_db", calibration->gain_db, ROUND_DECIMALS_DB);
    body_id(&body, run, stream, "calibration", counter);
    body_bool(&body, "known", calibration->known);
    put_text(&body, "name", facts->stream_name);
    body_number(&body, "rate_hz", facts->rate_hz, ROUND_DECIMALS_HZ);
    body_text(&body, "role", role_text(calibration->role));
    body_number(&body, "self_noise_db", calibration->self_noise_db, ROUND_DECIMALS_DB);
    body_number(&body, "sensitivity_db", calibration->sensitivity_db, ROUND_DECIMALS_DB);
    put_points(&body, calibration);
    put_text(&body, "serial", facts->serial);
    body_integer(&body, "stream", stream);
    body_text(&body, "what", "stated");
    body_number(&body, "x_m", facts->x_m, ROUND_DECIMALS_M);
    body_number(&body, "y_m", facts->y_m, ROUND_DECIMALS_M);
    body_number(&body, "z_m", facts->z_m, ROUND_DECIMALS_M);
    return body_end(&body);
}

enum status entry_body_field_check(uint32_t run, uint32_t stream, uint64_t counter,
                                   const struct field_check_facts *facts, struct text *out)
{
    struct body body;
    body_begin(&body, out);
    body_number(&body, "change_db", facts->change_db, ROUND_DECIMALS_DB);
    body_integer(&body, "channel", facts->channel.channel);
    body_number(&body, "difference_db", facts->measured_db - facts->tone_db, ROUND_DECIMALS_DB);
    body_id(&body, run, stream, "calibration", counter);
    put_text(&body, "input", facts->input);
    body_number(&body, "measured_db", facts->measured_db, ROUND_DECIMALS_DB);
    put_text(&body, "name", facts->channel.stream_name);
    body_number(&body, "rate_hz", facts->channel.rate_hz, ROUND_DECIMALS_HZ);
    body_number(&body, "seconds", facts->seconds, ROUND_DECIMALS_S);
    body_number(&body, "sensitivity_db", facts->sensitivity_db, ROUND_DECIMALS_DB);
    put_text(&body, "serial", facts->channel.serial);
    body_integer(&body, "stream", stream);
    body_number(&body, "tone_db", facts->tone_db, ROUND_DECIMALS_DB);
    body_number(&body, "tone_hz", facts->tone_hz, ROUND_DECIMALS_HZ);
    body_text(&body, "what", "field check");
    return body_end(&body);
}

enum status entry_body_clock(uint32_t run, uint32_t stream, uint64_t counter, const struct clock_facts *facts,
                             struct text *out)
{
    char zero[TIME_UTC_SIZE];
    time_format_utc(facts->zero_unix_ns, zero);
    struct body body;
    body_begin(&body, out);
    if (facts->map) {
        body_integer(&body, "anchor_frame", (int64_t)facts->map->anchor_frame);
        body_time(&body, "anchor_s", facts->map->anchor_ns);
    }
    body_id(&body, run, stream, "clock", counter);
    body_number(&body, "offset_s", facts->offset_s, ROUND_DECIMALS_S);
    if (facts->map)
        body_number(&body, "rate_hz", facts->map->rate_hz, 6); /* a clock's error is parts in a million */
    put_text(&body, "reason", facts->reason);
    put_text(&body, "source", facts->source);
    body_integer(&body, "stream", stream);
    body_text(&body, "watch_zero_utc", zero);
    return body_end(&body);
}

const char *sound_reason_text(enum sound_reason reason)
{
    return reason == SOUND_ADVICE ? "advice" : reason == SOUND_MARK ? "mark" : "dismissed";
}

enum status entry_body_sound(uint32_t run, const struct sound_entry_facts *facts, struct text *out)
{
    struct body body;
    body_begin(&body, out);
    body_integer(&body, "bytes", (int64_t)facts->bytes);
    body_causes(&body, facts->n_causes, facts->causes);
    body_integer(&body, "channel", facts->channel);
    body_time(&body, "end_s", facts->end_ns);
    body_text(&body, "file", facts->file);
    body_number(&body, "high_hz", facts->high_hz, ROUND_DECIMALS_HZ);
    body_id(&body, run, facts->stream, "sound", facts->counter);
    body_number(&body, "low_hz", facts->low_hz, ROUND_DECIMALS_HZ);
    body_number(&body, "missing_s", facts->missing_s, ROUND_DECIMALS_S);
    body_number(&body, "rate_hz", facts->rate_hz, ROUND_DECIMALS_HZ);
    body_text(&body, "reason", sound_reason_text(facts->reason));
    body_text(&body, "sha256", facts->sha256);
    body_time(&body, "start_s", facts->start_ns);
    body_integer(&body, "stream", facts->stream);
    return body_end(&body);
}

enum status entry_body_stamp(uint32_t run, uint64_t counter, const struct stamp_facts *facts,
                             struct text *out)
{
    struct body body;
    body_begin(&body, out);
    body_integer(&body, "first", facts->first);
    body_id(&body, run, 0, "stamp", counter);
    put_text(&body, "key", facts->key);
    body_integer(&body, "last", facts->last);
    put_text(&body, "signature", facts->signature);
    body_text(&body, "text", facts->text);
    return body_end(&body);
}
