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

/* GnuTLS priorities: its defaults, without the versions that RFC 8996 took out of use. */
static char tls_versions[] = "NORMAL:-VERS-ALL:+VERS-TLS1.3:+VERS-TLS1.2";

struct socket_address {
    union {
        struct sockaddr any;
        struct sockaddr_in v4;
        struct sockaddr_in6 v6;
    } as;
    socklen_t size;
};

/* False when it is no address; whether it is a loopback one. */
static bool parse_address(const char *address, uint32_t port, struct socket_address *out, bool *out_loopback)
{
    memset(out, 0, sizeof *out);
    if (strcmp(address, "localhost") == 0)
        address = "127.0.0.1";
    if (inet_pton(AF_INET, address, &out->as.v4.sin_addr) == 1) {
        out->as.v4.sin_family = AF_INET;
        out->as.v4.sin_port = htons((uint16_t)port);
        out->size = sizeof out->as.v4;
        *out_loopback = ntohl(out->as.v4.sin_addr.s_addr) >> 24 == 127;
        return true;
    }
    out->as.v6.sin6_family = AF_INET6;
    out->as.v6.sin6_port = htons((uint16_t)port);
    out->size = sizeof out->as.v6;
    if (inet_pton(AF_INET6, address, &out->as.v6.sin6_addr) != 1)
        return false;
    *out_loopback = IN6_IS_ADDR_LOOPBACK(&out->as.v6.sin6_addr);
    return true;
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
    if (bind(fd, &address->as.any, address->size) != 0 || listen(fd, 256) != 0)
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
    int64_t looked_ns = 0;
    while (!atomic_load(&http->stopping)) {
        if (http->board)
            seen = board_wait(http->board, seen, waiting ? 20 * 1000000 : 100 * 1000000);
        else
            usleep(100000);
        int64_t now_ns = http_now_ns();
        waiting = http->events && events_wake_due(http->events, seen, now_ns);
        connections_cut(http->connections, now_ns);
        if (now_ns - looked_ns >= TIME_NS_PER_S) {
            visitors_refresh(http->visitors);
            looked_ns = now_ns;
        }
    }
    return NULL;
}

static enum status start_library(struct http *http)
{
    struct MHD_OptionItem tls[] = {{MHD_OPTION_HTTPS_MEM_CERT, 0, http->certificate},
                                   {MHD_OPTION_HTTPS_MEM_KEY, 0, http->key},
                                   {MHD_OPTION_HTTPS_PRIORITIES, 0, tls_versions},
                                   {MHD_OPTION_END, 0, NULL}};
    unsigned flags = MHD_USE_EPOLL_INTERNAL_THREAD | MHD_ALLOW_SUSPEND_RESUME | MHD_USE_ITC;
    http->daemon = MHD_start_daemon(
        flags | (http->secure ? MHD_USE_TLS : 0), 0, NULL, NULL, http_handle, http, MHD_OPTION_ARRAY,
        http->secure ? tls : tls + 3, MHD_OPTION_LISTEN_SOCKET, http->listen_fd, MHD_OPTION_CONNECTION_LIMIT,
        (unsigned)HTTP_MAX_CONNECTIONS, MHD_OPTION_CONNECTION_TIMEOUT, (unsigned)HTTP_TIMEOUT_S,
        MHD_OPTION_CONNECTION_MEMORY_LIMIT, (size_t)32768, MHD_OPTION_STRICT_FOR_CLIENT, 1,
        MHD_OPTION_NOTIFY_CONNECTION, http_connection_changed, http, MHD_OPTION_NOTIFY_COMPLETED,
        http_completed, http, MHD_OPTION_END);
    if (!http->daemon)
        return STATUS_SYSTEM;
    http->has_tender = pthread_create(&http->tender, NULL, tend, http) == 0;
    return http->has_tender ? STATUS_OK : STATUS_SYSTEM;
}

static enum status hand_over(void *context, struct desk_item *item)
{
    struct http *http = context;
    return http->callbacks.take_note(http->callbacks.context, &item->note, item->id);
}

static enum status check_password(void *context, struct desk_item *item)
{
    struct http *http = context;
    struct desk_sign_in *sign_in = &item->sign_in;
    enum status status =
        visitors_sign_in(http->visitors, sign_in->address, sign_in->name, sign_in->password, sign_in->token);
    sodium_memzero(sign_in->password, sizeof sign_in->password);
    return status;
}

static enum status start_parts(struct http *http, const struct socket_address *address)
{
    enum status status = listen_on(http, address);
    if (status == STATUS_OK)
        status = connections_create(HTTP_MAX_CONNECTIONS + 8, HTTP_MAX_WAITING, &http->connections);
    if (status == STATUS_OK && http->board)
        status = events_create(http->board, &http->events);
    if (status == STATUS_OK && http->board)
        status = desk_create(hand_over, http, &http->desk);
    if (status == STATUS_OK && http->board)
        status = desk_create(check_password, http, &http->door);
    if (status == STATUS_OK)
        status = player_create(http->ring, http->clips, &http->player);
    return status == STATUS_OK ? start_library(http) : status;
}

/* A PEM file as text; NULL, and what is wrong added to problems. */
static char *read_pem(const char *path, struct problems *problems)
{
    static const size_t max = 65536;
    FILE *file = fopen(path, "re");
    char *text = file ? calloc(1, max) : NULL;
    size_t n = text ? fread(text, 1, max - 1, file) : 0;
    if (!text || !strstr(text, "-----BEGIN ") || n == max - 1) {
        problems_add(problems, path, 0, "pages", "%s",
                     file ? "is not a certificate or key in PEM form" : strerror(errno));
        free(text);
        text = NULL;
    }
    if (file)
        fclose(file);
    return text;
}

/* Accounts and certificate; without both an address that is not loopback is refused. */
static enum status take_credentials(struct http *http, const struct http_setup *setup, bool loopback,
                                    const char *where, struct problems *problems)
{
    enum status status = visitors_create(setup->accounts ? setup->accounts : "", problems, &http->visitors);
    if (status != STATUS_OK && status != STATUS_NOT_FOUND)
        return status;
    if (setup->certificate && *setup->certificate) {
        http->certificate = read_pem(setup->certificate, problems);
        http->key = read_pem(setup->key, problems);
        if (!http->certificate || !http->key)
            return STATUS_BAD_FORMAT;
        http->secure = true;
    }
    if (loopback || (http->secure && visitors_any(http->visitors)))
        return STATUS_OK;
    problems_add(problems, "pages", 0, where,
                 "is not a loopback address (127.0.0.1, ::1, localhost), and needs %s",
                 http->secure ? "accounts: 'hushwatch user add'" : "a certificate and a key");
    return STATUS_OUT_OF_RANGE;
}

static void say_why_not(const struct http *http, enum status status, const char *where,
                        struct problems *problems)
{
    if (status == STATUS_BUSY)
        problems_add(problems, "pages", 0, where, "another program has this port; choose another one");
    else if (problems->count == 0)
        problems_add(problems, "pages", 0, where, "cannot serve the pages (%s)%s",
                     errno ? strerror(errno) : status_text(status),
                     http->secure ? "; do certificate and key belong together?" : "");
}

/* Ashore nobody else knows which clips there are. */
static enum status find_clips(struct http *http, const char *path)
{
    struct ledger *ledger;
    char problem[LEDGER_PROBLEM_SIZE];
    enum status status = clip_store_create(http->clips_folder, &http->own_clips);
    http->clips = http->own_clips;
    if (status != STATUS_OK || ledger_open(path, LEDGER_READ, &ledger, problem) != STATUS_OK)
        return status;
    clip_store_load(http->own_clips, ledger); /* an older ledger has none */
    ledger_close(ledger);
    return STATUS_OK;
}

static enum status start_review(struct http *http, const struct http_setup *setup)
{
    if (!setup->ledger)
        return STATUS_OK;
    const char *slash = strrchr(setup->ledger, '/');
    snprintf(http->ledger_name, sizeof http->ledger_name, "%s", slash ? slash + 1 : setup->ledger);
    int made = setup->clips ? asprintf(&http->clips_folder, "%s", setup->clips)
                            : asprintf(&http->clips_folder, "%s.sound/clips", setup->ledger);
    if (made < 0) {
        http->clips_folder = NULL;
        return STATUS_NO_MEMORY;
    }
    enum status status = readers_create(setup->ledger, &http->readers);
    if (status == STATUS_OK && !http->board)
        status = find_clips(http, setup->ledger);
    return status == STATUS_OK ? checker_create(setup->ledger, &http->checker) : status;
}

enum status http_start(const struct http_setup *setup, const struct http_callbacks *callbacks,
                       struct problems *problems, struct http **out)
{
    struct socket_address address;
    char where[128];
    snprintf(where, sizeof where, "%s port %u", setup->address, setup->port);
    bool loopback;
    if (!parse_address(setup->address, setup->port, &address, &loopback)) {
        problems_add(problems, "pages", 0, where,
                     "is no address; allowed: an IPv4 or IPv6 address, localhost");
        return STATUS_OUT_OF_RANGE;
    }
    struct http *http = calloc(1, sizeof *http);
    if (!http)
        return STATUS_NO_MEMORY;
    http->listen_fd = -1;
    http->board = setup->board;
    http->ring = setup->ring;
    http->clips = setup->store;
    memcpy(http->listening, setup->listening, sizeof http->listening);
    for (uint32_t i = 0; i < setup->n_hosts && i < HTTP_MAX_HOSTS; i++, http->n_hosts++)
        snprintf(http->hosts[i], sizeof http->hosts[i], "%s", setup->hosts[i]);
    http->callbacks = *callbacks;
    enum status status = take_credentials(http, setup, loopback, where, problems);
    errno = 0;
    if (status == STATUS_OK)
        status = start_review(http, setup);
    if (status == STATUS_OK)
        status = start_parts(http, &address);
    if (status != STATUS_OK) {
        say_why_not(http, status, where, problems);
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
        if (http->board)
            board_wake(http->board);
        pthread_join(http->tender, NULL);
    }
    if (http->daemon)
        MHD_quiesce_daemon(http->daemon);
    desk_stop(http->desk);
    desk_stop(http->door);
    readers_stop(http->readers);
    player_stop(http->player);
    if (http->events)
        events_stop(http->events);
    if (http->daemon)
        MHD_stop_daemon(http->daemon);
    if (http->listen_fd >= 0)
        close(http->listen_fd);
    desk_destroy(http->desk);
    desk_destroy(http->door);
    visitors_destroy(http->visitors);
    free(http->certificate);
    if (http->key)
        sodium_memzero(http->key, strlen(http->key));
    free(http->key);
    readers_destroy(http->readers);
    checker_destroy(http->checker);
    free(http->clips_folder);
    player_destroy(http->player);
    clip_store_destroy(http->own_clips);
    events_destroy(http->events);
    connections_destroy(http->connections);
    free(http);
}
