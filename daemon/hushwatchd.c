/* hushwatchd: the daemon. Options, the chain, signals and the service manager's watchdog; nothing else. */
#include "chain.h"
#include "clock.h"
#include "settings/site.h"
#include <getopt.h>
#include <signal.h>
#include <stdio.h>
#include <string.h>
#include <systemd/sd-daemon.h>
#include <time.h>
#include <unistd.h>

static const char help[] =
    "usage: hushwatchd --config FILE [--check | --print]\n\n"
    "Keeps the watch that the settings describe, until SIGTERM or SIGINT.\n\n"
    "  --check   only says what is wrong with the settings and the files that they name, and which\n"
    "            values of the permit are unverified\n"
    "  --print   only shows every setting with its value\n\n"
    "Exit code: 0 good, 2 wrong use or settings, 3 the system failed.\n";

enum { EXIT_GOOD = 0, EXIT_WRONG_USE = 2, EXIT_SYSTEM = 3 };
enum mode { MODE_RUN, MODE_CHECK, MODE_PRINT };

static int read_options(int argc, char **argv, const char **config, enum mode *mode)
{
    static const struct option options[] = {{"config", required_argument, NULL, 'c'},
                                            {"check", no_argument, NULL, 'k'},
                                            {"print", no_argument, NULL, 'p'},
                                            {"help", no_argument, NULL, 'h'},
                                            {NULL, 0, NULL, 0}};
    int option;
    while ((option = getopt_long(argc, argv, "", options, NULL)) != -1) {
        if (option == 'h') {
            fputs(help, stdout);
            return -1;
        }
        if (option == 'c')
            *config = optarg;
        else if (option == 'k' || option == 'p')
            *mode = option == 'k' ? MODE_CHECK : MODE_PRINT;
        else
            return EXIT_WRONG_USE;
    }
    if (*config && optind == argc)
        return EXIT_GOOD;
    fprintf(stderr, "hushwatchd: %s\n%s", *config ? "too many words" : "--config is missing", help);
    return EXIT_WRONG_USE;
}

/* Tells the service manager that the watch lives, but only while it moves. */
static void feed_watchdog(struct chain *chain)
{
    struct watcher_state state;
    chain_get_watcher(chain, &state);
    if (clock_monotonic_ns() - state.progress_ns < 2000000000)
        sd_notify(0, "WATCHDOG=1");
}

/* Waits for a signal to end; the chain works in its own threads. */
static void keep_watch(const struct site *site, struct chain *chain, const sigset_t *signals)
{
    const struct timespec second = {.tv_sec = 1};
    bool any = strcmp(site->address, "0.0.0.0") == 0 || strcmp(site->address, "::") == 0;
    bool brackets = !any && strchr(site->address, ':');
    char base[96];
    snprintf(base, sizeof base, "http%s://%s%s%s:%u/", *site->certificate ? "s" : "", brackets ? "[" : "",
             any ? "127.0.0.1" : site->address, brackets ? "]" : "", chain_get_port(chain));
    printf("observer: %s\ncrew:     %screw?station=crew\n", base, base);
    fflush(stdout);
    sd_notify(0, "READY=1\nSTATUS=keeping watch");
    while (sigtimedwait(signals, NULL, &second) < 0)
        feed_watchdog(chain);
    sd_notify(0, "STOPPING=1");
}

/* In the journal, at every start: what nobody may overlook. */
static void warn(const struct chain *chain)
{
    struct text words = {0};
    chain_warn(chain, &words);
    if (words.data)
        fputs(words.data, stderr);
    text_destroy(&words);
}

static int run(struct site *site, struct problems *problems)
{
    struct chain_setup setup = {.site = site};
    struct chain *chain = NULL;
    uint64_t lost = 0;
    sigset_t signals;
    sigemptyset(&signals);
    sigaddset(&signals, SIGTERM);
    sigaddset(&signals, SIGINT);
    pthread_sigmask(SIG_BLOCK, &signals, NULL); /* before any thread starts: only main takes them */
    signal(SIGPIPE, SIG_IGN);
    signal(SIGXFSZ, SIG_IGN);
    enum status status = chain_create(&setup, problems, &chain);
    if (status == STATUS_OK)
        status = chain_start(chain, problems);
    if (problems->lines.data)
        fputs(problems->lines.data, stderr);
    if (status == STATUS_OK) {
        warn(chain);
        keep_watch(site, chain, &signals);
        status = chain_stop(chain, &lost);
    } else if (problems->count == 0)
        fprintf(stderr, "hushwatchd: %s\n", status_text(status));
    if (lost > 0)
        fprintf(stderr, "hushwatchd: %llu entries could not be written\n", (unsigned long long)lost);
    if (status == STATUS_TIMEOUT)
        _exit(EXIT_SYSTEM); /* the disk hangs: the writer's thread cannot be waited for */
    chain_destroy(chain);
    return status == STATUS_OK && lost == 0 ? EXIT_GOOD : problems->count ? EXIT_WRONG_USE : EXIT_SYSTEM;
}

int main(int argc, char **argv)
{
    static struct site site;
    struct problems problems = {0};
    struct text remarks = {0};
    const char *config = NULL;
    enum mode mode = MODE_RUN;
    int code = read_options(argc, argv, &config, &mode);
    if (code != EXIT_GOOD)
        return code < 0 ? EXIT_GOOD : code;
    enum status status = site_load(config, &problems, &site);
    if (mode != MODE_RUN)
        chain_check(&site, &problems, &remarks);
    if (mode == MODE_PRINT && site.effective.data)
        fputs(site.effective.data, stdout);
    if (mode == MODE_RUN && status == STATUS_OK)
        code = run(&site, &problems);
    else if (problems.count > 0) {
        fputs(problems.lines.data, stderr);
        code = EXIT_WRONG_USE;
    } else if (mode == MODE_CHECK)
        printf("%s: good\n%s", config, remarks.data ? remarks.data : "");
    site_destroy(&site);
    problems_destroy(&problems);
    text_destroy(&remarks);
    return code;
}
