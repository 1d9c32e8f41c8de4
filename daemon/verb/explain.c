/* hushwatch explain: the chain of entries behind any entry. */
#include "explanation.h"
#include "verb/options.h"
#include "verb/verb.h"
#include <stdio.h>
#include <stdlib.h>

static const char help[] =
    "usage: hushwatch explain LEDGER ID [--depth N]\n\n"
    "Prints an entry and the entries behind it, as far back as they name each other: for each its id, when "
    "it "
    "became\n"
    "known, what it says, and its clause of the permit; then the values of the permit that stand under those "
    "clauses,\n"
    "each with its mark (how well it is known) and its source. ID is an entry's id, like 1.0.advice.7. Reads "
    "only.\n\n"
    "  --depth N  how far back, 6 where it is not said; 0: the entry alone\n\n"
    "Exit code: 0 good, 2 wrong use or no such id, 3 the ledger could not be read.\n";

struct explaining {
    struct ledger *ledger;
    const char *path;
    long depth;
};

static void print_entry(void *context, const struct explained *explained)
{
    int indent = (int)(3 * explained->level);
    (void)context;
    if (!explained->found)
        printf("%*s%s: not in the ledger\n", indent, "", explained->id);
    else if (explained->above)
        printf("%*s%s: see above\n", indent, "", explained->id);
    else
        printf("%*s%s  %s  %s%s%s%s\n", indent, "", explained->id, explained->utc, explained->words,
               *explained->clause ? " [" : "", explained->clause, *explained->clause ? "]" : "");
    if (explained->n_behind > 0)
        printf("%*s   (%u entries behind it: --depth %u shows them)\n", indent, "", explained->n_behind,
               explained->level + 1);
}

static void print_permit(void *context, const struct permit *permit)
{
    (void)context;
    if (permit)
        printf("\nUnder the permit %s, %s:\n", permit->id, permit->title);
    else
        printf("\nThe permit's values cannot be shown: the ledger does not hold them.\n");
}

static void print_value(void *context, const struct permit_value *value)
{
    (void)context;
    printf("   %s = %s (%s: %s%s%s)\n", value->key, value->text, permit_mark_text(value->mark), value->who,
           *value->who ? ": " : "", value->source);
}

static enum status take_example(void *context, int n, const char *const *columns)
{
    (void)context;
    (void)n;
    fprintf(stderr, "  %s\n", columns[0] ? columns[0] : "");
    return STATUS_OK;
}

static int say_unknown(const struct explaining *explaining, const char *id)
{
    fprintf(
        stderr,
        "hushwatch explain: %s: has no entry \"%s\"\nAn id is run.stream.kind.counter, like 1.0.advice.7; "
        "stream 0 is the watch itself. The last of each kind here:\n",
        explaining->path, id);
    const char *any = "x";
    ledger_select(
        explaining->ledger,
        "SELECT json_extract(body, '$.id') FROM entry WHERE ?1 <> '' AND seq IN (SELECT max(seq) FROM entry "
        "GROUP BY "
        "kind) ORDER BY kind",
        1, &any, take_example, NULL);
    return VERB_WRONG_USE;
}

static const char *take_option(void *context, int option, const char *value)
{
    struct explaining *explaining = context;
    char *end;
    (void)option;
    explaining->depth = strtol(value, &end, 10);
    return *value < '0' || *value > '9' || *end != '\0' || explaining->depth > EXPLANATION_MAX_DEPTH
               ? "--depth is not a number from 0 to 50: "
               : NULL;
}

static int explain(const struct explaining *explaining, const char *id)
{
    const struct explanation_setup setup = {.ledger = explaining->ledger,
                                            .depth = (uint32_t)explaining->depth,
                                            .entry = print_entry,
                                            .permit = print_permit,
                                            .value = print_value};
    enum status status = explanation_run(&setup, id);
    if (status == STATUS_OK)
        return VERB_GOOD;
    if (status == STATUS_NOT_FOUND)
        return say_unknown(explaining, id);
    fprintf(stderr, "hushwatch explain: %s: could not be read: %s\n", explaining->path, status_text(status));
    return VERB_SYSTEM;
}

int verb_explain(int argc, char **argv)
{
    static const struct option known[] = {
        {"depth", required_argument, NULL, 'd'}, {"help", no_argument, NULL, 'h'}, {NULL, 0, NULL, 0}};
    struct explaining *explaining = calloc(1, sizeof *explaining);
    char problem[LEDGER_PROBLEM_SIZE];
    int rest, code = VERB_SYSTEM;
    if (!explaining)
        return code;
    explaining->depth = EXPLANATION_DEPTH;
    code = options_read(&(struct options_reading){"explain", help, known, take_option, explaining}, argc,
                        argv, &rest);
    if (code == VERB_GOOD && argc - rest != 2)
        code = options_wrong_use("explain", "a LEDGER and an ID are needed", "");
    if (code == VERB_GOOD) {
        explaining->path = argv[rest];
        enum status status = ledger_open(explaining->path, LEDGER_READ, &explaining->ledger, problem);
        if (status == STATUS_OK) {
            code = explain(explaining, argv[rest + 1]);
            ledger_close(explaining->ledger);
        } else {
            fprintf(stderr, "hushwatch explain: %s\n", problem);
            code = status == STATUS_NOT_FOUND ? VERB_WRONG_USE : VERB_SYSTEM;
        }
    }
    free(explaining);
    return code == OPTIONS_ASKED_HELP ? VERB_GOOD : code;
}
