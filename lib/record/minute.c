/* Level seconds to one body a minute and channel. */
#include "record/minute.h"
#include "base/time.h"
#include "record/level_body.h"
#include <stdlib.h>
#include <string.h>

#define MINUTE_NS (60 * TIME_NS_PER_S)
#define LATE_NS (5 * TIME_NS_PER_S)
#define MAX_SECONDS 60

struct channel {
    uint32_t stream, channel;
    uint32_t n;
    struct level seconds[MAX_SECONDS];
    struct level_hour hour;
};

/* Entries of one stream so far; there are at most as many streams as channels. */
struct counter {
    uint32_t stream;
    uint64_t count;
};

struct minutes {
    uint32_t run;
    uint32_t max_channels, n_channels; /* in order of stream and channel: order[i] indexes channels */
    struct channel *channels;
    uint32_t *order;
    struct counter *counters;
    struct text text;
};

enum status minutes_create(uint32_t run, uint32_t max_channels, struct minutes **out)
{
    if (max_channels == 0)
        return STATUS_BAD_ARGUMENT;
    struct minutes *minutes = calloc(1, sizeof *minutes);
    if (!minutes)
        return STATUS_NO_MEMORY;
    *minutes = (struct minutes){.run = run, .max_channels = max_channels};
    minutes->channels = calloc(max_channels, sizeof *minutes->channels);
    minutes->order = calloc(max_channels, sizeof *minutes->order);
    minutes->counters = calloc(max_channels, sizeof *minutes->counters);
    if (!minutes->channels || !minutes->order || !minutes->counters) {
        minutes_destroy(minutes);
        return STATUS_NO_MEMORY;
    }
    *out = minutes;
    return STATUS_OK;
}

void minutes_destroy(struct minutes *minutes)
{
    if (!minutes)
        return;
    text_destroy(&minutes->text);
    free(minutes->channels);
    free(minutes->order);
    free(minutes->counters);
    free(minutes);
}

static uint64_t next_count(struct minutes *minutes, uint32_t stream)
{
    uint32_t i = 0;
    while (minutes->counters[i].count > 0 && minutes->counters[i].stream != stream)
        i++;
    minutes->counters[i].stream = stream;
    return ++minutes->counters[i].count;
}

static enum status give(struct minutes *minutes, struct channel *channel, int64_t watch_ns,
                        const struct minute_sink *sink)
{
    struct minute_body minute = {.watch_ns = watch_ns,
                                 .run = minutes->run,
                                 .stream = channel->stream,
                                 .channel = channel->channel,
                                 .counter = next_count(minutes, channel->stream),
                                 .n = channel->n,
                                 .seconds = channel->seconds};
    struct level_statistics hour;
    level_hour_get(&channel->hour, &hour);
    enum status status = level_body(minutes->run, channel->stream, minute.counter, channel->seconds,
                                    channel->n, &hour, &minutes->text);
    channel->n = 0;
    if (status != STATUS_OK)
        return status;
    minute.body = minutes->text.data;
    sink->take(sink->context, &minute);
    return STATUS_OK;
}

/* The channel's place, made when it is new; NULL when there is no room for it. */
static struct channel *find_channel(struct minutes *minutes, uint32_t stream, uint32_t number)
{
    uint32_t at = 0;
    for (; at < minutes->n_channels; at++) {
        struct channel *channel = &minutes->channels[minutes->order[at]];
        if (channel->stream == stream && channel->channel == number)
            return channel;
        if (channel->stream > stream || (channel->stream == stream && channel->channel > number))
            break;
    }
    if (minutes->n_channels == minutes->max_channels)
        return NULL;
    for (uint32_t i = minutes->n_channels; i > at; i--)
        minutes->order[i] = minutes->order[i - 1];
    minutes->order[at] = minutes->n_channels;
    struct channel *channel = &minutes->channels[minutes->n_channels++];
    channel->stream = stream;
    channel->channel = number;
    return channel;
}

static int64_t minute_of(int64_t ns)
{
    return ns / MINUTE_NS - (ns % MINUTE_NS < 0);
}

static int64_t end_of(const struct level *level)
{
    return level->start_ns + time_from_s(level->seconds);
}

/* Whether the second goes on in the same body as the last one that is held. A microsecond is rounding. */
static bool follows(const struct channel *channel, const struct level *level)
{
    const struct level *last = &channel->seconds[channel->n - 1];
    int64_t hole_ns = level->start_ns - end_of(last);
    return hole_ns >= -2 * TIME_NS_PER_US && hole_ns <= 2 * TIME_NS_PER_US &&
           minute_of(level->start_ns) == minute_of(channel->seconds[0].start_ns) &&
           level->n_bands == last->n_bands && level->relative == last->relative && channel->n < MAX_SECONDS;
}

static enum status take_level(struct minutes *minutes, const struct event *event,
                              const struct minute_sink *sink)
{
    const struct level *level = &event->as.level;
    struct channel *channel = find_channel(minutes, event->stream, level->channel);
    if (!channel)
        return STATUS_FULL;
    enum status status = STATUS_OK;
    if (channel->n > 0 && !follows(channel, level))
        status = give(minutes, channel, event->known_ns, sink);
    channel->seconds[channel->n++] = *level;
    level_hour_take(&channel->hour, level);
    if (status == STATUS_OK && minute_of(end_of(level) + TIME_NS_PER_US) > minute_of(level->start_ns))
        status = give(minutes, channel, event->known_ns, sink);
    return status;
}

/* What is summed of a job is summed from bodies: none of them goes over its begin or end. */
static bool is_turn_of_job(const struct outcome *outcome)
{
    const struct note *note = &outcome->as.event.as.note;
    return outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_NOTE && note->kind == NOTE_JOB &&
           (strcmp(note->answer, "open") == 0 || strcmp(note->answer, "close") == 0);
}

enum status minutes_take(struct minutes *minutes, const struct outcome *outcome,
                         const struct minute_sink *sink)
{
    if (outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_LEVEL)
        return take_level(minutes, &outcome->as.event, sink);
    if (is_turn_of_job(outcome))
        return minutes_flush(minutes, outcome->watch_ns, sink);
    for (uint32_t i = 0; i < minutes->n_channels; i++) {
        struct channel *channel = &minutes->channels[minutes->order[i]];
        if (channel->n > 0 &&
            outcome->watch_ns > (minute_of(channel->seconds[0].start_ns) + 1) * MINUTE_NS + LATE_NS) {
            enum status status = give(minutes, channel, outcome->watch_ns, sink);
            if (status != STATUS_OK)
                return status;
        }
    }
    return STATUS_OK;
}

enum status minutes_flush(struct minutes *minutes, int64_t watch_ns, const struct minute_sink *sink)
{
    for (uint32_t i = 0; i < minutes->n_channels; i++) {
        struct channel *channel = &minutes->channels[minutes->order[i]];
        if (channel->n == 0)
            continue;
        enum status status = give(minutes, channel, watch_ns, sink);
        if (status != STATUS_OK)
            return status;
    }
    return STATUS_OK;
}
