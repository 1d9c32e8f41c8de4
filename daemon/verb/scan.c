/* hushwatch scan: listens to recordings (or to what the settings name) as the daemon would, and writes a
 * ledger. */
#include "base/time.h"
#include "chain.h"
#include "input/input.h"
#include "verb/options.h"
#include "verb/verb.h"
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

static const char help[] =
    "usage: hushwatch scan --config FILE --ledger OUT [--start UTC] [--notes FILE] [--pace real|fast] "
    "[--explain] [RECORDING...]\n\n"
    "Listens to the recordings, one after the other as one stream, with the first stream's channels of the "
    "settings,\n"
    "applies the permit and writes the ledger OUT, which must not exist. Without recordings it listens to "
    "what the\n"
    "settings name (a scene, a pipe, recordings).\n\n"
    "  --start UTC    when the first frame sounded, e.g. 2026-03-01T12:00:00Z; else the header's time, else "
    "the time of\n"
    "                 the file's last change less its duration. The `run` entry says which\n"
    "  --notes FILE   what people entered, at_s seconds from the first frame (docs/scenes.md)\n"
    "  --pace WORD    fast (as fast as possible, the default) or real\n"
    "  --explain      at the end, why sounds were not calls: of each class of the call catalogue what was "
    "found and\n"
    "                 what was rejected, by name, which classes the recording's rate cannot carry,\n"
    "                 and which groups no class hears\n\n"
    "Exit code: 0 good, 2 wrong use or settings, 3 the system failed.\n";

struct scan {
    const char *config, *ledger, *notes_path, *start;
    bool real_pace, explain;
    char **recordings;
    int n_recordings;
    struct site site;
    struct timed_note *notes;
    unsigned n_notes;
    int64_t start_unix_ns;
};

static volatile sig_atomic_t interrupted;

static void interrupt(int signal_number)
{
    (void)signal_number;
    interrupted = 1;
}

static int wrong_use(const char *what, const char *value)
{
    return options_wrong_use("scan", what, value);
}

static const char *take_option(void *context, int option, const char *value)
{
    struct scan *scan = context;
    if (option == 'c')
        scan->config = value;
    else if (option == 'l')
        scan->ledger = value;
    else if (option == 'n')
        scan->notes_path = value;
    else if (option == 's')
        scan->start = value;
    else if (option == 'e')
        scan->explain = true;
    else if (strcmp(value, "real") != 0 && strcmp(value, "fast") != 0)
        return "--pace is real or fast, not ";
    else
        scan->real_pace = strcmp(value, "real") == 0;
    return NULL;
}

static int read_options(int argc, char **argv, struct scan *scan)
{
    static const struct option known[] = {
        {"config", required_argument, NULL, 'c'}, {"ledger", required_argument, NULL, 'l'},
        {"start", required_argument, NULL, 's'},  {"notes", required_argument, NULL, 'n'},
        {"pace", required_argument, NULL, 'p'},   {"explain", no_argument, NULL, 'e'},
        {"help", no_argument, NULL, 'h'},         {NULL, 0, NULL, 0}};
    int rest, code = options_read(&(struct options_reading){"scan", help, known, take_option, scan}, argc,
                                  argv, &rest);
    if (code != VERB_GOOD)
        return code;
    scan->recordings = argv + rest;
    scan->n_recordings = argc - rest;
    if (!scan->config || !scan->ledger)
        return wrong_use(scan->config ? "--ledger is missing" : "--config is missing", "");
    if (scan->start && time_parse_utc(scan->start, &scan->start_unix_ns) != STATUS_OK)
        return wrong_use("--start is not a UTC time like 2026-03-01T12:00:00Z: ", scan->start);
    return scan->n_recordings > SITE_MAX_FILES ? wrong_use("too many recordings at once", "") : VERB_GOOD;
}

/* The recordings take the place of the settings' inputs; the first stream's channels say what they are. */
static void choose_inputs(struct scan *scan)
{
    struct site *site = &scan->site;
    snprintf(site->ledger, sizeof site->ledger, "%s", scan->ledger);
    for (uint32_t i = 0; i < site->n_streams; i++)
        site->streams[i].real_pace = scan->real_pace;
    if (scan->n_recordings == 0)
        return;
    struct stream_settings *stream = &site->streams[0];
    site->n_streams = 1;
    if (input_find(stream->input)->needs.format)
        stream->rate_hz = 0; /* the recording's own */
    snprintf(stream->input, sizeof stream->input, "recording");
    stream->n_files = (uint32_t)scan->n_recordings;
    for (int i = 0; i < scan->n_recordings; i++)
        snprintf(stream->files[i], SITE_PATH_SIZE, "%s", scan->recordings[i]);
}

static void show_progress(struct chain *chain)
{
    struct watcher_state state;
    chain_get_watcher(chain, &state);
    double total_s = stream_get_facts(chain_get_stream(chain, 1))->duration_s,
           at_s = time_to_s(state.watch_ns);
    fprintf(stderr, "\r%8.1f s", at_s);
    if (total_s > 0)
        fprintf(stderr, " of %.1f s (%3.0f %%)", total_s, 100 * at_s / total_s);
    fprintf(stderr, "  calls %llu  impulses %llu  contacts %llu  advice %llu ",
            (unsigned long long)state.n_calls, (unsigned long long)state.n_impulses,
            (unsigned long long)state.n_contacts, (unsigned long long)state.n_advice);
}

static enum status listen_to_all(struct chain *chain)
{
    bool terminal = isatty(STDERR_FILENO);
    while (!chain_wait(chain, 0.3) && !interrupted)
        if (terminal)
            show_progress(chain);
    if (terminal) {
        show_progress(chain);
        fputc('\n', stderr);
    }
    for (uint32_t i = 1; i <= chain_count_streams(chain); i++) {
        struct stream_state state;
        stream_get_state(chain_get_stream(chain, i), &state);
        if (state.status != STATUS_OK) {
            fprintf(stderr, "hushwatch scan: stream %u ended early: %s\n", i, status_text(state.status));
            return state.status;
        }
    }
    struct watcher_state watcher;
    chain_get_watcher(chain, &watcher);
    return watcher.status;
}

static void explain_class(const struct class_account *account)
{
    if (!account->hearable) {
        printf("  %-28s %10s  cannot be heard at this rate\n", account->name, "-");
        return;
    }
    printf("  %-28s %10llu  ", account->name, (unsigned long long)account->n_found);
    const char *between = "";
    for (unsigned r = 0; r < REJECT_COUNT; r++) {
        if (account->rejected[r] == 0)
            continue;
        printf("%s%s %llu", between, rejection_text((enum rejection)r),
               (unsigned long long)account->rejected[r]);
        between = ", ";
    }
    printf("%s\n", *between ? "" : "nothing came near");
}

/* "Nothing heard" means nothing for a group that cannot be heard: each such is named. */
static void explain_groups(const struct class_account *accounts, uint32_t n)
{
    for (unsigned g = GROUP_UNKNOWN + 1; g < GROUP_COUNT; g++) {
        enum group_hearing hearing = listen_group_hearing(accounts, n, (enum group)g);
        if (hearing != GROUP_BY_EAR)
            printf("  %-28s %10s  %s\n", group_text((enum group)g), "group", group_hearing_text(hearing));
    }
}

/* Why sounds were not calls or impulses. After the streams have ended. */
static void explain(struct chain *chain)
{
    struct class_account accounts[LISTEN_MAX_ACCOUNTS];
    for (uint32_t i = 1; i <= chain_count_streams(chain); i++) {
        struct stream *stream = chain_get_stream(chain, i);
        uint32_t n = stream_get_accounts(stream, accounts);
        printf("stream %u, %.0f Hz: a sound is rejected by each class and on each channel that looks at it\n"
               "  %-28s %10s  %s\n",
               i, stream_get_facts(stream)->rate_hz, "class", "found", "rejected, and why");
        for (uint32_t c = 0; c < n; c++)
            explain_class(&accounts[c]);
        explain_groups(accounts, n);
    }
}

static int exit_of(enum status status)
{
    switch (status) {
    case STATUS_OK:
        return VERB_GOOD;
    case STATUS_BAD_FORMAT:
    case STATUS_OUT_OF_RANGE:
    case STATUS_NOT_FOUND:
    case STATUS_EXISTS:
    case STATUS_BUSY:
    case STATUS_BAD_ARGUMENT:
        return VERB_WRONG_USE;
    default:
        return VERB_SYSTEM;
    }
}

static int run_chain(struct scan *scan, struct problems *problems)
{
    struct chain_setup setup = {.site = &scan->site,
                                .scan = true,
                                .has_start = scan->start != NULL,
                                .start_unix_ns = scan->start_unix_ns,
                                .notes = scan->notes,
                                .n_notes = scan->n_notes};
    struct chain *chain = NULL;
    uint64_t lost = 0;
    enum status status = chain_create(&setup, problems, &chain);
    if (status == STATUS_OK)
        status = chain_start(chain, problems);
    if (problems->lines.data)
        fputs(problems->lines.data, stderr);
    if (status == STATUS_OK) {
        signal(SIGINT, interrupt);
        signal(SIGTERM, interrupt);
        status = listen_to_all(chain);
        enum status stopped = chain_stop(chain, &lost);
        status = status == STATUS_OK ? stopped : status;
    } else if (problems->count == 0)
        fprintf(stderr, "hushwatch scan: %s\n", status_text(status));
    if (lost > 0)
        fprintf(stderr, "hushwatch scan: %llu entries could not be written\n", (unsigned long long)lost);
    if (chain && status == STATUS_OK) {
        if (scan->explain)
            explain(chain);
        printf("%s\n", scan->ledger);
    }
    chain_destroy(chain);
    return lost > 0 ? VERB_SYSTEM : exit_of(status);
}

int verb_scan(int argc, char **argv)
{
    static struct scan scan; /* the site's settings are large */
    struct problems problems = {0};
    int code = read_options(argc, argv, &scan);
    if (code != VERB_GOOD)
        return code < 0 ? VERB_GOOD : code;
    enum status status = site_load(scan.config, &problems, &scan.site);
    if (status == STATUS_OK && scan.notes_path)
        status = notes_load(scan.notes_path, &problems, &scan.notes, &scan.n_notes);
    if (status == STATUS_OK) {
        choose_inputs(&scan);
        code = run_chain(&scan, &problems);
    } else {
        fputs(problems.lines.data ? problems.lines.data : "", stderr);
        code = exit_of(status);
    }
    free(scan.notes);
    site_destroy(&scan.site);
    problems_destroy(&problems);
    return code;
}
