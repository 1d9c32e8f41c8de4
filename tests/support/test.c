/* What the runner tells a test program. */
#include "support/test.h"
#include <math.h>
#include <stdlib.h>
#include <sys/wait.h>
#include <unistd.h>

void test_assert_near(double a, double b, double tolerance, const char *what, const char *file, int line)
{
    if (fabs(a - b) <= tolerance)
        return;
    print_error("%s is %.9g, wanted %.9g within %.3g\n", what, a, b, tolerance);
    _fail(file, line);
}

enum test_length test_length(void)
{
    const char *length = getenv("HUSHWATCH_LENGTH");
    if (length && strcmp(length, "short") == 0)
        return TEST_SHORT;
    return length && strcmp(length, "long") == 0 ? TEST_LONG : TEST_CHECK;
}

const char *test_shared(const char *name)
{
    static char path[1024];
    const char *folder = getenv("HUSHWATCH_SHARED");
    snprintf(path, sizeof path, "%s/%s", folder ? folder : "../shared", name);
    return access(path, R_OK) == 0 ? path : NULL;
}

int test_shell(const char *format, ...)
{
    char command[4096];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(command, sizeof command, format, arguments);
    va_end(arguments);
    int result = system(command);
    assert_true(WIFEXITED(result));
    return WEXITSTATUS(result);
}

const char *test_build(void)
{
    const char *build = getenv("HUSHWATCH_BUILD");
    return build ? build : "build";
}
