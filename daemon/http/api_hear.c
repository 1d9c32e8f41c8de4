/* Sound to be heard: of the ring, and clips by the ids of their entries. */
#include "base/time.h"
#include "http/routes.h"
#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static const char *query(const struct request *request, const char *name)
{
    return MHD_lookup_connection_value(request->connection, MHD_GET_ARGUMENT_KIND, name);
}

/* A number of the query between two; *out stays where it is not given, false where it is wrong. */
static bool query_number(const struct request *request, const char *name, double min, double max, double *out)
{
    const char *text = query(request, name);
    char *end;
    if (!text)
        return true;
    double value = strtod(text, &end);
    if (*text == '\0' || *end != '\0' || !(value >= min && value <= max))
        return false;
    *out = value;
    return true;
}

/* "bytes=A-B", "bytes=A-", "bytes=-N" (RFC 9110, section 14): of size bytes. A header of another form, or of
 * several ranges, is as none: the whole is sent. False: it can be read, and lies outside. */
static bool find_range(const char *header, size_t size, size_t *first, size_t *last)
{
    uint64_t from = 0, to = UINT64_MAX;
    int used = 0;
    *first = 0;
    *last = size - 1;
    if (!header || strncmp(header, "bytes=", 6) != 0)
        return true;
    const char *text = header + 6;
    if (sscanf(text, "-%" SCNu64 "%n", &to, &used) == 1 && text[used] == '\0') {
        *first = to < size ? size - (size_t)to : 0;
        return to > 0;
    }
    used = 0;
    to = UINT64_MAX;
    if (text[0] < '0' || text[0] > '9' || sscanf(text, "%" SCNu64 "-%n", &from, &used) != 1 || used == 0)
        return true;
    if (text[used] != '\0') {
        int more = 0;
        if (text[used] < '0' || text[used] > '9' || sscanf(text + used, "%" SCNu64 "%n", &to, &more) != 1 ||
            text[used + more] != '\0')
            return true;
    }
    *first = from < size ? (size_t)from : size;
    *last = to < size ? (size_t)to : size - 1;
    return *first <= *last;
}

static enum MHD_Result refuse_range(struct request *request, size_t size)
{
    char range[64];
    struct MHD_Response *response = MHD_create_response_from_buffer(0, NULL, MHD_RESPMEM_PERSISTENT);
    if (!response)
        return MHD_NO;
    snprintf(range, sizeof range, "bytes */%zu", size);
    http_add_headers(response);
    MHD_add_response_header(response, "Content-Range", range);
    enum MHD_Result result =
        MHD_queue_response(request->connection, MHD_HTTP_RANGE_NOT_SATISFIABLE, response);
    MHD_destroy_response(response);
    return result;
}

static enum MHD_Result send_sound(struct request *request)
{
    struct player_item *item = &request->sound;
    const char *header = MHD_lookup_connection_value(request->connection, MHD_HEADER_KIND, "Range");
    size_t first, last, size = item->size;
    char text[80];
    if (!find_range(header, size, &first, &last))
        return refuse_range(request, size);
    bool part = first > 0 || last + 1 < size;
    if (part)
        memmove(item->data, item->data + first, last - first + 1);
    struct MHD_Response *response =
        MHD_create_response_from_buffer(last - first + 1, item->data, MHD_RESPMEM_MUST_FREE);
    if (!response)
        return MHD_NO;
    item->data = NULL; /* the response's */
    http_add_headers(response);
    MHD_add_response_header(response, "Content-Type", item->what == PLAYER_FILE ? "audio/flac" : "audio/wav");
    MHD_add_response_header(response, "Accept-Ranges", "bytes");
    if (item->what == PLAYER_FILE) {
        snprintf(text, sizeof text, "attachment; filename=\"%.48s.flac\"", item->id);
        MHD_add_response_header(response, "Content-Disposition", text);
    } else {
        snprintf(text, sizeof text, "%.2f", item->made_gain_db);
        MHD_add_response_header(response, "Hushwatch-Gain-dB", text);
    }
    if (part) {
        snprintf(text, sizeof text, "bytes %zu-%zu/%zu", first, last, size);
        MHD_add_response_header(response, "Content-Range", text);
    }
    enum MHD_Result result =
        MHD_queue_response(request->connection, part ? MHD_HTTP_PARTIAL_CONTENT : MHD_HTTP_OK, response);
    MHD_destroy_response(response);
    return result;
}

static enum MHD_Result answer_made(struct request *request)
{
    enum status status = request->sound.status;
    if (status == STATUS_OK)
        return send_sound(request);
    if (status == STATUS_NOT_FOUND || status == STATUS_END || status == STATUS_BAD_ARGUMENT)
        return http_refuse(request->connection, MHD_HTTP_NOT_FOUND, "this sound is not kept", NULL, NULL);
    return http_refuse(request->connection, MHD_HTTP_SERVICE_UNAVAILABLE,
                       "the sound could not be made; try again", NULL, NULL);
}

static enum MHD_Result submit(struct request *request)
{
    request->sound.connection = request->connection;
    request->submitted = true;
    if (player_submit(request->http->player, &request->sound) == STATUS_OK)
        return MHD_YES; /* suspended; called again when the sound is there */
    return http_refuse(request->connection, MHD_HTTP_SERVICE_UNAVAILABLE,
                       "too many sounds at once; try again", NULL, NULL);
}

/* What both have in common: form, hz, gain. NULL, or the name of the one that is wrong. */
static const char *read_form(struct request *request)
{
    struct player_item *item = &request->sound;
    const char *form = query(request, "form");
    item->centre_hz = item->gain_db = NAN;
    if (form && audible_form_from_text(form, &item->form) != STATUS_OK)
        return "form";
    if (!query_number(request, "hz", 1, 500000, &item->centre_hz))
        return "hz";
    return query_number(request, "gain", -200, 200, &item->gain_db) ? NULL : "gain";
}

static enum MHD_Result refuse_field(struct request *request, const char *field, const char *allowed)
{
    return http_refuse(request->connection, MHD_HTTP_BAD_REQUEST, "not allowed", field, allowed);
}

#define FORM_ALLOWED "form: as-is, slowed, shifted; hz: 1 to 500000; gain: -200 to 200 dB"

enum MHD_Result api_hear(struct request *request)
{
    struct player_item *item = &request->sound;
    double stream = 1, channel = 0, from_s = -1, to_s = -1;
    if (request->submitted)
        return answer_made(request);
    *item = (struct player_item){.what = PLAYER_RING};
    const char *wrong = read_form(request);
    if (wrong)
        return refuse_field(request, wrong, FORM_ALLOWED);
    if (!query_number(request, "stream", 1, SITE_MAX_STREAMS, &stream) || floor(stream) != stream)
        return refuse_field(request, "stream", "a stream's number, from 1");
    if (!query_number(request, "channel", 1, FLOW_MAX_CHANNELS, &channel) || floor(channel) != channel)
        return refuse_field(request, "channel", "a channel's number, from 1");
    if (!query_number(request, "from", 0, 4e9, &from_s) || !query_number(request, "to", 0, 4e9, &to_s) ||
        !(from_s >= 0 && to_s > from_s && to_s - from_s <= PLAYER_LONGEST_S))
        return refuse_field(request, "from, to", "watch time in seconds, at most 60 s of it");
    item->stream = (uint32_t)stream;
    item->channel = channel > 0 ? (uint32_t)channel : request->http->listening[item->stream - 1];
    item->from_ns = time_from_s(from_s);
    item->to_ns = time_from_s(to_s);
    return submit(request);
}

/* "RUN.STREAM.sound.N" and nothing else. */
static bool is_clip_id(const char *id)
{
    uint32_t run, stream;
    uint64_t counter;
    char again[FLOW_ID_SIZE];
    if (sscanf(id, "%" SCNu32 ".%" SCNu32 ".sound.%" SCNu64, &run, &stream, &counter) != 3)
        return false;
    flow_id(run, stream, "sound", counter, again);
    return strcmp(id, again) == 0;
}

enum MHD_Result api_hear_clip(struct request *request)
{
    struct player_item *item = &request->sound;
    const char *form = query(request, "form");
    if (request->submitted)
        return answer_made(request);
    *item = (struct player_item){.what = PLAYER_CLIP};
    if (!is_clip_id(request->rest))
        return http_refuse(request->connection, MHD_HTTP_NOT_FOUND, "there is no such clip", NULL, NULL);
    memcpy(item->id, request->rest, sizeof item->id);
    if (form && strcmp(form, "file") == 0) {
        item->what = PLAYER_FILE;
        return submit(request);
    }
    const char *wrong = read_form(request);
    return wrong ? refuse_field(request, wrong, FORM_ALLOWED ", file") : submit(request);
}
