/* A deadline of our own for each connection: the library's timeout counts silence, so a sender of one byte
 * now and then would hold a connection for ever. And a place for who comes next: of too many connections that
 * wait (whose request is not complete, or that are between two), the oldest of the address that has most is
 * cut, so that a crowd of slow senders, from however many addresses, keeps out nobody but itself. */
#ifndef HTTP_CONNECTIONS_H
#define HTTP_CONNECTIONS_H

#include "base/status.h"
#include <stdint.h>

struct connections;

/* Room for `max` connections, of which `max_waiting` may wait. STATUS_NO_MEMORY. The caller owns *out. */
enum status connections_create(uint32_t max, uint32_t max_waiting, struct connections **out);
void connections_destroy(struct connections *connections);

/* A new connection from an address (any number that tells them apart), with its deadline. */
void connections_open(struct connections *connections, int fd, uint64_t address, int64_t deadline_ns);
/* Moves or (deadline_ns < 0) lifts the deadline of a socket, in nanoseconds of the monotonic clock. */
void connections_set(struct connections *connections, int fd, int64_t deadline_ns);
/* Forgets a socket; to be called before it is closed. */
void connections_forget(struct connections *connections, int fd);
/* Shuts down every socket whose deadline is over; the library then ends it. */
void connections_cut(struct connections *connections, int64_t now_ns);

#endif
