/* Signing in and out, and who one is. */
#include "base/text.h"
#include "http/routes.h"
#include <jansson.h>
#include <stdio.h>
#include <string.h>

/* Queues the answer with a cookie; an empty token takes the old one back. */
static enum MHD_Result answer_with_cookie(struct request *request, const char *token)
{
    char cookie[SESSION_SIZE + 128];
    snprintf(cookie, sizeof cookie, "%s=%s; Path=/; HttpOnly; SameSite=Strict; Max-Age=%d%s", VISITOR_COOKIE,
             token, *token ? SESSION_DAYS * 86400 : 0, request->http->secure ? "; Secure" : "");
    static char body[] = "{}\n";
    struct MHD_Response *response =
        MHD_create_response_from_buffer(sizeof body - 1, body, MHD_RESPMEM_PERSISTENT);
    if (!response)
        return MHD_NO;
    http_add_headers(response);
    MHD_add_response_header(response, "Content-Type", "application/json");
    MHD_add_response_header(response, "Set-Cookie", cookie);
    enum MHD_Result result = MHD_queue_response(request->connection, MHD_HTTP_OK, response);
    MHD_destroy_response(response);
    return result;
}

static enum MHD_Result refuse_to_wait(struct request *request)
{
    char address[VISITOR_ADDRESS_SIZE], why[96];
    visitor_address(request->connection, address);
    snprintf(why, sizeof why, "too many passwords were wrong; try again in %lld s",
             (long long)visitors_wait_s(request->http->visitors, address));
    return http_refuse(request->connection, MHD_HTTP_TOO_MANY_REQUESTS, why, NULL, NULL);
}

static enum MHD_Result answer_tried(struct request *request)
{
    switch (request->item.status) {
    case STATUS_OK:
        return answer_with_cookie(request, request->item.sign_in.token);
    case STATUS_MISMATCH:
        return http_refuse(request->connection, MHD_HTTP_UNAUTHORIZED, "name or password is wrong", NULL,
                           NULL);
    case STATUS_BUSY:
        return refuse_to_wait(request);
    default:
        return http_refuse(request->connection, MHD_HTTP_SERVICE_UNAVAILABLE, "not now; try again", NULL,
                           NULL);
    }
}

/* Name and password of the body; false when they are not there or too long. */
static bool read_body(struct request *request, struct desk_sign_in *out)
{
    json_t *body = json_loadb(request->body, request->body_length, JSON_REJECT_DUPLICATES, NULL);
    const char *name = json_string_value(json_object_get(body, "name"));
    const char *password = json_string_value(json_object_get(body, "password"));
    bool good =
        name && password && strlen(name) < sizeof out->name && strlen(password) < sizeof out->password;
    if (good) {
        snprintf(out->name, sizeof out->name, "%s", name);
        snprintf(out->password, sizeof out->password, "%s", password);
    }
    json_decref(body);
    sodium_memzero(request->body, request->body_length);
    return good;
}

enum MHD_Result api_sign_in(struct request *request)
{
    if (request->submitted)
        return answer_tried(request);
    struct desk_item *item = &request->item;
    if (!read_body(request, &item->sign_in))
        return http_refuse(request->connection, MHD_HTTP_BAD_REQUEST, "a sign-in is name and password", NULL,
                           NULL);
    visitor_address(request->connection, item->sign_in.address);
    item->connection = request->connection;
    request->submitted = true;
    if (desk_submit(request->http->door, item) == STATUS_OK)
        return MHD_YES; /* suspended; called again when the password has been checked */
    return http_refuse(request->connection, MHD_HTTP_SERVICE_UNAVAILABLE,
                       "too many sign in at once; try again", NULL, NULL);
}

enum MHD_Result api_sign_out(struct request *request)
{
    return answer_with_cookie(request, "");
}

enum MHD_Result api_who(struct request *request)
{
    struct text text = {0};
    text_append(&text, "{\"role\":");
    text_json_string(&text, role_text(request->visitor.role));
    text_append(&text, ",\"account\":");
    text_json_string(&text, request->visitor.account);
    text_append(&text, "}\n");
    return http_answer_json(request->connection, &text);
}
