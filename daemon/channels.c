/* Calibrations of a run's channels; see channels.h. */
#include "channels.h"
#include "base/time.h"
#include <stdio.h>

#define SENTENCE_SIZE 256

struct channel_facts channels_facts(const struct stream_settings *stream, uint32_t channel, double rate_hz)
{
    const struct channel_settings *settings = &stream->channels[channel - 1];
    return (struct channel_facts){.channel = channel,
                                  .serial = settings->serial,
                                  .certificate_date = settings->certificate_date,
                                  .due_date = settings->due_date,
                                  .stream_name = stream->name,
                                  .rate_hz = rate_hz,
                                  .x_m = settings->x_m,
                                  .y_m = settings->y_m,
                                  .z_m = settings->z_m};
}

/* The day itself still counts. */
static bool is_past(const char *due_date, int64_t unix_ns)
{
    char whole[64];
    int64_t due_ns;
    snprintf(whole, sizeof whole, "%sT00:00:00Z", due_date);
    return *due_date && time_parse_utc(whole, &due_ns) == STATUS_OK &&
           unix_ns >= due_ns + INT64_C(86400) * TIME_NS_PER_S;
}

/* Whether it would measure impulses, were there room: one that only listens clips at them by intent. */
static bool is_refused(const struct calibration *calibration)
{
    return calibration->role != ROLE_LISTEN && !calibration_has_room(calibration);
}

bool channels_refused(const struct stream_settings *stream, uint32_t n_channels, char *out, size_t size)
{
    size_t length = 0;
    for (uint32_t c = 1; c <= n_channels; c++)
        if (is_refused(&stream->channels[c - 1].calibration) && length < size)
            length += (size_t)snprintf(out + length, size - length, "%s%u", length > 0 ? ", " : "", c);
    return length > 0;
}

static enum status say_what_is_wrong(struct recorder *recorder, int64_t watch_ns, int64_t unix_ns,
                                     uint32_t number, const struct channel_settings *channel,
                                     const struct channel_facts *facts)
{
    const struct calibration *calibration = &channel->calibration;
    char sentence[SENTENCE_SIZE];
    enum status status = STATUS_OK;
    if (is_past(channel->due_date, unix_ns)) {
        snprintf(sentence, sizeof sentence,
                 "channel %u (%s): its calibration was due on %s; levels are as right as it still is",
                 facts->channel, *facts->serial ? facts->serial : "no serial", channel->due_date);
        status = recorder_health(recorder, watch_ns, number, false, sentence);
    }
    if (status == STATUS_OK && is_refused(calibration)) {
        snprintf(
            sentence, sizeof sentence,
            "channel %u (%s): impulse levels are refused: it clips at %.1f dB, less than %.0f dB above the "
            "expected peak of %.1f dB re 1 uPa",
            facts->channel, *facts->serial ? facts->serial : "no serial", calibration_clip_db(calibration),
            CALIBRATION_ROOM_DB, calibration->expected_peak_db);
        status = recorder_health(recorder, watch_ns, number, false, sentence);
    }
    return status;
}

enum status channels_record(struct recorder *recorder, int64_t watch_ns, int64_t unix_ns, uint32_t number,
                            const struct stream_settings *stream, uint32_t n_channels, double rate_hz)
{
    enum status status = STATUS_OK;
    for (uint32_t c = 1; c <= n_channels && status == STATUS_OK; c++) {
        struct channel_facts facts = channels_facts(stream, c, rate_hz);
        const struct channel_settings *channel = &stream->channels[c - 1];
        status = recorder_calibration(recorder, watch_ns, number, &channel->calibration, &facts);
        if (status == STATUS_OK)
            status = say_what_is_wrong(recorder, watch_ns, unix_ns, number, channel, &facts);
    }
    return status;
}
