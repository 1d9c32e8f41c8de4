/* What every cmocka test needs, in the order cmocka wants it. */
#ifndef SUPPORT_TEST_H
#define SUPPORT_TEST_H

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>
#include <time.h>

#include <cmocka.h>

/* Like assert_true(|a - b| <= tolerance), in double precision, and says the numbers. */
#define assert_near(a, b, tolerance) test_assert_near((a), (b), (tolerance), #a, __FILE__, __LINE__)
void test_assert_near(double a, double b, double tolerance, const char *what, const char *file, int line);

/* HUSHWATCH_LENGTH: how much a test does. */
enum test_length { TEST_SHORT, TEST_CHECK, TEST_LONG };
enum test_length test_length(void);

/* A file of the shared folder (not part of the project), or NULL where it is absent. The text is static. */
const char *test_shared(const char *name);
/* Runs a shell command; its exit code. The test fails when it was ended by a signal. */
int test_shell(const char *format, ...) __attribute__((format(printf, 1, 2)));

/* The build folder that the runner names. */
const char *test_build(void);

#endif
