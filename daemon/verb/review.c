/* hushwatch review: the auditor's page over a ledger ashore. */
#include "http/server.h"
#include "ledger/ledger.h"
#include "verb/options.h"
#include "verb/verb.h"
#include <pthread.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>

static const char help[] =
    "usage: hushwatch review LEDGER [--port N] [--sounds FOLDER]\n\n"
    "Serves the review page of a ledger on 127.0.0.1, and prints its address: the survey as a timeline, the\n"
    "advice and findings with what is behind each, the sounds kept, dismissed contacts, a blind sample for "
    "a\n"
    "second listener, the permit, and whether the ledger is as it was written. The ledger is only read. No\n"
    "settings are needed. Ends with Ctrl-C.\n\n"
    "  --port N         where to serve; any free port where it is not said\n"
    "  --sounds FOLDER  where the sounds kept are; LEDGER.sound/clips where it is not said\n\n"
    "Exit code: 0 good, 2 wrong use or no ledger, 3 the system failed.\n";

struct reviewing {
    const char *sounds;
    long port;
};

static const char *take_option(void *context, int option, const char *value)
{
    struct reviewing *reviewing = context;
    char *end = NULL;
    if (option == 's') {
        reviewing->sounds = value;
        return NULL;
    }
    reviewing->port = strtol(value, &end, 10);
    return *value < '0' || *value > '9' || *end != '\0' || reviewing->port > 65535
               ? "--port is not a number from 0 to 65535: "
               : NULL;
}

/* Opens the ledger once, to say what is wrong with it before a page is opened. */
static int look_at(const char *path)
{
    struct ledger *ledger;
    char problem[LEDGER_PROBLEM_SIZE];
    enum status status = ledger_open(path, LEDGER_READ, &ledger, problem);
    if (status == STATUS_OK) {
        ledger_close(ledger);
        return VERB_GOOD;
    }
    fprintf(stderr, "hushwatch review: %s\n", problem);
    return status == STATUS_NOT_FOUND || status == STATUS_BAD_FORMAT || status == STATUS_OUT_OF_RANGE
               ? VERB_WRONG_USE
               : VERB_SYSTEM;
}

static int serve(const char *path, const struct reviewing *reviewing)
{
    const struct http_setup setup = {.address = "127.0.0.1",
                                     .port = (uint32_t)reviewing->port,
                                     .ledger = path,
                                     .clips = reviewing->sounds};
    const struct http_callbacks none = {NULL, NULL};
    struct problems problems = {0};
    struct http *http = NULL;
    sigset_t signals;
    int ended;
    sigemptyset(&signals);
    sigaddset(&signals, SIGTERM);
    sigaddset(&signals, SIGINT);
    pthread_sigmask(SIG_BLOCK, &signals, NULL); /* before any thread starts */
    signal(SIGPIPE, SIG_IGN);
    enum status status = http_start(&setup, &none, &problems, &http);
    if (status != STATUS_OK) {
        fprintf(stderr, "%s", problems.lines.data ? problems.lines.data : status_text(status));
        problems_destroy(&problems);
        return status == STATUS_BUSY ? VERB_WRONG_USE : VERB_SYSTEM;
    }
    printf("review: http://127.0.0.1:%u/review\n", http_port(http));
    fflush(stdout);
    sigwait(&signals, &ended);
    http_stop(http);
    problems_destroy(&problems);
    return VERB_GOOD;
}

int verb_review(int argc, char **argv)
{
    static const struct option known[] = {{"port", required_argument, NULL, 'p'},
                                          {"sounds", required_argument, NULL, 's'},
                                          {"help", no_argument, NULL, 'h'},
                                          {NULL, 0, NULL, 0}};
    struct reviewing reviewing = {0};
    int rest;
    int code = options_read(&(struct options_reading){"review", help, known, take_option, &reviewing}, argc,
                            argv, &rest);
    if (code == VERB_GOOD && argc - rest != 1)
        code = options_wrong_use("review", "one LEDGER is needed", "");
    if (code == VERB_GOOD)
        code = look_at(argv[rest]);
    if (code == VERB_GOOD)
        code = serve(argv[rest], &reviewing);
    return code == OPTIONS_ASKED_HELP ? VERB_GOOD : code;
}
