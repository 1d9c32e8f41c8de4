/* The shipped call catalogue; see catalogue.h. */
#include "support/catalogue.h"
#include <stdio.h>

bool test_load_catalogue(struct catalogue *out)
{
    struct problems problems = {0};
    enum status status = catalogue_load("config/calls", &problems, NULL, out);
    if (status != STATUS_OK)
        fputs(problems.lines.data ? problems.lines.data : "config/calls: not read\n", stderr);
    problems_destroy(&problems);
    return status == STATUS_OK;
}
