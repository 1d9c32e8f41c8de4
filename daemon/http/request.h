/* One request: checked before any route sees it. */
#ifndef HTTP_REQUEST_H
#define HTTP_REQUEST_H

#include "base/text.h"
#include "http/connections.h"
#include "http/desk.h"
#include "http/events.h"
#include "http/player.h"
#include "http/review.h"
#include "http/server.h"
#include "http/visitor.h"
#include "http/web.h"
#include "ledger/checker.h"
#include <microhttpd.h>
#include <pthread.h>
#include <stdatomic.h>
#include <stdbool.h>

/* What all requests share. */
struct http {
    struct MHD_Daemon *daemon;
    int listen_fd;
    uint32_t port;
    struct board *board; /* NULL ashore: nothing but the review of a ledger */
    struct disk_ring *ring;
    struct clip_store *clips;     /* of the watch, or of the ledger ashore */
    struct clip_store *own_clips; /* ashore: to be destroyed here */
    struct connections *connections;
    struct events *events;
    struct desk *desk; /* notes */
    struct desk *door; /* sign-ins */
    struct visitors *visitors;
    struct http_callbacks callbacks;
    char *certificate, *key; /* PEM texts; NULL without TLS */
    bool secure;             /* the connections are TLS */
    struct readers *readers; /* NULL, as the two below, where there is no ledger */
    struct checker *checker;
    char *clips_folder;
    char ledger_name[256]; /* the file's, for people */
    struct player *player;
    uint32_t listening[SITE_MAX_STREAMS]; /* see http_setup */
    uint32_t n_hosts;
    char hosts[HTTP_MAX_HOSTS][NOTE_NAME_SIZE];
    pthread_t tender;
    bool has_tender;
    atomic_bool stopping;
};

struct request {
    struct http *http;
    struct MHD_Connection *connection;
    const struct route *route;
    const struct web_file *file; /* NULL for an endpoint */
    struct visitor visitor;
    bool too_large;
    bool submitted; /* the item is with a desk, or was */
    size_t body_length;
    char body[HTTP_MAX_BODY];
    char rest[FLOW_ID_SIZE]; /* of the path, where its route is a beginning; "" where it is too long */
    struct desk_item item;
    struct review review;
    struct player_item sound;
};

struct route {
    const char *method, *path;
    enum MHD_Result (*answer)(struct request *request);
};

/* Whether strangers may ask for it: the sign-in, and the files of web/ that are no page of the watch. */
bool http_is_open(const struct route *route, const struct web_file *file);

/* The route of a path and method, or NULL; whether the path exists at all; the embedded file that it names,
 * NULL where it is an endpoint; what of the path follows the route's, within path. ashore: of what a ledger
 * alone can answer. */
const struct route *http_find_route(bool ashore, const char *method, const char *path, bool *out_exists,
                                    const struct web_file **out_file, const char **out_rest);

/* Queues an answer with the headers that every answer has; the body is copied. */
enum MHD_Result http_answer(struct MHD_Connection *connection, unsigned code, const char *type,
                            const void *body, size_t length);
/* Queues a JSON text as a good answer and destroys it; MHD_NO where it failed. */
enum MHD_Result http_answer_json(struct MHD_Connection *connection, struct text *text);
/* A refusal as JSON: error, field, allowed; the last two may be NULL. */
enum MHD_Result http_refuse(struct MHD_Connection *connection, unsigned code, const char *error,
                            const char *field, const char *allowed);
/* Adds the headers that every answer has. */
void http_add_headers(struct MHD_Response *response);

/* The library's callbacks. */
enum MHD_Result http_handle(void *context, struct MHD_Connection *connection, const char *url,
                            const char *method, const char *version, const char *upload, size_t *upload_size,
                            void **request_context);
void http_completed(void *context, struct MHD_Connection *connection, void **request_context,
                    enum MHD_RequestTerminationCode why);
void http_connection_changed(void *context, struct MHD_Connection *connection, void **socket_context,
                             enum MHD_ConnectionNotificationCode what);

#endif
