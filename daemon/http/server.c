/* Start and end of the pages' server. */
#include "http/server.h"
#include "base/time.h"
#include "http/request.h"
#include <arpa/inet.h>
#include <errno.h>
#include <netinet/in.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <unistd.h>

struct socket_address {
    union {
        struct sockaddr any;
        struct sockaddr_in v4;
        struct sockaddr_in6 v6;
    } as;
    socklen_t size;
};

static bool parse_loopback(const char *address, uint32_t port, struct socket_address *out)
{
    memset(out, 0, sizeof *out);
    if (strcmp(address, "localhost") == 0)
        address = "127.0.0.1";
    if (inet_pton(AF_INET, address, &out->as.v4.sin_addr) == 1) {
        out->as.v4.sin_family = AF_INET;
        out->as.v4.sin_port = htons((uint16_t)port);
        out->size = sizeof out->as.v4;
        return ntohl(out->as.v4.sin_addr.s_addr) >> 24 == 127;
    }
    out->as.v6.sin6_family = AF_INET6;
    out->as.v6.sin6_port = htons((uint16_t)port);
    out->size = sizeof out->as.v6;
    return inet_pton(AF_INET6, address, &out->as.v6.sin6_addr) == 1 &&
           IN6_IS_ADDR_LOOPBACK(&out->as.v6.sin6_addr);
}

/* Binds here and not in the library, to know exactly what failed. */
static enum status listen_on(struct http *http, const struct socket_address *address)
{
    int fd = socket(address->as.any.sa_family, SOCK_STREAM | SOCK_NONBLOCK | SOCK_CLOEXEC, 0);
    if (fd < 0)
        return STATUS_SYSTEM;
    http->listen_fd = fd;
    int yes = 1;
    setsockopt(fd, SOL_SOCKET, SO_REUSEADDR, &yes, sizeof yes);
    if (bind(fd, &address->as.any, address->size) != 0 || listen(fd, 64) != 0)
        return errno == EADDRINUSE ? STATUS_BUSY : STATUS_SYSTEM;
    struct socket_address real = {.size = sizeof real.as};
    if (getsockname(fd, &real.as.any, &real.size) != 0)
        return STATUS_SYSTEM;
    http->port = ntohs(real.as.any.sa_family == AF_INET6 ? real.as.v6.sin6_port : real.as.v4.sin_port);
    return STATUS_OK;
}

static void *tend(void *context)
{
    struct http *http = context;
    uint64_t seen = 0;
    bool waiting = false;
    while (!atomic_load(&http->stopping)) {
        seen = board_wait(http->board, seen, waiting ? 20 * 1000000 : 100 * 1000000);
        int64_t now_ns = http_now_ns();
        waiting = events_wake_due(http->events, seen, now_ns);
        connections_cut(http->connections, now_ns);
    }
    return NULL;
}

static enum status start_library(struct http *http)
{
    http->daemon = MHD_start_daemon(
        MHD_USE_EPOLL_INTERNAL_THREAD | MHD_ALLOW_SUSPEND_RESUME | MHD_USE_ITC, 0, NULL, NULL, http_handle,
        http, MHD_OPTION_LISTEN_SOCKET, http->listen_fd, MHD_OPTION_CONNECTION_LIMIT,
        (unsigned)HTTP_MAX_CONNECTIONS, MHD_OPTION_PER_IP_CONNECTION_LIMIT,
        (unsigned)HTTP_MAX_CONNECTIONS_AN_ADDRESS, MHD_OPTION_CONNECTION_TIMEOUT, (unsigned)HTTP_TIMEOUT_S,
        MHD_OPTION_CONNECTION_MEMORY_LIMIT, (size_t)32768, MHD_OPTION_STRICT_FOR_CLIENT, 1,
        MHD_OPTION_NOTIFY_CONNECTION, http_connection_changed, http, MHD_OPTION_NOTIFY_COMPLETED,
        http_completed, http, MHD_OPTION_END);
    if (!http->daemon)
        return STATUS_SYSTEM;
    http->has_tender = pthread_create(&http->tender, NULL, tend, http) == 0;
    return http->has_tender ? STATUS_OK : STATUS_SYSTEM;
}

static enum status start_parts(struct http *http, const struct socket_address *address,
                               const struct http_callbacks *callbacks)
{
    enum status status = listen_on(http, address);
    if (status == STATUS_OK)
        status = connections_create(HTTP_MAX_CONNECTIONS + 8, &http->connections);
    if (status == STATUS_OK)
        status = events_create(http->board, &http->events);
    if (status == STATUS_OK)
        status = desk_create(callbacks, &http->desk);
    return status == STATUS_OK ? start_library(http) : status;
}

enum status http_start(const struct http_setup *setup, const struct http_callbacks *callbacks,
                       struct problems *problems, struct http **out)
{
    struct socket_address address;
    char where[128];
    snprintf(where, sizeof where, "%s port %u", setup->address, setup->port);
    if (!parse_loopback(setup->address, setup->port, &address)) {
        problems_add(problems, "pages", 0, where,
                     "not a loopback address; allowed: 127.0.0.1, ::1, localhost (others need credentials)");
        return STATUS_OUT_OF_RANGE;
    }
    struct http *http = calloc(1, sizeof *http);
    if (!http)
        return STATUS_NO_MEMORY;
    http->listen_fd = -1;
    http->board = setup->board;
    for (uint32_t i = 0; i < setup->n_hosts && i < HTTP_MAX_HOSTS; i++, http->n_hosts++)
        snprintf(http->hosts[i], sizeof http->hosts[i], "%s", setup->hosts[i]);
    errno = 0;
    enum status status = start_parts(http, &address, callbacks);
    if (status != STATUS_OK) {
        if (status == STATUS_BUSY)
            problems_add(problems, "pages", 0, where, "another program has this port; choose another one");
        else
            problems_add(problems, "pages", 0, where, "cannot serve the pages (%s)",
                         errno ? strerror(errno) : status_text(status));
        http_stop(http);
        return status;
    }
    *out = http;
    return STATUS_OK;
}

uint32_t http_port(const struct http *http)
{
    return http->port;
}

void http_stop(struct http *http)
{
    if (!http)
        return;
    atomic_store(&http->stopping, true);
    if (http->has_tender) {
        board_wake(http->board);
        pthread_join(http->tender, NULL);
    }
    if (http->daemon)
        MHD_quiesce_daemon(http->daemon);
    desk_stop(http->desk);
    if (http->events)
        events_stop(http->events);
    if (http->daemon)
        MHD_stop_daemon(http->daemon);
    if (http->listen_fd >= 0)
        close(http->listen_fd);
    desk_destroy(http->desk);
    events_destroy(http->events);
    connections_destroy(http->connections);
    free(http);
}
