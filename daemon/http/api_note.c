/* Notes that people enter. */
#include "base/text.h"
#include "http/note_json.h"
#include "http/routes.h"
#include <stdio.h>

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
    return http_answer_json(request->connection, &text);
}

enum MHD_Result api_note(struct request *request)
{
    if (request->submitted)
        return answer_taken(request);
    struct note_refusal refusal;
    struct desk_item *item = &request->item;
    if (note_from_json(request->body, request->body_length, &item->note, &refusal) != STATUS_OK)
        return http_refuse(request->connection, MHD_HTTP_BAD_REQUEST, refusal.error, refusal.field,
                           refusal.allowed);
    if (!visitor_may_enter(request->visitor.role, &item->note))
        return http_refuse(request->connection, MHD_HTTP_FORBIDDEN, "your account may not enter this", "kind",
                           NULL);
    snprintf(item->note.account, sizeof item->note.account, "%s", request->visitor.account);
    item->connection = request->connection;
    request->submitted = true;
    if (desk_submit(request->http->desk, item) == STATUS_OK)
        return MHD_YES; /* suspended; called again when the watch has answered */
    return http_refuse(request->connection, MHD_HTTP_SERVICE_UNAVAILABLE, "too many notes at once; try again",
                       NULL, NULL);
}
