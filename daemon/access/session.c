/* Tokens: "name.until.mac", the last in hexadecimal digits. */
#include "access/session.h"
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define MAC_HEX (2 * crypto_auth_BYTES)

static void sign(const struct accounts *accounts, const struct account *account, const char *text,
                 char out[MAC_HEX + 1])
{
    char whole[SESSION_SIZE + crypto_pwhash_STRBYTES + 16];
    unsigned char mac[crypto_auth_BYTES];
    int n = snprintf(whole, sizeof whole, "%s %s %s", text, role_text(account->role), account->hash);
    crypto_auth(mac, (const unsigned char *)whole, (unsigned long long)n, accounts->secret);
    sodium_bin2hex(out, MAC_HEX + 1, mac, sizeof mac);
}

void session_issue(const struct accounts *accounts, const struct account *account, int64_t until_unix_s,
                   char out[SESSION_SIZE])
{
    char text[64], mac[MAC_HEX + 1];
    snprintf(text, sizeof text, "%s.%" PRId64, account->name, until_unix_s);
    sign(accounts, account, text, mac);
    snprintf(out, SESSION_SIZE, "%s.%s", text, mac);
}

const struct account *session_account(const struct accounts *accounts, const char *token, int64_t now_unix_s)
{
    char text[64], mac[MAC_HEX + 1], name[ACCOUNT_NAME_SIZE];
    const char *last = strrchr(token, '.');
    const char *first = strchr(token, '.');
    if (!first || last == first || (size_t)(last - token) >= sizeof text || strlen(last + 1) != MAC_HEX ||
        (size_t)(first - token) >= sizeof name)
        return NULL;
    memcpy(text, token, (size_t)(last - token));
    text[last - token] = '\0';
    memcpy(name, token, (size_t)(first - token));
    name[first - token] = '\0';
    const struct account *account = accounts_find(accounts, name);
    if (!account)
        return NULL;
    sign(accounts, account, text, mac);
    if (sodium_memcmp(mac, last + 1, MAC_HEX) != 0)
        return NULL;
    return strtoll(first + 1, NULL, 10) > now_unix_s ? account : NULL;
}
