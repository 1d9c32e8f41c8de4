/* The decimator against scipy.signal.freqz and lfilter (tests/support/decimate_check.py). */
#include "support/test.h"

#include "base/random.h"
#include "dsp/decimate.h"
#include <stdlib.h>

static void write_file(const char *path, const float *samples, size_t n)
{
    FILE *file = fopen(path, "wb");
    assert_non_null(file);
    assert_int_equal(fwrite(samples, sizeof *samples, n, file), n);
    assert_int_equal(fclose(file), 0);
}

/* Impulses at each of the phases: output k of phase p is the response at k * factor - p. */
static void measure_response(struct decimator *decimator, uint32_t factor, float *response, size_t n)
{
    float *in = calloc(n, sizeof *in), *out = calloc(n / factor + 2, sizeof *out);
    for (size_t p = 0; p < factor; p++) {
        decimator_reset(decimator);
        in[p] = 1;
        size_t n_out = decimator_push(decimator, in, n, out);
        in[p] = 0;
        for (size_t k = 0; k < n_out; k++)
            if (k * factor >= p && k * factor - p < n)
                response[k * factor - p] = out[k];
    }
    free(in);
    free(out);
}

static void check(uint32_t factor)
{
    struct decimator *decimator = NULL;
    assert_int_equal(decimator_create(factor, &decimator), STATUS_OK);
    size_t n_response = (2 * (size_t)decimator_get_delay(decimator) / factor + 4) * factor, n = 20000;
    float *response = calloc(n_response, sizeof *response), *in = malloc(n * sizeof *in),
          *out = malloc((n / factor + 2) * sizeof *out);
    measure_response(decimator, factor, response, n_response);
    struct random random;
    random_reset(&random, factor);
    for (size_t i = 0; i < n; i++)
        in[i] = (float)random_normal(&random);
    decimator_reset(decimator);
    size_t n_out = decimator_push(decimator, in, n, out);
    char names[3][512], command[2048];
    for (int i = 0; i < 3; i++)
        snprintf(names[i], sizeof names[i], "%s/decimate-%u-%d.f32", test_build(), (unsigned)factor, i);
    write_file(names[0], response, n_response);
    write_file(names[1], in, n);
    write_file(names[2], out, n_out);
    snprintf(command, sizeof command, "/usr/bin/python3 tests/support/decimate_check.py %u '%s' '%s' '%s'",
             (unsigned)factor, names[0], names[1], names[2]);
    fflush(stdout);
    assert_int_equal(system(command), 0);
    decimator_destroy(decimator);
    free(response);
    free(in);
    free(out);
}

static void factor_3_agrees_with_scipy(void **state)
{
    (void)state;
    check(3);
}

static void factor_48_agrees_with_scipy(void **state)
{
    (void)state;
    check(48);
}

static void factor_140_agrees_with_scipy(void **state)
{
    (void)state;
    check(140);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(factor_3_agrees_with_scipy),
        cmocka_unit_test(factor_48_agrees_with_scipy),
        cmocka_unit_test(factor_140_agrees_with_scipy),
    };
    return cmocka_run_group_tests_name("decimate against scipy", tests, NULL, NULL);
}
