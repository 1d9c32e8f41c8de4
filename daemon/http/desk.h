/* The note desk: one thread that hands notes to the watch, so that no answer to others waits for it. */
#ifndef HTTP_DESK_H
#define HTTP_DESK_H

#include "base/status.h"
#include "http/server.h"
#include <microhttpd.h>

#define DESK_MAX_WAITING 16

/* A note on its way, owned by its request. */
struct desk_item {
    struct MHD_Connection *connection;
    struct note note;
    enum status status; /* what the watch said */
    char id[FLOW_ID_SIZE];
    struct desk_item *next;
};

struct desk;

/* STATUS_NO_MEMORY; STATUS_SYSTEM when no thread can be had. The caller owns *out. */
enum status desk_create(const struct http_callbacks *callbacks, struct desk **out);
/* Answers what waits with STATUS_BUSY, then ends the thread. */
void desk_stop(struct desk *desk);
void desk_destroy(struct desk *desk);

/* Suspends the connection and takes the item; when the watch has answered, the connection is resumed.
 * STATUS_BUSY, and no suspension, when too many wait or the desk is stopped. */
enum status desk_submit(struct desk *desk, struct desk_item *item);

#endif
