/* Sessions: a token that a browser carries after a sign-in, signed (HMAC-SHA-512-256, libsodium's
 * crypto_auth) with the accounts' secret and the account's own password hash. Nothing is kept, so that a
 * restart of the daemon signs nobody out (a crew page must not go dark), and a new password, another role or
 * a removed account ends its sessions at once. */
#ifndef ACCESS_SESSION_H
#define ACCESS_SESSION_H

#include "access/accounts.h"
#include <stdint.h>

#define SESSION_SIZE 160
#define SESSION_DAYS 14 /* two weeks aboard: common practice, no source */

/* A token of the account until that second of Unix time. */
void session_issue(const struct accounts *accounts, const struct account *account, int64_t until_unix_s,
                   char out[SESSION_SIZE]);

/* The account whose token it is; NULL when it is nobody's, was changed, or is over. */
const struct account *session_account(const struct accounts *accounts, const char *token, int64_t now_unix_s);

#endif
