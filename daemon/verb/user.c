/* hushwatch user: who may use the pages from another machine. */
#include "access/accounts.h"
#include "settings/site.h"
#include "verb/options.h"
#include "verb/verb.h"
#include <stdio.h>
#include <string.h>
#include <termios.h>
#include <unistd.h>

static const char help[] =
    "usage: hushwatch user --config FILE list\n"
    "       hushwatch user --config FILE add NAME ROLE\n"
    "       hushwatch user --config FILE remove NAME\n\n"
    "Lists, adds, changes and removes the accounts that the pages ask for from other machines (setting\n"
    "pages.accounts). ROLE: observer (may enter everything), crew (reads, acknowledges and answers),\n"
    "auditor (reads), client (reads). A password of at least 10 bytes is asked for, twice; where standard\n"
    "input is no terminal it is its first line. A running daemon knows of a change within a second or two,\n"
    "and a changed or removed account's sessions end.\n"
    "Exit code: 0 good, 2 wrong use, 3 the system failed.\n";

static bool read_line(char *out, size_t size)
{
    if (!fgets(out, (int)size, stdin))
        return false;
    size_t length = strcspn(out, "\n");
    bool whole = out[length] == '\n' || length + 1 < size;
    out[length] = '\0';
    return whole;
}

/* Asks on the terminal without showing what is typed. */
static bool ask(const char *question, char *out, size_t size)
{
    struct termios shown, hidden;
    if (tcgetattr(STDIN_FILENO, &shown) != 0)
        return false;
    hidden = shown;
    hidden.c_lflag &= ~(tcflag_t)ECHO;
    fputs(question, stderr);
    tcsetattr(STDIN_FILENO, TCSAFLUSH, &hidden);
    bool good = read_line(out, size);
    tcsetattr(STDIN_FILENO, TCSAFLUSH, &shown);
    fputc('\n', stderr);
    return good;
}

static bool read_password(char *out, size_t size)
{
    char again[ACCOUNT_PASSWORD_MAX + 2];
    if (!isatty(STDIN_FILENO))
        return read_line(out, size);
    bool good =
        ask("password: ", out, size) && ask("once more: ", again, sizeof again) && strcmp(out, again) == 0;
    sodium_memzero(again, sizeof again);
    if (!good)
        fputs("hushwatch user: the two are not the same\n", stderr);
    return good;
}

static int refuse(enum status status, const char *path)
{
    switch (status) {
    case STATUS_BAD_FORMAT:
        fputs("hushwatch user: a name is 1 to 31 of a to z, 0 to 9, '-', '_'\n", stderr);
        return VERB_WRONG_USE;
    case STATUS_OUT_OF_RANGE:
        fprintf(stderr, "hushwatch user: a password has %d to %d bytes\n", ACCOUNT_PASSWORD_MIN,
                ACCOUNT_PASSWORD_MAX);
        return VERB_WRONG_USE;
    case STATUS_NOT_FOUND:
        fputs("hushwatch user: there is no such account\n", stderr);
        return VERB_WRONG_USE;
    case STATUS_FULL:
        fprintf(stderr, "hushwatch user: there are %d accounts, and room for no more\n", ACCOUNTS_MAX);
        return VERB_WRONG_USE;
    default:
        fprintf(stderr, "hushwatch user: %s: %s\n", path, status_text(status));
        return VERB_SYSTEM;
    }
}

static int list(const struct accounts *accounts)
{
    for (uint32_t i = 0; i < accounts->n; i++)
        printf("%-31s %s\n", accounts->items[i].name, role_text(accounts->items[i].role));
    if (accounts->n == 0)
        puts("no accounts");
    return VERB_GOOD;
}

static int add(struct accounts *accounts, const char *path, const char *name, const char *role_word)
{
    char password[ACCOUNT_PASSWORD_MAX + 2];
    enum role role;
    if (!role_from_text(role_word, &role))
        return options_wrong_use("user", "a role is observer, crew, auditor or client, not ", role_word);
    if (!read_password(password, sizeof password))
        return VERB_WRONG_USE;
    enum status status = accounts_set(accounts, name, role, password);
    sodium_memzero(password, sizeof password);
    if (status == STATUS_OK)
        status = accounts_write(path, accounts);
    return status == STATUS_OK ? VERB_GOOD : refuse(status, path);
}

static int drop(struct accounts *accounts, const char *path, const char *name)
{
    enum status status = accounts_remove(accounts, name);
    if (status == STATUS_OK)
        status = accounts_write(path, accounts);
    return status == STATUS_OK ? VERB_GOOD : refuse(status, path);
}

static int do_it(const char *path, int n, char **words)
{
    struct accounts accounts;
    struct problems problems = {0};
    enum status status = accounts_read(path, &problems, &accounts);
    if (status == STATUS_NOT_FOUND)
        status = accounts_reset(&accounts);
    if (problems.count > 0)
        fputs(problems.lines.data, stderr);
    problems_destroy(&problems);
    if (status == STATUS_BAD_FORMAT)
        return VERB_WRONG_USE;
    if (status != STATUS_OK)
        return refuse(status, path);
    int code = VERB_WRONG_USE;
    if (n == 1 && strcmp(words[0], "list") == 0)
        code = list(&accounts);
    else if (n == 3 && strcmp(words[0], "add") == 0)
        code = add(&accounts, path, words[1], words[2]);
    else if (n == 2 && strcmp(words[0], "remove") == 0)
        code = drop(&accounts, path, words[1]);
    else
        fputs(help, stderr);
    sodium_memzero(&accounts, sizeof accounts);
    return code;
}

static const char *take(void *context, int option, const char *value)
{
    (void)option;
    *(const char **)context = value;
    return NULL;
}

int verb_user(int argc, char **argv)
{
    static const struct option known[] = {
        {"config", required_argument, NULL, 'c'}, {"help", no_argument, NULL, 'h'}, {NULL, 0, NULL, 0}};
    static struct site site;
    const char *config = NULL;
    struct options_reading reading = {"user", help, known, take, &config};
    int rest, code = options_read(&reading, argc, argv, &rest);
    if (code != VERB_GOOD)
        return code == OPTIONS_ASKED_HELP ? VERB_GOOD : code;
    if (!config)
        return options_wrong_use("user", "--config is missing", "");
    struct problems problems = {0};
    enum status status = site_load(config, &problems, &site);
    if (status != STATUS_OK)
        fputs(problems.count ? problems.lines.data : status_text(status), stderr);
    else if (!*site.accounts)
        code = options_wrong_use("user", "the settings name no file: pages.accounts", "");
    else
        code = do_it(site.accounts, argc - rest, argv + rest);
    site_destroy(&site);
    problems_destroy(&problems);
    return status == STATUS_OK ? code : VERB_WRONG_USE;
}
