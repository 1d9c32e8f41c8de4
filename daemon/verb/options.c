/* Command lines of verbs; see options.h. */
#include "verb/options.h"
#include "verb/verb.h"
#include <stdio.h>

int options_wrong_use(const char *verb, const char *what, const char *value)
{
    fprintf(stderr, "hushwatch %s: %s%s\n'hushwatch %s --help' tells how it is used.\n", verb, what, value,
            verb);
    return VERB_WRONG_USE;
}

int options_read(const struct options_reading *reading, int argc, char **argv, int *out_rest)
{
    int option;
    opterr = 0;
    optind = 1;
    while ((option = getopt_long(argc, argv, "", reading->known, NULL)) != -1) {
        if (option == 'h') {
            fputs(reading->help, stdout);
            return OPTIONS_ASKED_HELP;
        }
        if (option == '?')
            return options_wrong_use(reading->verb, "unknown option or missing value: ", argv[optind - 1]);
        const char *wrong = reading->take(reading->context, option, optarg);
        if (wrong)
            return options_wrong_use(reading->verb, wrong, optarg ? optarg : "");
    }
    *out_rest = optind;
    return VERB_GOOD;
}
