/* The pages' server: HTTP on a loopback address, or with accounts and a certificate on any, fed by the board.
 * The only user of libmicrohttpd.
 *
 * Threads of its own: the library's, which answers every request from memory; the tender, which wakes event
 * streams, cuts slow senders and follows the file of accounts; two desks, one that hands notes to the watch
 * and may wait for it, one that checks passwords; and for the review the readers and the checker of the
 * ledger, which may wait for the disk. */
#ifndef HTTP_SERVER_H
#define HTTP_SERVER_H

#include "base/status.h"
#include "flow.h"
#include "http/board.h"
#include "rule/note.h"
#include "settings/reader.h"
#include "sound/clip_store.h"
#include "sound/disk_ring.h"
#include <stdint.h>

#define HTTP_MAX_HOSTS 8
#define HTTP_MAX_CONNECTIONS 512
#define HTTP_MAX_WAITING 256 /* of them, that have no complete request */
#define HTTP_MAX_EVENT_STREAMS 64
#define HTTP_MAX_BODY 8192
#define HTTP_REQUEST_DEADLINE_S 5 /* from connecting to the last byte of the request */
#define HTTP_IDLE_DEADLINE_S 15   /* between two requests of one connection */
#define HTTP_TIMEOUT_S 30         /* without any byte taken by the other side */
#define HTTP_STATE_GAP_NS INT64_C(100000000)
#define HTTP_BEAT_GAP_NS INT64_C(1000000000)

struct http_setup {
    const char *address;    /* "127.0.0.1", "::1", "localhost"; any other needs accounts and a certificate */
    uint32_t port;          /* 0: any free one, see http_port */
    struct board *board;    /* borrowed until http_stop; NULL: nothing but the review of a ledger */
    const char *ledger;     /* its path, for the review; NULL: none */
    const char *clips;      /* the folder of the sounds kept; NULL: LEDGER.sound/clips */
    struct disk_ring *ring; /* sound that can be heard; NULL: none. Borrowed likewise */
    struct clip_store *store;             /* clips that can be heard; NULL: none. Borrowed likewise */
    uint32_t listening[SITE_MAX_STREAMS]; /* the channel of each stream that is heard when none is named */
    uint32_t n_hosts; /* further names that a Host header may carry (of a proxy that asks for credentials) */
    const char *hosts[HTTP_MAX_HOSTS];
    /* Files; NULL or "": none. Accounts of access/accounts.h; certificate (with its chain) and key in PEM. */
    const char *accounts, *certificate, *key;
};

struct http_callbacks {
    /* Hands a checked note to the watch and waits for its entry's id; called by one thread, must return
     * within 2 s, and at once while the daemon stops. STATUS_TIMEOUT, STATUS_BUSY or STATUS_FULL: not taken.
     */
    enum status (*take_note)(void *context, const struct note *note, char out_id[FLOW_ID_SIZE]);
    void *context;
};

struct http;

/* Binds and serves. A problem names address and port. STATUS_BUSY: the port is in use; STATUS_OUT_OF_RANGE:
 * an address that is not loopback; STATUS_SYSTEM; STATUS_NO_MEMORY. The caller owns *out. */
enum status http_start(const struct http_setup *setup, const struct http_callbacks *callbacks,
                       struct problems *problems, struct http **out);

/* The port that it listens on. */
uint32_t http_port(const struct http *http);

/* Ends every connection, open event streams too, within 0.5 s; takes NULL. */
void http_stop(struct http *http);

#endif
