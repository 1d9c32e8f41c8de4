/* A desk: one thread that does what takes long (hands notes to the watch, checks passwords), so that no
 * answer to others waits for it. */
#ifndef HTTP_DESK_H
#define HTTP_DESK_H

#include "base/status.h"
#include "http/server.h"
#include "http/visitor.h"
#include <microhttpd.h>

#define DESK_MAX_WAITING 16

/* A sign-in on its way. */
struct desk_sign_in {
    char name[ACCOUNT_NAME_SIZE], password[ACCOUNT_PASSWORD_MAX + 1];
    char address[VISITOR_ADDRESS_SIZE];
    char token[SESSION_SIZE]; /* of the session, once the password was found good */
};

/* What is on its way, owned by its request. */
struct desk_item {
    struct MHD_Connection *connection;
    union {
        struct note note;
        struct desk_sign_in sign_in;
    };
    enum status status;    /* what came of it */
    char id[FLOW_ID_SIZE]; /* of the note's entry */
    struct desk_item *next;
};

/* Does the work of one item. */
typedef enum status (*desk_work)(void *context, struct desk_item *item);

struct desk;

/* STATUS_NO_MEMORY; STATUS_SYSTEM when no thread can be had. The caller owns *out. */
enum status desk_create(desk_work work, void *context, struct desk **out);
/* Answers what waits with STATUS_BUSY, then ends the thread. */
void desk_stop(struct desk *desk);
void desk_destroy(struct desk *desk);

/* Suspends the connection and takes the item; when its work is done, the connection is resumed.
 * STATUS_BUSY, and no suspension, when too many wait or the desk is stopped. */
enum status desk_submit(struct desk *desk, struct desk_item *item);

#endif
