/* Who asks: whoever sits at this machine may do all; others need an account's session. */
#ifndef HTTP_VISITOR_H
#define HTTP_VISITOR_H

#include "access/session.h"
#include "access/tries.h"
#include "rule/note.h"
#include "settings/reader.h"
#include <microhttpd.h>
#include <pthread.h>
#include <stdbool.h>

#define VISITOR_COOKIE "hushwatch"
#define VISITOR_ADDRESS_SIZE 64

struct visitor {
    enum role role;                  /* ROLE_NONE: must sign in; ROLE_OBSERVER at this machine */
    char account[ACCOUNT_NAME_SIZE]; /* "" at this machine and for strangers */
};

/* The accounts as their file has them now. */
struct visitors {
    pthread_mutex_t lock;
    char path[4096]; /* "": there are none */
    int64_t version; /* of the file as it was read: time of change, size and inode folded together */
    struct accounts accounts;
    struct tries tries;
};

/* Reads the accounts; path may be "". STATUS_NOT_FOUND: there is no such file (then there are no accounts,
 * and the object works); otherwise as accounts_read. */
enum status visitors_create(const char *path, struct problems *problems, struct visitors **out);
void visitors_destroy(struct visitors *visitors);
/* Whether anybody can sign in. */
bool visitors_any(struct visitors *visitors);
/* Reads the file again if it changed; a file that is wrong or gone leaves nobody with an account. */
void visitors_refresh(struct visitors *visitors);

/* Who asks over this connection. */
void visitors_look(struct visitors *visitors, struct MHD_Connection *connection, struct visitor *out);
/* The address of the other side, as text. */
void visitor_address(struct MHD_Connection *connection, char out[VISITOR_ADDRESS_SIZE]);

/* A number of the other side's address (of IPv6 its network of 64 bits, all of which one host may have). */
uint64_t visitor_network(struct MHD_Connection *connection);

/* Seconds that this address must wait before it may try a password again; 0: it may. */
int64_t visitors_wait_s(struct visitors *visitors, const char *address);
/* Tries a password, slowly; a session in out_token. STATUS_MISMATCH: name or password is wrong, which of them
 * is not told; STATUS_BUSY: the address must wait. */
enum status visitors_sign_in(struct visitors *visitors, const char *address, const char *name,
                             const char *password, char out_token[SESSION_SIZE]);

/* Whether a role may enter a note: an observer any; the crew what it answers, its own coming and going, and
 * what the source does; the others none. */
bool visitor_may_enter(enum role role, const struct note *note);

#endif
