/* Requests: who may ask, how much, how long; then the routes. */
#include "http/request.h"
#include "base/text.h"
#include "base/time.h"
#include <arpa/inet.h>
#include <ctype.h>
#include <netinet/in.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>
#include <sys/socket.h>

static const char *header(struct MHD_Connection *connection, const char *name)
{
    return MHD_lookup_connection_value(connection, MHD_HEADER_KIND, name);
}

static int socket_of(struct MHD_Connection *connection)
{
    const union MHD_ConnectionInfo *info =
        MHD_get_connection_info(connection, MHD_CONNECTION_INFO_CONNECTION_FD);
    return info ? info->connect_fd : -1;
}

void http_add_headers(struct MHD_Response *response)
{
    static const char *const headers[][2] = {
        {"Content-Security-Policy",
         "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; connect-src 'self'; "
         "media-src 'self'; "
         "base-uri 'none'; form-action 'none'; frame-ancestors 'none'"},
        {"X-Content-Type-Options", "nosniff"},
        {"X-Frame-Options", "DENY"},
        {"Referrer-Policy", "no-referrer"},
        {"Cross-Origin-Resource-Policy", "same-origin"},
        {"Cross-Origin-Opener-Policy", "same-origin"},
        {"Cache-Control", "no-store"},
    };
    for (size_t i = 0; i < sizeof headers / sizeof headers[0]; i++)
        MHD_add_response_header(response, headers[i][0], headers[i][1]);
}

enum MHD_Result http_answer(struct MHD_Connection *connection, unsigned code, const char *type,
                            const void *body, size_t length)
{
    /* The library's signature lacks const; with MUST_COPY it only reads. */
    union {
        const void *given;
        void *wanted;
    } bytes = {.given = body};
    struct MHD_Response *response =
        MHD_create_response_from_buffer(length, bytes.wanted, MHD_RESPMEM_MUST_COPY);
    if (!response)
        return MHD_NO;
    http_add_headers(response);
    MHD_add_response_header(response, "Content-Type", type);
    if (code == MHD_HTTP_METHOD_NOT_ALLOWED)
        MHD_add_response_header(response, "Allow", "GET, POST");
    enum MHD_Result result = MHD_queue_response(connection, code, response);
    MHD_destroy_response(response);
    return result;
}

enum MHD_Result http_answer_json(struct MHD_Connection *connection, struct text *text)
{
    enum MHD_Result result =
        text->failed ? MHD_NO
                     : http_answer(connection, MHD_HTTP_OK, "application/json", text->data, text->length);
    text_destroy(text);
    return result;
}

enum MHD_Result http_refuse(struct MHD_Connection *connection, unsigned code, const char *error,
                            const char *field, const char *allowed)
{
    struct text text = {0};
    text_append(&text, "{\"error\":");
    text_json_string(&text, error);
    if (field && *field) {
        text_append(&text, ",\"field\":");
        text_json_string(&text, field);
    }
    if (allowed && *allowed) {
        text_append(&text, ",\"allowed\":");
        text_json_string(&text, allowed);
    }
    text_append(&text, "}\n");
    enum MHD_Result result =
        text.failed ? MHD_NO : http_answer(connection, code, "application/json", text.data, text.length);
    text_destroy(&text);
    return result;
}

/* Whether a name is the address by which the connection came in: what a rebound name cannot be. */
static bool is_own_address(struct MHD_Connection *connection, const char *name)
{
    struct sockaddr_storage own;
    socklen_t size = sizeof own;
    char text[INET6_ADDRSTRLEN + 2] = "";
    if (getsockname(socket_of(connection), (struct sockaddr *)&own, &size) != 0)
        return false;
    if (own.ss_family == AF_INET)
        inet_ntop(AF_INET, &((struct sockaddr_in *)&own)->sin_addr, text, sizeof text);
    else if (own.ss_family == AF_INET6) {
        text[0] = '[';
        inet_ntop(AF_INET6, &((struct sockaddr_in6 *)&own)->sin6_addr, text + 1, sizeof text - 2);
        strcat(text, "]");
    }
    return strcasecmp(name, text) == 0;
}

/* Whether a Host header names this machine or a configured host. */
static bool is_host_allowed(const struct http *http, struct MHD_Connection *connection, const char *host)
{
    char name[NOTE_NAME_SIZE];
    size_t length = host[0] == '[' ? strcspn(host, "]") + 1 : strcspn(host, ":");
    if (length == 0 || length >= sizeof name || length > strlen(host))
        return false;
    memcpy(name, host, length);
    name[length] = '\0';
    const char *port = host + length;
    if (*port != '\0' && (*port != ':' || port[1 + strspn(port + 1, "0123456789")] != '\0'))
        return false;
    struct in_addr address;
    if (strcasecmp(name, "localhost") == 0 || strcmp(name, "[::1]") == 0)
        return true;
    if (inet_pton(AF_INET, name, &address) == 1 && ntohl(address.s_addr) >> 24 == 127)
        return true;
    if (is_own_address(connection, name))
        return true;
    for (uint32_t i = 0; i < http->n_hosts; i++)
        if (strcasecmp(name, http->hosts[i]) == 0)
            return true;
    return false;
}

/* A write must come from our own page, or from no page at all (a tool on this machine). */
static bool same_origin(const struct http *http, struct MHD_Connection *connection, const char *host)
{
    const char *origin = header(connection, "Origin");
    const char *scheme = http->secure ? "https://" : "http://";
    if (origin)
        return strncmp(origin, scheme, strlen(scheme)) == 0 && strcasecmp(origin + strlen(scheme), host) == 0;
    const char *site = header(connection, "Sec-Fetch-Site");
    return !site || strcmp(site, "same-origin") == 0 || strcmp(site, "none") == 0;
}

static bool is_json(struct MHD_Connection *connection)
{
    const char *type = header(connection, "Content-Type");
    size_t n = strlen("application/json");
    return type && strncasecmp(type, "application/json", n) == 0 &&
           (type[n] == '\0' || type[n] == ';' || type[n] == ' ');
}

/* What is wrong with the request before its body, as a code and a word; 0 when nothing is. */
static unsigned wrong(const struct http *http, struct MHD_Connection *connection, const char *method,
                      const struct route *route, bool exists, const char **out_why)
{
    bool post = strcmp(method, "POST") == 0;
    const char *host = header(connection, "Host");
    *out_why = "this server answers only to its own name";
    if (!host || !is_host_allowed(http, connection, host))
        return MHD_HTTP_MISDIRECTED_REQUEST;
    *out_why = "only GET and POST";
    if (!post && strcmp(method, "GET") != 0)
        return MHD_HTTP_METHOD_NOT_ALLOWED;
    *out_why = "there is nothing under this path";
    if (!exists)
        return MHD_HTTP_NOT_FOUND;
    *out_why = "this path does not take this method";
    if (!route)
        return MHD_HTTP_METHOD_NOT_ALLOWED;
    *out_why = "only this server's own pages may write";
    if (post && !same_origin(http, connection, host))
        return MHD_HTTP_FORBIDDEN;
    *out_why = "a write needs Content-Type application/json";
    if (post && !is_json(connection))
        return MHD_HTTP_UNSUPPORTED_MEDIA_TYPE;
    const char *length = header(connection, "Content-Length");
    *out_why = "the body is larger than 8192 bytes";
    if (length && strtoull(length, NULL, 10) > HTTP_MAX_BODY)
        return MHD_HTTP_CONTENT_TOO_LARGE;
    return 0;
}

/* Where a page sends a stranger: the sign-in, with the way back, of which the station is part. */
static void write_way(struct MHD_Connection *connection, const struct web_file *file, char *out, size_t size)
{
    const char *station = MHD_lookup_connection_value(connection, MHD_GET_ARGUMENT_KIND, "station");
    const char *name = strcmp(file->name, "index.html") == 0 ? "" : file->name;
    size_t n = (size_t)snprintf(out, size, "/sign-in#/%.*s%s", (int)strcspn(name, "."), name,
                                station ? "?station=" : "");
    for (; station && *station && n + 4 < size; station++)
        n += (size_t)snprintf(out + n, size - n, isalnum((unsigned char)*station) ? "%c" : "%%%02X",
                              (unsigned char)*station);
}

/* A page sends a stranger to the sign-in; an endpoint says that one is needed. */
static enum MHD_Result turn_away(struct MHD_Connection *connection, const struct web_file *file)
{
    if (!file)
        return http_refuse(connection, MHD_HTTP_UNAUTHORIZED, "sign in first", NULL, NULL);
    static char nothing[] = "";
    struct MHD_Response *response = MHD_create_response_from_buffer(0, nothing, MHD_RESPMEM_PERSISTENT);
    if (!response)
        return MHD_NO;
    http_add_headers(response);
    char way[512];
    write_way(connection, file, way, sizeof way);
    MHD_add_response_header(response, "Location", way);
    enum MHD_Result result = MHD_queue_response(connection, MHD_HTTP_SEE_OTHER, response);
    MHD_destroy_response(response);
    return result;
}

static enum MHD_Result begin(struct http *http, struct MHD_Connection *connection, const char *url,
                             const char *method, void **request_context)
{
    bool exists;
    const char *why;
    const struct web_file *file;
    const char *rest;
    const struct route *route = http_find_route(!http->board, method, url, &exists, &file, &rest);
    unsigned code = wrong(http, connection, method, route, exists, &why);
    if (code != 0)
        return http_refuse(connection, code, why, NULL, NULL);
    struct visitor visitor;
    visitors_look(http->visitors, connection, &visitor);
    if (visitor.role == ROLE_NONE && !http_is_open(route, file))
        return turn_away(connection, file);
    struct request *request = malloc(sizeof *request);
    if (!request)
        return MHD_NO;
    request->http = http;
    request->connection = connection;
    request->route = route;
    request->file = file;
    request->visitor = visitor;
    request->too_large = request->submitted = false;
    request->body_length = 0;
    review_reset(&request->review);
    request->sound.data = NULL;
    snprintf(request->rest, sizeof request->rest, "%s", strlen(rest) < sizeof request->rest ? rest : "");
    *request_context = request;
    return MHD_YES;
}

enum MHD_Result http_handle(void *context, struct MHD_Connection *connection, const char *url,
                            const char *method, const char *version, const char *upload, size_t *upload_size,
                            void **request_context)
{
    (void)version;
    struct http *http = context;
    struct request *request = *request_context;
    if (!request)
        return begin(http, connection, url, method, request_context);
    if (*upload_size > 0) {
        request->too_large |= *upload_size > HTTP_MAX_BODY - request->body_length;
        if (!request->too_large) {
            memcpy(request->body + request->body_length, upload, *upload_size);
            request->body_length += *upload_size;
        }
        *upload_size = 0;
        return MHD_YES;
    }
    connections_set(http->connections, socket_of(connection), -1); /* the request is complete */
    if (request->too_large)
        return http_refuse(connection, MHD_HTTP_CONTENT_TOO_LARGE, "the body is larger than 8192 bytes", NULL,
                           NULL);
    return request->route->answer(request);
}

void http_completed(void *context, struct MHD_Connection *connection, void **request_context,
                    enum MHD_RequestTerminationCode why)
{
    (void)why;
    struct http *http = context;
    connections_set(http->connections, socket_of(connection),
                    http_now_ns() + HTTP_IDLE_DEADLINE_S * TIME_NS_PER_S);
    struct request *request = *request_context;
    if (request) {
        review_end(&request->review);
        free(request->sound.data);
    }
    free(request);
    *request_context = NULL;
}

void http_connection_changed(void *context, struct MHD_Connection *connection, void **socket_context,
                             enum MHD_ConnectionNotificationCode what)
{
    (void)socket_context;
    struct http *http = context;
    if (what == MHD_CONNECTION_NOTIFY_STARTED)
        connections_open(http->connections, socket_of(connection), visitor_network(connection),
                         http_now_ns() + HTTP_REQUEST_DEADLINE_S * TIME_NS_PER_S);
    else
        connections_forget(http->connections, socket_of(connection));
}
