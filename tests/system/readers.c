/* The pool that answers the review's questions, and the thread that says whether the ledger is as it was
 * written, on a real file: a deliberately endless query has its time limit and delays neither another
 * question nor the watch's own writing; a ledger that grows is followed, one that is changed is said. */
#include "support/test.h"

#include "base/time.h"
#include "clock.h"
#include "ledger/checker.h"
#include "ledger/readers.h"
#include <pthread.h>
#include <stdlib.h>
#include <unistd.h>

#define N_REMARKS 4000
#define N_APPENDS 100

static char folder[512], path[600];

static enum status append(struct ledger *ledger, unsigned first, unsigned n)
{
    enum status status = STATUS_OK;
    for (unsigned i = first; i < first + n && status == STATUS_OK; i++) {
        char utc[TIME_UTC_SIZE], body[256], problem[LEDGER_PROBLEM_SIZE];
        time_format_utc(INT64_C(1772366400) * TIME_NS_PER_S + (int64_t)i * TIME_NS_PER_S, utc);
        snprintf(body, sizeof body,
                 "{\"id\":\"1.0.note.%u\",\"known_s\":%u.000000,\"note\":\"remark\",\"occurred_s\":%u.000000,"
                 "\"text\":\"line %u\"}",
                 i, i, i, i);
        struct ledger_line line = {.utc = utc, .kind = "note", .body = body};
        status = ledger_append(ledger, &line, 1, problem);
    }
    return status;
}

static struct ledger *open_for(enum ledger_open_mode mode)
{
    struct ledger *ledger;
    char problem[LEDGER_PROBLEM_SIZE];
    if (ledger_open(path, mode, &ledger, problem) != STATUS_OK)
        fail_msg("%s", problem);
    return ledger;
}

static int set_up(void **state)
{
    (void)state;
    snprintf(folder, sizeof folder, "%s/readers-XXXXXX", test_build());
    if (!mkdtemp(folder))
        return -1;
    snprintf(path, sizeof path, "%s/watch.ledger", folder);
    struct ledger *ledger = open_for(LEDGER_CREATE);
    enum status status = append(ledger, 1, N_REMARKS);
    ledger_close(ledger);
    return status == STATUS_OK ? 0 : -1;
}

static int tear_down(void **state)
{
    (void)state;
    return test_shell("rm -rf '%s'", folder);
}

/* ---- questions */

struct asked {
    struct question question;
    pthread_mutex_t *lock;
    pthread_cond_t *changed;
    bool is_done;
    double took_s;
    int64_t begun_ns;
};

static pthread_mutex_t lock = PTHREAD_MUTEX_INITIALIZER;
static pthread_cond_t changed = PTHREAD_COND_INITIALIZER;

static enum status count_row(void *context, int n, const char *const *columns)
{
    (void)n;
    text_append(context, columns[0]);
    return STATUS_OK;
}

/* Every pair of entries, over and over: it never ends by itself. */
static enum status ask_endless(struct ledger *ledger, struct question *question)
{
    return ledger_select(
        ledger,
        "WITH RECURSIVE n(i) AS (SELECT 1 UNION ALL SELECT i + 1 FROM n) SELECT count(*) FROM "
        "n, entry WHERE instr(body, 'nowhere ' || i) > 0",
        0, NULL, count_row, &question->text);
}

static enum status ask_count(struct ledger *ledger, struct question *question)
{
    return ledger_select(ledger, "SELECT count(*) FROM entry", 0, NULL, count_row, &question->text);
}

static void done(struct question *question)
{
    struct asked *asked = (struct asked *)question;
    pthread_mutex_lock(&lock);
    asked->is_done = true;
    asked->took_s = time_to_s(clock_monotonic_ns() - asked->begun_ns);
    pthread_cond_broadcast(&changed);
    pthread_mutex_unlock(&lock);
}

static enum status put(struct readers *readers, struct asked *asked,
                       enum status (*ask)(struct ledger *ledger, struct question *question))
{
    *asked = (struct asked){.question = {.ask = ask, .done = done}, .begun_ns = clock_monotonic_ns()};
    return readers_put(readers, &asked->question);
}

static void wait_for(struct asked *asked)
{
    pthread_mutex_lock(&lock);
    while (!asked->is_done)
        pthread_cond_wait(&changed, &lock);
    pthread_mutex_unlock(&lock);
}

static void an_endless_query_has_its_time(void **state)
{
    (void)state;
    struct readers *readers;
    struct asked slow, quick, other;
    assert_int_equal(readers_create(path, &readers), STATUS_OK);
    assert_int_equal(put(readers, &slow, ask_endless), STATUS_OK);
    assert_int_equal(put(readers, &quick, ask_count), STATUS_OK);
    wait_for(&quick);
    assert_int_equal(quick.question.status, STATUS_OK);
    assert_string_equal(quick.question.text.data, "4000");
    assert_true(quick.took_s < 1.0); /* the other thread answers */
    wait_for(&slow);
    printf("# figure an endless query ended after %.2f s (limit %.1f s); another question beside it took "
           "%.3f s\n",
           slow.took_s, READERS_LIMIT_S, quick.took_s);
    assert_int_equal(slow.question.status, STATUS_TIMEOUT);
    assert_true(slow.took_s >= READERS_LIMIT_S && slow.took_s < READERS_LIMIT_S + 1.0);
    assert_int_equal(put(readers, &other, ask_count), STATUS_OK); /* the handle works on */
    wait_for(&other);
    assert_int_equal(other.question.status, STATUS_OK);
    readers_destroy(readers);
    text_destroy(&slow.question.text);
    text_destroy(&quick.question.text);
    text_destroy(&other.question.text);
}

static void too_many_are_refused_and_an_end_ends_them(void **state)
{
    (void)state;
    struct readers *readers;
    static struct asked asked[READERS_MAX_WAITING + READERS_COUNT + 8];
    unsigned taken = 0, refused = 0;
    assert_int_equal(readers_create(path, &readers), STATUS_OK);
    for (unsigned i = 0; i < sizeof asked / sizeof asked[0]; i++) {
        if (put(readers, &asked[i], ask_endless) == STATUS_OK)
            taken++;
        else
            refused++;
    }
    assert_true(refused >= 8 && taken >= READERS_MAX_WAITING);
    int64_t begun_ns = clock_monotonic_ns();
    readers_stop(readers);
    assert_true(time_to_s(clock_monotonic_ns() - begun_ns) < 0.5);
    unsigned ended = 0;
    for (unsigned i = 0; i < sizeof asked / sizeof asked[0]; i++)
        ended += asked[i].is_done &&
                 (asked[i].question.status == STATUS_BUSY || asked[i].question.status == STATUS_TIMEOUT);
    assert_int_equal(ended, taken);
    assert_int_equal(put(readers, &asked[0], ask_count), STATUS_BUSY);
    readers_destroy(readers);
}

static int by_size(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return x < y ? -1 : x > y;
}

/* The 99th percentile and the most of the seconds that writing an entry takes. */
static void time_appends(unsigned first, double *out_p99, double *out_most)
{
    double took[N_APPENDS];
    struct ledger *ledger = open_for(LEDGER_WRITE);
    for (unsigned i = 0; i < N_APPENDS; i++) {
        int64_t begun_ns = clock_monotonic_ns();
        assert_int_equal(append(ledger, first + i, 1), STATUS_OK);
        took[i] = time_to_s(clock_monotonic_ns() - begun_ns);
        usleep(10000);
    }
    ledger_close(ledger);
    qsort(took, N_APPENDS, sizeof took[0], by_size);
    *out_p99 = took[N_APPENDS * 99 / 100 - 1];
    *out_most = took[N_APPENDS - 1];
}

static void no_query_delays_the_writer(void **state)
{
    (void)state;
    struct readers *readers;
    static struct asked asked[READERS_MAX_WAITING];
    double quiet_p99, quiet_most, p99, most;
    time_appends(N_REMARKS + 1, &quiet_p99, &quiet_most);
    assert_int_equal(readers_create(path, &readers), STATUS_OK);
    for (unsigned i = 0; i < READERS_MAX_WAITING; i++)
        assert_int_equal(put(readers, &asked[i], ask_endless), STATUS_OK);
    usleep(200000); /* every thread of the pool is at one now */
    time_appends(N_REMARKS + 1 + N_APPENDS, &p99, &most);
    unsigned still = 0;
    for (unsigned i = 0; i < READERS_MAX_WAITING; i++)
        still += !asked[i].is_done;
    readers_destroy(readers);
    printf(
        "# figure an entry is written in %.1f ms (99th percentile), at most %.1f ms; with %d endless queries "
        "running %.1f ms and %.1f ms\n",
        1e3 * quiet_p99, 1e3 * quiet_most, READERS_COUNT, 1e3 * p99, 1e3 * most);
    assert_true(still > 0); /* they ran all the while */
    assert_true(p99 < 0.3); /* what block arrival to committed advice may take in all */
}

/* ---- whether it is as it was written */

static void wait_until(struct checker *checker, enum checker_state state, int64_t least_seq,
                       struct checker_view *view)
{
    int64_t end_ns = clock_monotonic_ns() + 10 * TIME_NS_PER_S;
    do {
        usleep(20000);
        checker_get(checker, view);
    } while (!(view->state == state && view->facts.n_entries >= least_seq) && clock_monotonic_ns() < end_ns);
    if (view->state != state || view->facts.n_entries < least_seq)
        fail_msg("state %d, %lld entries, %s", view->state, (long long)view->facts.n_entries, view->problem);
}

static void a_ledger_is_followed_and_a_change_is_found(void **state)
{
    (void)state;
    struct checker *checker;
    struct checker_view view;
    unsigned n = N_REMARKS + 2 * N_APPENDS;
    assert_int_equal(checker_create(path, &checker), STATUS_OK);
    checker_get(checker, &view);
    assert_int_equal(view.state, CHECKER_CHECKING);
    wait_until(checker, CHECKER_GOOD, n, &view);
    struct ledger *ledger = open_for(LEDGER_WRITE);
    assert_int_equal(append(ledger, n + 1, 5), STATUS_OK);
    wait_until(checker, CHECKER_GOOD, n + 5, &view);
    assert_int_equal(view.n_faults, 0);
    ledger_close(ledger);
    assert_int_equal(
        test_shell(
            "sqlite3 '%s' \"UPDATE entry SET body = replace(body, 'line 77', 'lime 77') WHERE seq = 77\"",
            path),
        0);
    wait_until(checker, CHECKER_FAULTS, 0, &view);
    assert_int_equal(view.faults[0].seq, 77);
    assert_non_null(strstr(view.faults[0].sentence, "hash"));
    checker_destroy(checker);
}

static void a_file_that_is_no_ledger_is_said(void **state)
{
    (void)state;
    struct checker *checker;
    struct checker_view view;
    char other[700];
    snprintf(other, sizeof other, "%s/none.ledger", folder);
    assert_int_equal(checker_create(other, &checker), STATUS_OK);
    wait_until(checker, CHECKER_UNREADABLE, 0, &view);
    assert_non_null(strstr(view.problem, "none.ledger"));
    checker_destroy(checker);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(an_endless_query_has_its_time),
        cmocka_unit_test(too_many_are_refused_and_an_end_ends_them),
        cmocka_unit_test(no_query_delays_the_writer),
        cmocka_unit_test(a_ledger_is_followed_and_a_change_is_found),
        cmocka_unit_test(a_file_that_is_no_ledger_is_said),
    };
    return cmocka_run_group_tests(tests, set_up, tear_down);
}
