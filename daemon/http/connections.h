/* A deadline of our own for each connection: the library's timeout counts silence, so a sender of one byte
 * now and then would hold a connection for ever. */
#ifndef HTTP_CONNECTIONS_H
#define HTTP_CONNECTIONS_H

#include "base/status.h"
#include <stdint.h>

struct connections;

/* Room for `max` connections. STATUS_NO_MEMORY. The caller owns *out. */
enum status connections_create(uint32_t max, struct connections **out);
void connections_destroy(struct connections *connections);

/* Sets, moves or (deadline_ns < 0) lifts the deadline of a socket, in nanoseconds of the monotonic clock. */
void connections_set(struct connections *connections, int fd, int64_t deadline_ns);
/* Forgets a socket; to be called before it is closed. */
void connections_forget(struct connections *connections, int fd);
/* Shuts down every socket whose deadline is over; the library then ends it. */
void connections_cut(struct connections *connections, int64_t now_ns);

#endif
