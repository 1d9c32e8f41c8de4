/* The file of accounts: one line each, written whole. */
#include "access/accounts.h"
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define HEAD "hushwatch-accounts 1 "
#define SECRET_HEX (2 * crypto_auth_KEYBYTES)
#define NAME_LETTERS "abcdefghijklmnopqrstuvwxyz0123456789-_"

static const char *const role_words[] = {[ROLE_NONE] = "none",
                                         [ROLE_CLIENT] = "client",
                                         [ROLE_AUDITOR] = "auditor",
                                         [ROLE_CREW] = "crew",
                                         [ROLE_OBSERVER] = "observer"};

const char *role_text(enum role role)
{
    return role_words[role];
}

bool role_from_text(const char *text, enum role *out)
{
    for (int i = ROLE_CLIENT; i <= ROLE_OBSERVER; i++)
        if (strcmp(text, role_words[i]) == 0) {
            *out = (enum role)i;
            return true;
        }
    return false;
}

enum status accounts_reset(struct accounts *accounts)
{
    if (sodium_init() < 0)
        return STATUS_SYSTEM;
    *accounts = (struct accounts){0};
    randombytes_buf(accounts->secret, sizeof accounts->secret);
    return STATUS_OK;
}

const struct account *accounts_find(const struct accounts *accounts, const char *name)
{
    for (uint32_t i = 0; i < accounts->n; i++)
        if (strcmp(accounts->items[i].name, name) == 0)
            return &accounts->items[i];
    return NULL;
}

static bool is_name(const char *name)
{
    size_t length = strlen(name);
    return length > 0 && length < ACCOUNT_NAME_SIZE && strspn(name, NAME_LETTERS) == length;
}

/* The line's words, cut off in place; false when there are not exactly three that fit. */
static bool read_account(char *line, struct account *out)
{
    char *rest = NULL;
    const char *name = strtok_r(line, " \n", &rest);
    const char *role = strtok_r(NULL, " \n", &rest);
    const char *hash = strtok_r(NULL, " \n", &rest);
    if (!hash || strtok_r(NULL, " \n", &rest) || !is_name(name) || !role_from_text(role, &out->role) ||
        strlen(hash) >= sizeof out->hash || strncmp(hash, crypto_pwhash_STRPREFIX, 9) != 0)
        return false;
    memcpy(out->name, name, strlen(name) + 1);
    memcpy(out->hash, hash, strlen(hash) + 1);
    return true;
}

static bool read_head(char *line, struct accounts *out)
{
    size_t n = strlen(HEAD), length;
    return strncmp(line, HEAD, n) == 0 &&
           sodium_hex2bin(out->secret, sizeof out->secret, line + n, SECRET_HEX, NULL, &length, NULL) == 0 &&
           length == sizeof out->secret;
}

static enum status read_lines(FILE *file, const char *path, struct problems *problems, struct accounts *out)
{
    char line[256];
    if (!fgets(line, sizeof line, file) || !read_head(line, out)) {
        problems_add(problems, path, 1, "first line", "is not that of a file of accounts");
        return STATUS_BAD_FORMAT;
    }
    for (unsigned number = 2; fgets(line, sizeof line, file); number++) {
        if (out->n == ACCOUNTS_MAX || !read_account(line, &out->items[out->n])) {
            problems_add(problems, path, number, "account",
                         "is not: name, role, password's hash; 'hushwatch user' writes this file");
            return STATUS_BAD_FORMAT;
        }
        out->n++;
    }
    return ferror(file) ? STATUS_SYSTEM : STATUS_OK;
}

enum status accounts_read(const char *path, struct problems *problems, struct accounts *out)
{
    struct accounts accounts = {0};
    struct stat facts;
    FILE *file = fopen(path, "re");
    if (!file)
        return errno == ENOENT ? STATUS_NOT_FOUND : STATUS_SYSTEM;
    enum status status = STATUS_OK;
    if (sodium_init() < 0 || fstat(fileno(file), &facts) != 0)
        status = STATUS_SYSTEM;
    else if (facts.st_mode & (S_IRWXG | S_IRWXO)) {
        problems_add(problems, path, 0, "accounts",
                     "may be read by others than its owner; allowed: mode 0600");
        status = STATUS_BAD_FORMAT;
    } else
        status = read_lines(file, path, problems, &accounts);
    fclose(file);
    if (status == STATUS_OK)
        *out = accounts;
    sodium_memzero(&accounts, sizeof accounts);
    return status;
}

static bool write_lines(FILE *file, const struct accounts *accounts)
{
    char secret[SECRET_HEX + 1];
    sodium_bin2hex(secret, sizeof secret, accounts->secret, sizeof accounts->secret);
    fprintf(file, HEAD "%s\n", secret);
    for (uint32_t i = 0; i < accounts->n; i++)
        fprintf(file, "%s %s %s\n", accounts->items[i].name, role_text(accounts->items[i].role),
                accounts->items[i].hash);
    sodium_memzero(secret, sizeof secret);
    return fflush(file) == 0 && !ferror(file) && fsync(fileno(file)) == 0;
}

enum status accounts_write(const char *path, const struct accounts *accounts)
{
    char beside[4096];
    if (snprintf(beside, sizeof beside, "%s.new", path) >= (int)sizeof beside)
        return STATUS_OUT_OF_RANGE;
    int fd = open(beside, O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, S_IRUSR | S_IWUSR);
    if (fd < 0)
        return STATUS_SYSTEM;
    FILE *file = fchmod(fd, S_IRUSR | S_IWUSR) == 0 ? fdopen(fd, "w") : NULL;
    if (!file) {
        close(fd);
        unlink(beside);
        return STATUS_SYSTEM;
    }
    bool good = write_lines(file, accounts);
    good = fclose(file) == 0 && good;
    if (good && rename(beside, path) == 0)
        return STATUS_OK;
    unlink(beside);
    return STATUS_SYSTEM;
}

enum status accounts_set(struct accounts *accounts, const char *name, enum role role, const char *password)
{
    size_t length = strlen(password);
    if (!is_name(name))
        return STATUS_BAD_FORMAT;
    if (length < ACCOUNT_PASSWORD_MIN || length > ACCOUNT_PASSWORD_MAX)
        return STATUS_OUT_OF_RANGE;
    uint32_t at = 0;
    while (at < accounts->n && strcmp(accounts->items[at].name, name) != 0)
        at++;
    if (at == ACCOUNTS_MAX)
        return STATUS_FULL;
    struct account account = {.role = role};
    memcpy(account.name, name, strlen(name) + 1);
    if (crypto_pwhash_str_alg(account.hash, password, length, crypto_pwhash_OPSLIMIT_INTERACTIVE,
                              crypto_pwhash_MEMLIMIT_INTERACTIVE, crypto_pwhash_ALG_ARGON2ID13) != 0)
        return STATUS_NO_MEMORY;
    accounts->items[at] = account;
    accounts->n += at == accounts->n;
    return STATUS_OK;
}

enum status accounts_remove(struct accounts *accounts, const char *name)
{
    for (uint32_t i = 0; i < accounts->n; i++)
        if (strcmp(accounts->items[i].name, name) == 0) {
            accounts->n--;
            memmove(&accounts->items[i], &accounts->items[i + 1],
                    (accounts->n - i) * sizeof accounts->items[0]);
            sodium_memzero(&accounts->items[accounts->n], sizeof accounts->items[0]);
            return STATUS_OK;
        }
    return STATUS_NOT_FOUND;
}

bool account_password_is(const struct account *account, const char *password)
{
    size_t length = strlen(password);
    if (account)
        return crypto_pwhash_str_verify(account->hash, password, length) == 0;
    unsigned char key[32];
    static const unsigned char salt[crypto_pwhash_SALTBYTES] = {0};
    if (crypto_pwhash(key, sizeof key, password, length, salt, crypto_pwhash_OPSLIMIT_INTERACTIVE,
                      crypto_pwhash_MEMLIMIT_INTERACTIVE, crypto_pwhash_ALG_ARGON2ID13) != 0)
        return false;
    sodium_memzero(key, sizeof key);
    return false;
}
