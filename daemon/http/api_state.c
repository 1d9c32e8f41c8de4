/* The state, once and as a stream, and what never changes in a run. */
#include "http/routes.h"
#include <string.h>

enum MHD_Result api_state(struct request *request)
{
    struct board *board = request->http->board;
    const struct snapshot *snapshot = board_take(board);
    enum MHD_Result result = http_answer(request->connection, MHD_HTTP_OK, "application/json", snapshot->json,
                                         snapshot->json_length);
    board_release(board, snapshot);
    return result;
}

enum MHD_Result api_permit(struct request *request)
{
    const char *json = board_fixed_json(request->http->board);
    return http_answer(request->connection, MHD_HTTP_OK, "application/json", json, strlen(json));
}

enum MHD_Result api_events(struct request *request)
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
