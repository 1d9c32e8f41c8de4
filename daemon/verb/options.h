/* Command lines of verbs: long options in any order, --help, and what is left. */
#ifndef VERB_OPTIONS_H
#define VERB_OPTIONS_H

#include <getopt.h>

#define OPTIONS_ASKED_HELP (-1)

/* All borrowed. */
struct options_reading {
    const char *verb; /* its name */
    const char *help;
    const struct option *known; /* with {"help", no_argument, NULL, 'h'}, closed by an empty one */
    /* Takes one option (never 'h'). NULL, or what is wrong with its value, in words that end in ": ". */
    const char *(*take)(void *context, int option, const char *value);
    void *context;
};

/* VERB_GOOD, and the place of the first argument that is no option in *out_rest; VERB_WRONG_USE when
 * something is wrong, which is said; OPTIONS_ASKED_HELP when the help was asked for, and is printed. */
int options_read(const struct options_reading *reading, int argc, char **argv, int *out_rest);
/* Says what is wrong with the command line; VERB_WRONG_USE. */
int options_wrong_use(const char *verb, const char *what, const char *value);

#endif
