/* Event streams (WHATWG HTML, server-sent events): each carries whole states and a beat each second.
 *
 * A stream that reads slowly gets the newest state when it is ready for it, and misses those between. */
#ifndef HTTP_EVENTS_H
#define HTTP_EVENTS_H

#include "base/status.h"
#include "http/board.h"
#include <microhttpd.h>
#include <stdbool.h>
#include <stdint.h>

struct events;

/* The board is borrowed. STATUS_NO_MEMORY. The caller owns *out. */
enum status events_create(struct board *board, struct events **out);
/* All streams must have ended. */
void events_destroy(struct events *events);

/* A response that streams to this connection, or NULL when there are too many streams or no memory. last_id
 * is the last event that the page has seen (may be NULL): when nothing changed since, it is not sent again.
 */
struct MHD_Response *events_open(struct events *events, struct MHD_Connection *connection,
                                 const char *last_id);

/* Resumes every stream for which something is due. Returns whether one waits for its pace to allow a state.
 */
bool events_wake_due(struct events *events, uint64_t sequence, int64_t now_ns);

/* From now on every stream ends. */
void events_stop(struct events *events);

/* Nanoseconds of the monotonic clock. */
int64_t http_now_ns(void);

#endif
