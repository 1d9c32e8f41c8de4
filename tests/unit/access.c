/* daemon/access: sessions end when they must, failed tries make their address wait, the file of accounts is
 * strict. */
#include "support/test.h"

#include "access/session.h"
#include "access/tries.h"
#include "base/time.h"
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define S TIME_NS_PER_S

static struct accounts accounts;

static int set_up(void **state)
{
    (void)state;
    return accounts_reset(&accounts) == STATUS_OK &&
                   accounts_set(&accounts, "ears", ROLE_OBSERVER, "a quiet sea tonight") == STATUS_OK &&
                   accounts_set(&accounts, "cab", ROLE_CREW, "hammer and pile 12") == STATUS_OK
               ? 0
               : -1;
}

static void a_session_is_its_accounts_until_it_ends(void **state)
{
    (void)state;
    char token[SESSION_SIZE];
    session_issue(&accounts, accounts_find(&accounts, "cab"), 1000, token);
    assert_string_equal(session_account(&accounts, token, 999)->name, "cab");
    assert_null(session_account(&accounts, token, 1000));
}

static void no_letter_of_a_token_can_be_changed(void **state)
{
    (void)state;
    char token[SESSION_SIZE];
    session_issue(&accounts, accounts_find(&accounts, "cab"), 1000, token);
    for (char *c = token; *c; c++) {
        char kept = *c;
        *c = kept == '1' ? '2' : '1';
        assert_null(session_account(&accounts, token, 0));
        *c = kept;
    }
    token[strlen(token) - 1] = '\0';
    assert_null(session_account(&accounts, token, 0));
}

static void whatever_changes_an_account_ends_its_sessions(void **state)
{
    (void)state;
    char cab[SESSION_SIZE], ears[SESSION_SIZE];
    session_issue(&accounts, accounts_find(&accounts, "cab"), 1000, cab);
    session_issue(&accounts, accounts_find(&accounts, "ears"), 1000, ears);
    struct accounts changed = accounts;
    changed.items[1].role = ROLE_OBSERVER;
    assert_null(session_account(&changed, cab, 0));
    assert_int_equal(accounts_set(&changed, "cab", ROLE_CREW, "hammer and pile 12"), STATUS_OK);
    assert_null(session_account(&changed, cab, 0)); /* the same password, with another salt */
    assert_int_equal(accounts_remove(&changed, "cab"), STATUS_OK);
    assert_null(session_account(&changed, cab, 0));
    assert_string_equal(session_account(&changed, ears, 0)->name, "ears");
    struct accounts others;
    assert_int_equal(accounts_reset(&others), STATUS_OK); /* the same accounts under another secret */
    memcpy(others.items, accounts.items, sizeof others.items);
    others.n = accounts.n;
    assert_null(session_account(&others, ears, 0));
}

static void waits_double_and_are_forgotten(void **state)
{
    (void)state;
    static const int64_t wanted_s[] = {0, 0, 0, 0, 1, 2, 4, 8, 16, 32, 60, 60};
    static struct tries tries;
    tries_reset(&tries);
    for (size_t i = 0; i < sizeof wanted_s / sizeof wanted_s[0]; i++) {
        tries_failed(&tries, "192.0.2.7", 100 * S);
        assert_int_equal(tries_wait_ns(&tries, "192.0.2.7", 100 * S), wanted_s[i] * S);
    }
    assert_int_equal(tries_wait_ns(&tries, "192.0.2.8", 100 * S), 0);
    assert_int_equal(tries_wait_ns(&tries, "192.0.2.7", 130 * S), 30 * S);
    tries_failed(&tries, "192.0.2.7", (101 + TRIES_FORGET_S) * S);
    assert_int_equal(tries_wait_ns(&tries, "192.0.2.7", (101 + TRIES_FORGET_S) * S), 0);
    for (int i = 0; i < 5; i++)
        tries_failed(&tries, "192.0.2.9", 2000 * S);
    tries_good(&tries, "192.0.2.9");
    assert_int_equal(tries_wait_ns(&tries, "192.0.2.9", 2000 * S), 0);
}

static void many_addresses_push_out_the_one_that_was_longest_without_a_try(void **state)
{
    (void)state;
    static struct tries tries;
    tries_reset(&tries);
    char key[32];
    for (int i = 0; i < 2 * TRIES_PLACES; i++) {
        snprintf(key, sizeof key, "2001:db8::%x", i);
        for (int n = 0; n < 6; n++)
            tries_failed(&tries, key, (10 + i) * S);
    }
    assert_true(tries_wait_ns(&tries, key, (10 + 2 * TRIES_PLACES) * S) > 0);
    assert_int_equal(tries_wait_ns(&tries, "2001:db8::0", 10 * S), 0);
}

static enum status read_text(const char *text, mode_t mode, struct accounts *out, struct problems *problems)
{
    char path[] = "/tmp/hushwatch-accounts-XXXXXX";
    int fd = mkstemp(path);
    assert_true(fd >= 0 && write(fd, text, strlen(text)) == (ssize_t)strlen(text));
    assert_int_equal(fchmod(fd, mode), 0);
    close(fd);
    enum status status = accounts_read(path, problems, out);
    unlink(path);
    return status;
}

static void a_file_comes_back_as_it_was_written_and_a_wrong_one_is_refused(void **state)
{
    (void)state;
    char path[] = "/tmp/hushwatch-accounts-XXXXXX";
    int fd = mkstemp(path);
    assert_true(fd >= 0);
    close(fd);
    struct problems problems = {0};
    struct accounts again = {0};
    assert_int_equal(accounts_write(path, &accounts), STATUS_OK);
    assert_int_equal(accounts_read(path, &problems, &again), STATUS_OK);
    assert_memory_equal(&again, &accounts, sizeof again);
    assert_true(account_password_is(accounts_find(&again, "ears"), "a quiet sea tonight"));
    assert_false(account_password_is(accounts_find(&again, "ears"), "a quiet sea tonight "));
    assert_false(account_password_is(NULL, "a quiet sea tonight"));
    unlink(path);
    assert_int_equal(accounts_read(path, &problems, &again), STATUS_NOT_FOUND);
    assert_int_equal(problems.count, 0);
    char good[512];
    snprintf(good, sizeof good, "hushwatch-accounts 1 %064d\nears observer %s\n", 7, accounts.items[0].hash);
    assert_int_equal(read_text(good, 0600, &again, &problems), STATUS_OK);
    assert_int_equal(read_text(good, 0640, &again, &problems), STATUS_BAD_FORMAT);
    assert_non_null(strstr(problems.lines.data, "0600"));
    assert_int_equal(read_text("", 0600, &again, &problems), STATUS_BAD_FORMAT); /* it has no secret */
    assert_int_equal(read_text("ears observer\n", 0600, &again, &problems), STATUS_BAD_FORMAT);
    snprintf(good, sizeof good, "hushwatch-accounts 1 %064d\nears captain %s\n", 7, accounts.items[0].hash);
    assert_int_equal(read_text(good, 0600, &again, &problems), STATUS_BAD_FORMAT);
    assert_non_null(strstr(problems.lines.data, ":2: account"));
    problems_destroy(&problems);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_session_is_its_accounts_until_it_ends),
        cmocka_unit_test(no_letter_of_a_token_can_be_changed),
        cmocka_unit_test(whatever_changes_an_account_ends_its_sessions),
        cmocka_unit_test(waits_double_and_are_forgotten),
        cmocka_unit_test(many_addresses_push_out_the_one_that_was_longest_without_a_try),
        cmocka_unit_test(a_file_comes_back_as_it_was_written_and_a_wrong_one_is_refused),
    };
    return cmocka_run_group_tests_name("access", tests, set_up, NULL);
}
