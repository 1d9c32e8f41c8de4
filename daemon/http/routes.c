/* The routes: one line each, and their small answers. */
#include "base/text.h"
#include "base/time.h"
#include "http/note_json.h"
#include "http/request.h"
#include "http/sound.h"
#include "http/web.h"
#include <stdlib.h>
#include <string.h>

static const char *type_of(const char *name)
{
    static const char *const types[][2] = {{".html", "text/html; charset=utf-8"},
                                           {".js", "text/javascript; charset=utf-8"},
                                           {".css", "text/css; charset=utf-8"},
                                           {".svg", "image/svg+xml"}};
    const char *dot = strrchr(name, '.');
    for (size_t i = 0; dot && i < sizeof types / sizeof types[0]; i++)
        if (strcmp(dot, types[i][0]) == 0)
            return types[i][1];
    return "application/octet-stream";
}

static enum MHD_Result answer_file(struct request *request, const char *name)
{
    for (const struct web_file *file = web_files; file->name; file++)
        if (strcmp(file->name, name) == 0)
            return http_answer(request->connection, MHD_HTTP_OK, type_of(name), file->data, file->size);
    return http_refuse(request->connection, MHD_HTTP_NOT_FOUND, "the page is not part of this program", NULL,
                       NULL);
}

static enum MHD_Result answer_observer(struct request *request)
{
    return answer_file(request, "index.html");
}

static enum MHD_Result answer_crew(struct request *request)
{
    return answer_file(request, "crew.html");
}

/* A file that is served under its own name. */
static enum MHD_Result answer_own_name(struct request *request)
{
    return answer_file(request, request->route->path + 1);
}

static enum MHD_Result answer_state(struct request *request)
{
    struct board *board = request->http->board;
    const struct snapshot *snapshot = board_take(board);
    enum MHD_Result result = http_answer(request->connection, MHD_HTTP_OK, "application/json", snapshot->json,
                                         snapshot->json_length);
    board_release(board, snapshot);
    return result;
}

static enum MHD_Result answer_permit(struct request *request)
{
    const char *json = board_fixed_json(request->http->board);
    return http_answer(request->connection, MHD_HTTP_OK, "application/json", json, strlen(json));
}

static enum MHD_Result answer_events(struct request *request)
{
    struct MHD_Response *response =
        events_open(request->http->events, request->connection,
                    MHD_lookup_connection_value(request->connection, MHD_HEADER_KIND, "Last-Event-ID"));
    if (!response)
        return http_refuse(request->connection, MHD_HTTP_SERVICE_UNAVAILABLE, "too many pages are open", NULL,
                           NULL);
    http_add_headers(response);
    MHD_add_response_header(response, "Content-Type", "text/event-stream");
    enum MHD_Result result = MHD_queue_response(request->connection, MHD_HTTP_OK, response);
    MHD_destroy_response(response);
    return result;
}

/* A time of the query in seconds; false when it is given and is not a number. */
static bool query_time(struct request *request, const char *name, double *out)
{
    const char *text = MHD_lookup_connection_value(request->connection, MHD_GET_ARGUMENT_KIND, name);
    if (!text)
        return true;
    char *end;
    double value = strtod(text, &end);
    if (*text == '\0' || *end != '\0' || !(value >= 0 && value < 4e9))
        return false;
    *out = value;
    return true;
}

static enum MHD_Result answer_sound(struct request *request)
{
    double stream = 1, from_s = 0, to_s = 4e9;
    bool good = query_time(request, "stream", &stream);
    if (!good || stream < 1 || stream > columns_streams(board_columns(request->http->board)))
        return http_refuse(request->connection, MHD_HTTP_BAD_REQUEST, "there is no such stream", "stream",
                           "a stream's number, from 1");
    if (!query_time(request, "from", &from_s) || !query_time(request, "to", &to_s))
        return http_refuse(request->connection, MHD_HTTP_BAD_REQUEST, "not a time", "from, to",
                           "watch time in seconds, 0 or more");
    struct text text = {0};
    enum status status = sound_json(&text, board_columns(request->http->board), (uint32_t)stream,
                                    time_from_s(from_s), time_from_s(to_s));
    enum MHD_Result result = status == STATUS_OK ? http_answer(request->connection, MHD_HTTP_OK,
                                                               "application/json", text.data, text.length)
                                                 : MHD_NO;
    text_destroy(&text);
    return result;
}

/* The watch's answer to a note that was with it. */
static enum MHD_Result answer_taken(struct request *request)
{
    if (request->item.status != STATUS_OK)
        return http_refuse(request->connection, MHD_HTTP_SERVICE_UNAVAILABLE,
                           request->item.status == STATUS_TIMEOUT
                               ? "the watch did not answer in time; look whether the note arrived"
                               : "the note was not taken; try again",
                           NULL, NULL);
    struct text text = {0};
    text_append(&text, "{\"id\":");
    text_json_string(&text, request->item.id);
    text_append(&text, "}\n");
    enum MHD_Result result = text.failed ? MHD_NO
                                         : http_answer(request->connection, MHD_HTTP_OK, "application/json",
                                                       text.data, text.length);
    text_destroy(&text);
    return result;
}

static enum MHD_Result answer_note(struct request *request)
{
    if (request->submitted)
        return answer_taken(request);
    struct note_refusal refusal;
    struct desk_item *item = &request->item;
    if (note_from_json(request->body, request->body_length, &item->note, &refusal) != STATUS_OK)
        return http_refuse(request->connection, MHD_HTTP_BAD_REQUEST, refusal.error, refusal.field,
                           refusal.allowed);
    item->connection = request->connection;
    request->submitted = true;
    if (desk_submit(request->http->desk, item) == STATUS_OK)
        return MHD_YES; /* suspended; called again when the watch has answered */
    return http_refuse(request->connection, MHD_HTTP_SERVICE_UNAVAILABLE, "too many notes at once; try again",
                       NULL, NULL);
}

const struct route http_routes[] = {
    {"GET", "/", answer_observer},
    {"GET", "/crew", answer_crew},
    {"GET", "/hushwatch.css", answer_own_name},
    {"GET", "/page.js", answer_own_name},
    {"GET", "/ladder.js", answer_own_name},
    {"GET", "/strips.js", answer_own_name},
    {"GET", "/observer.js", answer_own_name},
    {"GET", "/contacts.js", answer_own_name},
    {"GET", "/entry.js", answer_own_name},
    {"GET", "/crew.js", answer_own_name},
    {"GET", "/icon.svg", answer_own_name},
    {"GET", "/api/state", answer_state},
    {"GET", "/api/permit", answer_permit},
    {"GET", "/api/events", answer_events},
    {"GET", "/api/sound", answer_sound},
    {"POST", "/api/note", answer_note},
    {NULL, NULL, NULL},
};
