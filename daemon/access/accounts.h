/* Who may use the pages from another machine: names, roles and passwords, in one file that nobody else reads.
 *
 * A password is kept as Argon2id (RFC 9106) by libsodium, with its "interactive" limits. The file also holds
 * a secret of its own, by which sessions are signed (access/session.h). */
#ifndef ACCESS_ACCOUNTS_H
#define ACCESS_ACCOUNTS_H

#include "base/status.h"
#include "settings/reader.h"
#include <sodium.h>
#include <stdbool.h>
#include <stdint.h>

#define ACCOUNTS_MAX 64
#define ACCOUNT_NAME_SIZE 32
#define ACCOUNT_PASSWORD_MIN 10
#define ACCOUNT_PASSWORD_MAX 256

/* Each may read; what else it may, visitor_may_enter (http/visitor.h) says. */
enum role { ROLE_NONE, ROLE_CLIENT, ROLE_AUDITOR, ROLE_CREW, ROLE_OBSERVER };

struct account {
    char name[ACCOUNT_NAME_SIZE];
    enum role role;
    char hash[crypto_pwhash_STRBYTES];
};

struct accounts {
    unsigned char secret[crypto_auth_KEYBYTES];
    uint32_t n;
    struct account items[ACCOUNTS_MAX];
};

/* No accounts, and a new secret. STATUS_SYSTEM when there is no randomness. */
enum status accounts_reset(struct accounts *accounts);

/* Reads the file. STATUS_NOT_FOUND: there is none; STATUS_BAD_FORMAT: a line is wrong, or others may read the
 * file: added to problems with file and line; STATUS_SYSTEM. */
enum status accounts_read(const char *path, struct problems *problems, struct accounts *out);
/* Writes the file anew, readable by its owner alone, and replaces the old one in one step. STATUS_SYSTEM. */
enum status accounts_write(const char *path, const struct accounts *accounts);

/* NULL: there is no such account. */
const struct account *accounts_find(const struct accounts *accounts, const char *name);
/* Adds an account or changes it: its sessions end. STATUS_BAD_FORMAT: the name is not 1 to 31 of a to z, 0 to
 * 9, '-', '_'; STATUS_OUT_OF_RANGE: the password's length; STATUS_FULL; STATUS_NO_MEMORY. */
enum status accounts_set(struct accounts *accounts, const char *name, enum role role, const char *password);
/* STATUS_NOT_FOUND. */
enum status accounts_remove(struct accounts *accounts, const char *name);

/* Whether it is the account's password; takes some 0.1 s and 64 MiB. NULL for an account: false, as slowly,
 * so that the time does not tell which names exist. */
bool account_password_is(const struct account *account, const char *password);

const char *role_text(enum role role); /* "observer", "crew", "auditor", "client"; "none" */
bool role_from_text(const char *text, enum role *out);

#endif
