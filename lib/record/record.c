/* Outcomes to lines. */
#include "record/record.h"
#include "record/entry.h"
#include "record/minute.h"
#include <stdlib.h>

struct record {
    struct record_setup setup;
    struct minutes *minutes;
    struct text body;
};

enum status record_create(const struct record_setup *setup, struct record **out)
{
    if (setup->run == 0)
        return STATUS_BAD_ARGUMENT;
    struct record *record = calloc(1, sizeof *record);
    if (!record)
        return STATUS_NO_MEMORY;
    record->setup = *setup;
    enum status status = minutes_create(setup->run, setup->max_channels, &record->minutes);
    if (status != STATUS_OK) {
        free(record);
        return status;
    }
    *out = record;
    return STATUS_OK;
}

void record_destroy(struct record *record)
{
    if (!record)
        return;
    minutes_destroy(record->minutes);
    text_destroy(&record->body);
    free(record);
}

void record_set_zero(struct record *record, int64_t zero_unix_ns)
{
    record->setup.zero_unix_ns = zero_unix_ns;
}

void record_get_utc(const struct record *record, int64_t watch_ns, char out[TIME_UTC_SIZE])
{
    time_format_utc(record->setup.zero_unix_ns + watch_ns, out);
}

static void give(const struct record *record, int64_t watch_ns, const char *kind, const char *body,
                 const struct record_sink *sink)
{
    char utc[TIME_UTC_SIZE];
    record_get_utc(record, watch_ns, utc);
    sink->take(sink->context, &(struct record_line){watch_ns, utc, kind, body});
}

struct pass_on {
    const struct record *record;
    const struct record_sink *sink;
};

static void take_minute(void *context, const struct minute_body *minute)
{
    const struct pass_on *pass = context;
    give(pass->record, minute->watch_ns, "level", minute->body, pass->sink);
}

enum status record_push(struct record *record, const struct outcome *outcome, const struct record_sink *sink)
{
    struct pass_on pass = {record, sink};
    enum status status = minutes_take(record->minutes, outcome, &(struct minute_sink){take_minute, &pass});
    const struct event *event = outcome->kind == OUTCOME_EVENT ? &outcome->as.event : NULL;
    if (event && event->kind == EVENT_LEVEL)
        return status;
    enum status written;
    if (event && event->kind == EVENT_RUN)
        written = entry_body_run(event->run, &event->as.run_mark, record->setup.zero_unix_ns,
                                 record->setup.facts, &record->body);
    else
        written = entry_body(outcome, record->setup.zero_unix_ns, &record->body);
    if (written != STATUS_OK)
        return written;
    give(record, event ? event->known_ns : outcome->watch_ns, flow_outcome_kind_text(outcome),
         record->body.data, sink);
    return status;
}

enum status record_flush(struct record *record, int64_t watch_ns, const struct record_sink *sink)
{
    struct pass_on pass = {record, sink};
    return minutes_flush(record->minutes, watch_ns, &(struct minute_sink){take_minute, &pass});
}
