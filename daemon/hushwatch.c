/* hushwatch: the tool. Everything it can do is a line in verb/verb.c. */
#include "verb/verb.h"
#include <stdio.h>
#include <string.h>

static void print_help(FILE *out)
{
    fprintf(out, "usage: hushwatch VERB ...\n\n");
    for (const struct verb *verb = verbs; verb->name; verb++)
        fprintf(out, "  %-10s %s\n", verb->name, verb->help);
    fprintf(out,
            "\n'hushwatch VERB --help' tells more. Exit code: 0 good, 1 the check found something wrong,\n"
            "2 wrong use or settings, 3 the system failed.\n");
}

int main(int argc, char **argv)
{
    if (argc < 2) {
        print_help(stderr);
        return VERB_WRONG_USE;
    }
    if (strcmp(argv[1], "--help") == 0 || strcmp(argv[1], "help") == 0) {
        print_help(stdout);
        return VERB_GOOD;
    }
    if (strcmp(argv[1], "--version") == 0) {
        printf("hushwatch %s\n", HUSHWATCH_VERSION);
        return VERB_GOOD;
    }
    for (const struct verb *verb = verbs; verb->name; verb++)
        if (strcmp(argv[1], verb->name) == 0)
            return verb->run(argc - 1, argv + 1);
    fprintf(stderr, "hushwatch: there is no verb '%s'\n\n", argv[1]);
    print_help(stderr);
    return VERB_WRONG_USE;
}
