/* Columns of the strips of sound. */
#include "base/text.h"
#include "base/time.h"
#include "http/routes.h"
#include "http/sound.h"
#include <stdlib.h>

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

enum MHD_Result api_sound(struct request *request)
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
