/* hushwatch rerun: derives from a ledger's inputs again what it says was concluded, and compares. */
#include "rerun.h"
#include "base/time.h"
#include "figures.h"
#include "settings/permit.h"
#include "settings/site.h"
#include "verb/options.h"
#include "verb/verb.h"
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define DEFAULT_SHOWN 5
#define EXCERPT 100 /* bytes before and after the first that differs */

static const char help[] =
    "usage: hushwatch rerun LEDGER [--permit FILE [--config FILE]] [--explain-differences N]\n\n"
    "Takes the inputs that the ledger holds (runs, notes, calls, impulses, unheard time, positions) and "
    "derives every\n"
    "contact, phase, advice, finding, correction and sum again, by the permit and the settings that the "
    "ledger itself\n"
    "holds: no other file is read. Each is compared with the recorded one: kind, id, time and body. The "
    "ledger is only\n"
    "read. Hashes are not looked at: hushwatch verify does that.\n\n"
    "  --permit FILE            what the same inputs would have given under that permit, beside the "
    "recorded one\n"
    "  --config FILE            settings whose permit_values fill that permit\n"
    "  --explain-differences N  how many differences are shown with both texts, 5 where it is not said\n\n"
    "Exit code: 0 all is the same, 1 something is not, or cannot be derived, 2 wrong use, 3 the ledger could "
    "not be read.\n";

struct rerunning {
    const char *path, *permit_path, *config_path;
    unsigned long shown, printed;
    struct figures recorded, other;
};

static const char *take_option(void *context, int option, const char *value)
{
    struct rerunning *rerunning = context;
    char *end;
    if (option == 'p')
        rerunning->permit_path = value;
    else if (option == 'c')
        rerunning->config_path = value;
    else {
        rerunning->shown = strtoul(value, &end, 10);
        if (*value < '0' || *value > '9' || *end != '\0')
            return "--explain-differences is not a number: ";
    }
    return NULL;
}

/* A long text is cut to where it first differs from the other. */
static void print_text(const char *who, const char *utc, const char *text, const char *other)
{
    size_t at = 0, length = strlen(text);
    if (!other)
        other = "";
    while (*other && text[at] && text[at] == other[at])
        at++;
    size_t from = length > 3 * EXCERPT && at > EXCERPT ? at - EXCERPT : 0;
    size_t to = length > 3 * EXCERPT && from + 2 * EXCERPT < length ? from + 2 * EXCERPT : length;
    printf("    %s %s  %s%.*s%s\n", who, utc, from ? "..." : "", (int)(to - from), text + from,
           to < length ? "..." : "");
}

static void print_difference(void *context, const struct rerun_difference *difference)
{
    static const char *const what[] = {"is not what follows", "does not follow from the inputs",
                                       "follows, and the ledger does not hold it"};
    struct rerunning *rerunning = context;
    if (rerunning->printed++ >= rerunning->shown)
        return;
    if (difference->seq > 0)
        printf("%s: entry %" PRId64 ", %s %s: %s\n", rerunning->path, difference->seq, difference->entry_kind,
               difference->id, what[difference->kind]);
    else
        printf("%s: %s %s: %s\n", rerunning->path, difference->entry_kind, difference->id,
               what[difference->kind]);
    if (difference->recorded)
        print_text("recorded", difference->recorded_utc, difference->recorded, difference->derived);
    if (difference->derived)
        print_text("derived ", difference->derived_utc, difference->derived, difference->recorded);
}

static void take_recorded(void *context, const struct outcome *outcome)
{
    figures_take(&((struct rerunning *)context)->recorded, outcome);
}

static enum status take_other(void *context, const struct outcome *outcome)
{
    figures_take(&((struct rerunning *)context)->other, outcome);
    return STATUS_OK;
}

/* ---- what the comparison found */

static void print_facts(const char *path, const struct rerun_facts *facts)
{
    const struct replay_facts *replay = &facts->replay;
    printf("%s: %" PRIu32 " runs, %" PRIu64 " inputs, %" PRIu32 " permits in turn\n", path, replay->last_run,
           replay->n_inputs, replay->n_permits);
    printf("%s: the same:", path);
    for (uint32_t i = 0; i < facts->n_kinds; i++)
        printf("%s %" PRIu64 " %s", i ? "," : "", facts->kinds[i].n, facts->kinds[i].kind);
    printf("%s\n", facts->n_kinds ? "" : " nothing");
    if (facts->n_cut)
        printf("%s: %" PRIu64
               " conclusions follow from the last entries of a run and were not written any more: it did not "
               "end by itself\n",
               path, facts->n_cut);
    if (replay->other_defaults)
        printf("%s: this program has other defaults for settings than the one that wrote the ledger\n", path);
}

static int exit_of(enum status status)
{
    switch (status) {
    case STATUS_OK:
        return VERB_GOOD;
    case STATUS_BAD_FORMAT:
    case STATUS_MISMATCH:
    case STATUS_BAD_ARGUMENT:
        return VERB_FOUND_WRONG;
    case STATUS_NOT_FOUND:
    case STATUS_OUT_OF_RANGE:
        return VERB_WRONG_USE;
    default:
        return VERB_SYSTEM;
    }
}

static int compare(struct ledger *ledger, struct rerunning *rerunning, struct rerun_facts *facts)
{
    char problem[LEDGER_PROBLEM_SIZE];
    const struct rerun_setup setup = {
        .ledger = ledger, .take = print_difference, .outcome = take_recorded, .context = rerunning};
    enum status status = rerun_compare(&setup, facts, problem);
    figures_finish(&rerunning->recorded, facts->replay.last_ns);
    if (status != STATUS_OK && status != STATUS_MISMATCH) {
        printf("%s: %s\n", rerunning->path, problem);
        return status == STATUS_NOT_FOUND ? VERB_FOUND_WRONG : exit_of(status);
    }
    print_facts(rerunning->path, facts);
    if (facts->n_different > rerunning->shown)
        printf("%s: and %" PRIu64 " differences more\n", rerunning->path,
               facts->n_different - rerunning->shown);
    if (facts->replay.n_permits == 0)
        printf("%s: no run was judged by a permit: nothing to compare\n", rerunning->path);
    else if (facts->n_different == 0)
        printf("%s: identical: %" PRIu64 " conclusions follow from %" PRIu64 " inputs\n", rerunning->path,
               facts->n_same, facts->replay.n_inputs);
    else
        printf("%s: NOT identical: %" PRIu64 " differences\n", rerunning->path, facts->n_different);
    return exit_of(status);
}

/* ---- another permit */

static double hours(int64_t ns)
{
    return time_to_s(ns) / 3600;
}

static void print_row(const char *what, const struct figures_count *recorded,
                      const struct figures_count *other)
{
    if (recorded->n + other->n > 0 || recorded->ns + other->ns > 0)
        printf("  %-36s %6u %9.3f   %6u %9.3f\n", what, recorded->n, hours(recorded->ns), other->n,
               hours(other->ns));
}

static void print_figures(const struct rerunning *rerunning, const char *other_id)
{
    static const enum advice_word words[] = {ADVICE_STOP, ADVICE_REDUCE_POWER, ADVICE_HOLD_POWER,
                                             ADVICE_PREPARE_TO_STOP};
    const struct figures *recorded = &rerunning->recorded, *other = &rerunning->other;
    char name[80];
    printf("\n  %-36s %16s   %16.36s\n  %-36s %6s %9s   %6s %9s\n", "", "recorded", other_id,
           "the crew is told, phases", "number", "hours", "number", "hours");
    for (size_t i = 0; i < sizeof words / sizeof words[0]; i++)
        print_row(advice_text(words[i]), &recorded->advice[words[i]], &other->advice[words[i]]);
    for (unsigned p = 0; p < PHASE_COUNT; p++) {
        snprintf(name, sizeof name, "phase %s", phase_text((enum phase)p));
        print_row(name, &recorded->phases[p], &other->phases[p]);
    }
    for (uint32_t i = 0; i < recorded->n_codes; i++)
        printf("  finding: %-27s %6u %9s   %6u\n", recorded->codes[i].code, recorded->codes[i].n, "",
               figures_findings(other, recorded->codes[i].code));
    for (uint32_t i = 0; i < other->n_codes; i++)
        if (figures_findings(recorded, other->codes[i].code) == 0)
            printf("  finding: %-27s %6u %9s   %6u\n", other->codes[i].code, 0, "", other->codes[i].n);
    printf(
        "\n"
        "What this cannot tell: the people at sea followed the recorded permit. Under the other one they "
        "would have\n"
        "stopped, waited and started at other times, so other impulses would have been heard, and perhaps "
        "other animals.\n"
        "Releases, verdicts and acknowledgements were made under the recorded permit, for advice that the "
        "other one may\n"
        "never have given. Findings say where what was done departs from the other permit, not that anybody "
        "did wrong.\n"
        "Noise limits are not among them.\n");
}

static enum status load_other(const struct rerunning *rerunning, struct permit *permit)
{
    struct problems problems = {0};
    struct site *site = calloc(1, sizeof *site);
    enum status status = STATUS_OK;
    if (!site)
        return STATUS_NO_MEMORY;
    if (rerunning->config_path)
        status = site_load(rerunning->config_path, &problems, site);
    if (status == STATUS_OK)
        status = permit_load(rerunning->permit_path, &site->permit_fills, &problems, permit);
    if (status != STATUS_OK)
        fprintf(stderr, "hushwatch rerun: %s\n",
                problems.lines.data ? problems.lines.data : status_text(status));
    problems_destroy(&problems);
    site_destroy(site);
    free(site);
    return status == STATUS_BAD_FORMAT ? STATUS_NOT_FOUND : status;
}

static enum status derive_other(struct ledger *ledger, struct rerunning *rerunning,
                                const struct permit *permit)
{
    char problem[LEDGER_PROBLEM_SIZE];
    struct replay *replay;
    struct replay_facts facts;
    const struct replay_setup setup = {
        .ledger = ledger, .permit = permit, .derived = take_other, .context = rerunning};
    enum status status = replay_create(&setup, &replay);
    if (status != STATUS_OK)
        return status;
    status = replay_run(replay, 0, problem);
    replay_get_facts(replay, &facts);
    replay_destroy(replay);
    figures_finish(&rerunning->other, facts.last_ns);
    if (status != STATUS_OK)
        printf("%s: under the other permit: %s\n", rerunning->path, problem);
    return status;
}

static int run(struct ledger *ledger, struct rerunning *rerunning)
{
    struct rerun_facts facts;
    struct permit *permit = calloc(1, sizeof *permit);
    if (!permit)
        return VERB_SYSTEM;
    enum status status = rerunning->permit_path ? load_other(rerunning, permit) : STATUS_OK;
    int code = exit_of(status);
    if (status == STATUS_OK)
        code = compare(ledger, rerunning, &facts);
    if (status == STATUS_OK && rerunning->permit_path && code <= VERB_FOUND_WRONG) {
        status = derive_other(ledger, rerunning, permit);
        if (status == STATUS_OK)
            print_figures(rerunning, permit->id);
        else
            code = exit_of(status);
    }
    free(permit);
    return code;
}

int verb_rerun(int argc, char **argv)
{
    static const struct option known[] = {{"permit", required_argument, NULL, 'p'},
                                          {"config", required_argument, NULL, 'c'},
                                          {"explain-differences", required_argument, NULL, 'n'},
                                          {"help", no_argument, NULL, 'h'},
                                          {NULL, 0, NULL, 0}};
    struct rerunning rerunning = {.shown = DEFAULT_SHOWN};
    int rest, code = options_read(&(struct options_reading){"rerun", help, known, take_option, &rerunning},
                                  argc, argv, &rest);
    if (code != VERB_GOOD)
        return code == OPTIONS_ASKED_HELP ? VERB_GOOD : code;
    if (argc - rest != 1)
        return options_wrong_use("rerun", "one LEDGER is needed", "");
    if (rerunning.config_path && !rerunning.permit_path)
        return options_wrong_use("rerun", "--config goes with --permit", "");
    rerunning.path = argv[rest];
    struct ledger *ledger;
    char problem[LEDGER_PROBLEM_SIZE];
    enum status status = ledger_open(rerunning.path, LEDGER_READ, &ledger, problem);
    if (status != STATUS_OK) {
        fprintf(stderr, "hushwatch rerun: %s\n", problem);
        return exit_of(status);
    }
    code = run(ledger, &rerunning);
    ledger_close(ledger);
    return code;
}
