/* hushwatch verify: says of every entry whether it is as it was written. */
#include "ledger/verify.h"
#include "verb/verb.h"
#include <inttypes.h>
#include <stdio.h>
#include <string.h>

#define MAX_LINES 100

static const char help[] =
    "usage: hushwatch verify LEDGER\n\n"
    "Checks that the entries are numbered without holes, that every hash fits its entry and the one before "
    "it, that\n"
    "every entry has the form that the program writes, and that the table and the views are the program's "
    "own. Prints\n"
    "one line for each fault. The ledger is only read, also while it is being written.\n"
    "A whole ledger that was written anew, or cut at its end, looks good: compare the last hash with one "
    "that was noted\n"
    "elsewhere. docs/ledger.md shows the same check with sqlite3 and sha256sum, and what it cannot prove.\n"
    "Exit code: 0 good, 1 a fault was found, 2 wrong use, 3 the ledger could not be read.\n";

struct printing {
    const char *path;
    unsigned lines;
};

static void print_fault(void *context, int64_t seq, const char *sentence)
{
    struct printing *printing = context;
    if (printing->lines++ >= MAX_LINES)
        return;
    if (seq > 0)
        printf("%s: entry %" PRId64 ": %s\n", printing->path, seq, sentence);
    else
        printf("%s: %s\n", printing->path, sentence);
}

static int open_exit(enum status status)
{
    switch (status) {
    case STATUS_BAD_FORMAT:
        return VERB_FOUND_WRONG; /* no ledger, or one that is damaged: nobody can tell which */
    case STATUS_NOT_FOUND:
    case STATUS_OUT_OF_RANGE:
        return VERB_WRONG_USE;
    default:
        return VERB_SYSTEM;
    }
}

static int check(const char *path)
{
    struct ledger *ledger;
    char problem[LEDGER_PROBLEM_SIZE];
    enum status status = ledger_open(path, LEDGER_READ, &ledger, problem);
    if (status != STATUS_OK) {
        fprintf(stderr, "hushwatch verify: %s\n", problem);
        return open_exit(status);
    }
    struct printing printing = {.path = path};
    struct verify_facts facts;
    status = ledger_verify(ledger, print_fault, &printing, &facts);
    ledger_close(ledger);
    if (printing.lines > MAX_LINES)
        printf("%s: and %u faults more\n", path, printing.lines - MAX_LINES);
    if (status != STATUS_OK && status != STATUS_MISMATCH) {
        printf("%s: could not be read to its end: %s\n", path, status_text(status));
        return status == STATUS_BAD_FORMAT ? VERB_FOUND_WRONG : VERB_SYSTEM;
    }
    printf("%s: %" PRId64 " entries from %s to %s\n", path, facts.n_entries,
           facts.n_entries ? facts.first_utc : "-", facts.n_entries ? facts.last_utc : "-");
    printf("%s: last hash %s\n", path, facts.last_hash);
    if (status == STATUS_OK)
        printf("%s: good: order, hashes, form, table and views\n", path);
    else
        printf("%s: NOT good: %" PRIu64 " faults\n", path, facts.n_faults);
    return status == STATUS_OK ? VERB_GOOD : VERB_FOUND_WRONG;
}

int verb_verify(int argc, char **argv)
{
    if (argc == 2 && strcmp(argv[1], "--help") == 0) {
        fputs(help, stdout);
        return VERB_GOOD;
    }
    if (argc != 2 || argv[1][0] == '-') {
        fputs(help, stderr);
        return VERB_WRONG_USE;
    }
    return check(argv[1]);
}
