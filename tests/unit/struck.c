/* lib/listen/struck: tones that begin with an impulse. Checked by hand. */
#include "support/test.h"

#include "listen/struck.h"

#define RATE 1000.0

static const struct call_class moan = {.form = CALL_TONE, .high_hz = 400, .tone = {.window_s = 0.128}};
static const struct call_class whistle = {.form = CALL_TONE, .high_hz = 19000, .tone = {.window_s = 0.0107}};
static const struct call_class clicks = {.form = CALL_TRAIN, .high_hz = 2000};

static bool begins(const struct struck *struck, const struct call_class *class, double start_s,
                   double length_s)
{
    const struct found_call found = {.start_frame = start_s * RATE, .end_frame = (start_s + length_s) * RATE};
    return struck_begins(struck, class, &found);
}

static void what_begins_with_an_impulse_is_known(void **state)
{
    (void)state;
    static struct struck struck;
    struck_reset(&struck, RATE);
    assert_false(begins(&struck, &moan, 0, 0.6)); /* none yet */
    for (int i = 0; i < 40; i++)
        struck_take(&struck, (10.0 + 2 * i) * RATE);
    assert_true(begins(&struck, &moan, 88.05, 0.6));
    assert_true(begins(&struck, &moan, 87.90, 0.6)); /* a window sees it coming */
    assert_false(begins(&struck, &moan, 88.25, 0.6));
    assert_false(begins(&struck, &moan, 88.05, 2));   /* longer than a blow rings */
    assert_false(begins(&struck, &whistle, 88, 0.6)); /* a blow does not ring so high */
    assert_false(begins(&struck, &clicks, 88, 0.6));  /* trains have a rhythm of their own */
    assert_false(begins(&struck, &moan, 10.05, 0.6)); /* forgotten */
    assert_true(begins(&struck, &moan, 26.05, 0.6));  /* the oldest that is remembered */
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(what_begins_with_an_impulse_is_known)};
    return cmocka_run_group_tests_name("struck", tests, NULL, NULL);
}
