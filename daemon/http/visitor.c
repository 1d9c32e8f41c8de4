/* Visitors: the connection's address, then the cookie. */
#include "http/visitor.h"
#include "http/events.h"
#include <arpa/inet.h>
#include <netinet/in.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <time.h>

/* Changes whenever the file does; -1: there is none. */
static int64_t version_of(const char *path)
{
    struct stat facts;
    if (stat(path, &facts) != 0)
        return -1;
    return (int64_t)facts.st_mtim.tv_sec * 1000000007 + facts.st_mtim.tv_nsec + (int64_t)facts.st_size * 31 +
           (int64_t)(facts.st_ino & 0xffffffff) * 65537;
}

enum status visitors_create(const char *path, struct problems *problems, struct visitors **out)
{
    struct visitors *visitors = calloc(1, sizeof *visitors);
    if (!visitors)
        return STATUS_NO_MEMORY;
    pthread_mutex_init(&visitors->lock, NULL);
    tries_reset(&visitors->tries);
    snprintf(visitors->path, sizeof visitors->path, "%s", path);
    visitors->version = version_of(path);
    enum status status = *path ? accounts_read(path, problems, &visitors->accounts) : STATUS_NOT_FOUND;
    if (status != STATUS_OK && status != STATUS_NOT_FOUND) {
        visitors_destroy(visitors);
        return status;
    }
    *out = visitors;
    return status;
}

void visitors_destroy(struct visitors *visitors)
{
    if (!visitors)
        return;
    pthread_mutex_destroy(&visitors->lock);
    sodium_memzero(&visitors->accounts, sizeof visitors->accounts);
    free(visitors);
}

bool visitors_any(struct visitors *visitors)
{
    pthread_mutex_lock(&visitors->lock);
    bool any = visitors->accounts.n > 0;
    pthread_mutex_unlock(&visitors->lock);
    return any;
}

void visitors_refresh(struct visitors *visitors)
{
    int64_t version = *visitors->path ? version_of(visitors->path) : -1;
    if (version == visitors->version)
        return;
    struct problems problems = {0};
    struct accounts accounts = {0};
    enum status status = accounts_read(visitors->path, &problems, &accounts);
    problems_destroy(&problems);
    if (status != STATUS_OK)
        accounts = (struct accounts){0};
    pthread_mutex_lock(&visitors->lock);
    visitors->version = version;
    visitors->accounts = accounts;
    pthread_mutex_unlock(&visitors->lock);
    sodium_memzero(&accounts, sizeof accounts);
}

static const struct sockaddr *peer(struct MHD_Connection *connection)
{
    const union MHD_ConnectionInfo *info =
        MHD_get_connection_info(connection, MHD_CONNECTION_INFO_CLIENT_ADDRESS);
    return info ? info->client_addr : NULL;
}

static bool is_v4_loopback(uint32_t network_order)
{
    return ntohl(network_order) >> 24 == 127;
}

static bool is_here(const struct sockaddr *address)
{
    if (!address)
        return false;
    if (address->sa_family == AF_INET)
        return is_v4_loopback(((const struct sockaddr_in *)(const void *)address)->sin_addr.s_addr);
    if (address->sa_family != AF_INET6)
        return false;
    const struct in6_addr *v6 = &((const struct sockaddr_in6 *)(const void *)address)->sin6_addr;
    uint32_t last;
    memcpy(&last, v6->s6_addr + 12, sizeof last);
    return IN6_IS_ADDR_LOOPBACK(v6) || (IN6_IS_ADDR_V4MAPPED(v6) && is_v4_loopback(last));
}

void visitor_address(struct MHD_Connection *connection, char out[VISITOR_ADDRESS_SIZE])
{
    const struct sockaddr *address = peer(connection);
    const void *place = NULL;
    if (address && address->sa_family == AF_INET)
        place = &((const struct sockaddr_in *)(const void *)address)->sin_addr;
    else if (address && address->sa_family == AF_INET6)
        place = &((const struct sockaddr_in6 *)(const void *)address)->sin6_addr;
    if (!place || !inet_ntop(address->sa_family, place, out, VISITOR_ADDRESS_SIZE))
        snprintf(out, VISITOR_ADDRESS_SIZE, "unknown");
}

uint64_t visitor_network(struct MHD_Connection *connection)
{
    const struct sockaddr *address = peer(connection);
    uint64_t network = 0;
    if (address && address->sa_family == AF_INET)
        memcpy(&network, &((const struct sockaddr_in *)(const void *)address)->sin_addr, 4);
    else if (address && address->sa_family == AF_INET6)
        memcpy(&network, &((const struct sockaddr_in6 *)(const void *)address)->sin6_addr, sizeof network);
    return network;
}

void visitors_look(struct visitors *visitors, struct MHD_Connection *connection, struct visitor *out)
{
    *out = (struct visitor){.role = ROLE_NONE};
    if (is_here(peer(connection))) {
        out->role = ROLE_OBSERVER;
        return;
    }
    const char *token = MHD_lookup_connection_value(connection, MHD_COOKIE_KIND, VISITOR_COOKIE);
    if (!token)
        return;
    pthread_mutex_lock(&visitors->lock);
    const struct account *account = session_account(&visitors->accounts, token, (int64_t)time(NULL));
    if (account) {
        out->role = account->role;
        memcpy(out->account, account->name, sizeof out->account);
    }
    pthread_mutex_unlock(&visitors->lock);
}

int64_t visitors_wait_s(struct visitors *visitors, const char *address)
{
    pthread_mutex_lock(&visitors->lock);
    int64_t wait_ns = tries_wait_ns(&visitors->tries, address, http_now_ns());
    pthread_mutex_unlock(&visitors->lock);
    return (wait_ns + 999999999) / 1000000000;
}

enum status visitors_sign_in(struct visitors *visitors, const char *address, const char *name,
                             const char *password, char out_token[SESSION_SIZE])
{
    if (visitors_wait_s(visitors, address) > 0)
        return STATUS_BUSY;
    struct account account;
    pthread_mutex_lock(&visitors->lock);
    const struct account *found = accounts_find(&visitors->accounts, name);
    if (found)
        account = *found;
    pthread_mutex_unlock(&visitors->lock);
    bool good = account_password_is(found ? &account : NULL, password); /* not under the lock: it is slow */
    pthread_mutex_lock(&visitors->lock);
    if (good) {
        tries_good(&visitors->tries, address);
        session_issue(&visitors->accounts, &account, (int64_t)time(NULL) + SESSION_DAYS * 86400, out_token);
    } else
        tries_failed(&visitors->tries, address, http_now_ns());
    pthread_mutex_unlock(&visitors->lock);
    sodium_memzero(&account, sizeof account);
    return good ? STATUS_OK : STATUS_MISMATCH;
}

bool visitor_may_enter(enum role role, const struct note *note)
{
    if (role == ROLE_OBSERVER)
        return true;
    if (role != ROLE_CREW)
        return false;
    switch (note->kind) {
    case NOTE_ACKNOWLEDGEMENT:
    case NOTE_SOURCE:
        return true;
    case NOTE_SIGN_ON:
    case NOTE_SIGN_OFF:
        return strcmp(note->watch, "crew") == 0;
    default:
        return false;
    }
}
