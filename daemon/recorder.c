/* From outcomes to entries; see recorder.h. */
#include "recorder.h"
#include "base/time.h"
#include "record/entry.h"
#include "record/minute.h"
#include "settings/site.h"
#include <stdlib.h>
#include <string.h>

struct recorder {
    struct outbox *outbox;
    struct minutes *minutes;
    struct minute_sink made; /* take may be NULL */
    struct text body;        /* of the entry that is being written */
    uint32_t run;
    int64_t zero_unix_ns;
    uint64_t clock_counters[SITE_MAX_STREAMS + 1], calibration_counters[SITE_MAX_STREAMS + 1];
};

enum status recorder_create(struct outbox *outbox, uint32_t run, int64_t zero_unix_ns, uint32_t max_channels,
                            struct recorder **out)
{
    struct recorder *recorder = calloc(1, sizeof *recorder);
    if (!recorder)
        return STATUS_NO_MEMORY;
    *recorder = (struct recorder){.outbox = outbox, .run = run, .zero_unix_ns = zero_unix_ns};
    enum status status = minutes_create(run, max_channels, &recorder->minutes);
    if (status != STATUS_OK) {
        free(recorder);
        return status;
    }
    *out = recorder;
    return STATUS_OK;
}

void recorder_destroy(struct recorder *recorder)
{
    if (!recorder)
        return;
    minutes_destroy(recorder->minutes);
    text_destroy(&recorder->body);
    free(recorder);
}

static void utc_of(const struct recorder *recorder, int64_t watch_ns, char out[TIME_UTC_SIZE])
{
    time_format_utc(recorder->zero_unix_ns + watch_ns, out);
}

static void put(struct recorder *recorder, int64_t watch_ns, const char *kind, const char *body)
{
    char utc[TIME_UTC_SIZE];
    utc_of(recorder, watch_ns, utc);
    outbox_push(recorder->outbox, utc, kind, body);
}

static enum status put_body(struct recorder *recorder, enum status status, int64_t watch_ns, const char *kind)
{
    if (status == STATUS_OK)
        put(recorder, watch_ns, kind, recorder->body.data);
    return status;
}

enum status recorder_begin(struct recorder *recorder, const struct run_mark *mark,
                           const struct run_facts *facts, const struct permit *permit,
                           const char *permit_text)
{
    int64_t at_ns = mark->outage_end_ns;
    enum status status = entry_body_run(recorder->run, mark, recorder->zero_unix_ns, facts, &recorder->body);
    status = put_body(recorder, status, at_ns, "run");
    if (status != STATUS_OK)
        return status;
    return put_body(recorder, entry_body_permit(recorder->run, 1, permit, permit_text, &recorder->body),
                    at_ns, "permit");
}

static void take_minute(void *context, const struct minute_body *minute)
{
    struct recorder *recorder = context;
    put(recorder, minute->watch_ns, "level", minute->body);
    if (recorder->made.take)
        recorder->made.take(recorder->made.context, minute);
}

void recorder_set_minutes(struct recorder *recorder, const struct minute_sink *sink)
{
    recorder->made = *sink;
}

enum status recorder_take(struct recorder *recorder, const struct outcome *outcome)
{
    const struct minute_sink sink = {take_minute, recorder};
    enum status status = minutes_take(recorder->minutes, outcome, &sink);
    if (status != STATUS_OK)
        return status;
    if (outcome->kind == OUTCOME_EVENT &&
        (outcome->as.event.kind == EVENT_LEVEL || outcome->as.event.kind == EVENT_RUN))
        return STATUS_OK;
    return put_body(recorder, entry_body(outcome, recorder->zero_unix_ns, &recorder->body), outcome->watch_ns,
                    flow_outcome_kind_text(outcome));
}

enum status recorder_health(struct recorder *recorder, int64_t watch_ns, uint32_t stream, bool ok,
                            const char *text)
{
    char utc[TIME_UTC_SIZE];
    utc_of(recorder, watch_ns, utc);
    outbox_push_health(recorder->outbox, utc, stream, ok, text);
    return STATUS_OK;
}

enum status recorder_clock(struct recorder *recorder, int64_t watch_ns, uint32_t stream,
                           const struct clock_facts *facts)
{
    uint64_t counter = ++recorder->clock_counters[stream];
    return put_body(recorder, entry_body_clock(recorder->run, stream, counter, facts, &recorder->body),
                    watch_ns, "clock");
}

enum status recorder_calibration(struct recorder *recorder, int64_t watch_ns, uint32_t stream,
                                 const struct calibration *calibration, const struct channel_facts *facts)
{
    uint64_t counter = ++recorder->calibration_counters[stream];
    return put_body(
        recorder, entry_body_calibration(recorder->run, stream, counter, calibration, facts, &recorder->body),
        watch_ns, "calibration");
}

enum status recorder_sound(struct recorder *recorder, int64_t watch_ns, const struct sound_entry_facts *facts,
                           char out_id[FLOW_ID_SIZE])
{
    flow_id(recorder->run, facts->stream, "sound", facts->counter, out_id);
    return put_body(recorder, entry_body_sound(recorder->run, facts, &recorder->body), watch_ns, "sound");
}

enum status recorder_finish(struct recorder *recorder, int64_t watch_ns)
{
    const struct minute_sink sink = {take_minute, recorder};
    return minutes_flush(recorder->minutes, watch_ns, &sink);
}

enum status recorder_id_of(const char *body, char out[FLOW_ID_SIZE])
{
    /* Quotes within texts are escaped, so this can only be the key. */
    const char *start = strstr(body, "\"id\":\"");
    const char *end = start ? strchr(start + 6, '"') : NULL;
    if (!end || end - (start + 6) >= FLOW_ID_SIZE)
        return STATUS_NOT_FOUND;
    memcpy(out, start + 6, (size_t)(end - (start + 6)));
    out[end - (start + 6)] = '\0';
    return STATUS_OK;
}
