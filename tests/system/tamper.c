/* A ledger that was tampered with: what `hushwatch verify` and the procedure of docs/ledger.md (run exactly
 * as it stands there, with sqlite3 and sha256sum) find. */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "ledger/ledger.h"
#include "record/entry.h"
#include "record/marks.h"
#include <stdlib.h>
#include <sys/wait.h>
#include <unistd.h>

#define N_ENTRIES 61

static char folder[512];

#define ZERO_NS (INT64_C(1772366400) * TIME_NS_PER_S) /* 2026-03-01T12:00:00Z */

static void add_line(struct ledger *ledger, int64_t watch_ns, const char *kind, const char *body)
{
    char utc[TIME_UTC_SIZE], problem[LEDGER_PROBLEM_SIZE];
    time_format_utc(ZERO_NS + watch_ns, utc);
    struct ledger_line line = {.utc = utc, .kind = kind, .body = body};
    assert_int_equal(ledger_append(ledger, &line, 1, problem), STATUS_OK);
}

static void make_outcome(struct outcome *outcome, unsigned i)
{
    *outcome = (struct outcome){.run = 1, .counter = i, .watch_ns = (int64_t)i * TIME_NS_PER_S};
    struct event *event = &outcome->as.event;
    if (i % 3 == 0) {
        outcome->kind = OUTCOME_ADVICE;
        outcome->as.advice.advice = ADVICE_STOP;
        outcome->as.advice.until_ns = -1;
        snprintf(outcome->as.advice.station, sizeof outcome->as.advice.station, "crew");
        return;
    }
    outcome->kind = OUTCOME_EVENT;
    *event = (struct event){.run = 1, .counter = i, .known_ns = outcome->watch_ns};
    if (i % 3 == 1) {
        event->kind = EVENT_NOTE;
        note_reset(&event->as.note, NOTE_REMARK);
        snprintf(event->as.note.text, sizeof event->as.note.text, "line %u, 20 m \xc3\xa5 \"quoted\"", i);
        return;
    }
    event->kind = EVENT_IMPULSE;
    event->stream = 1;
    event->as.impulse = (struct impulse){.channel = 1, .sel_db = 170.25, .time_ns = event->known_ns};
}

/* A run entry and 60 others, in good.ledger. */
static void make_ledger(void)
{
    struct ledger *ledger;
    struct text body = {0};
    struct outcome outcome;
    char path[600], problem[LEDGER_PROBLEM_SIZE];
    const struct run_mark no_outage = {0, 0};
    snprintf(path, sizeof path, "%s/good.ledger", folder);
    assert_int_equal(ledger_open(path, LEDGER_CREATE, &ledger, problem), STATUS_OK);
    assert_int_equal(
        entry_body_run(1, &no_outage, ZERO_NS, &(struct run_facts){.site = "tamper test"}, &body), STATUS_OK);
    add_line(ledger, 0, "run", body.data);
    for (unsigned i = 1; i < N_ENTRIES; i++) {
        make_outcome(&outcome, i);
        assert_int_equal(entry_body(&outcome, ZERO_NS, &body), STATUS_OK);
        add_line(ledger, outcome.watch_ns, flow_outcome_kind_text(&outcome), body.data);
    }
    text_destroy(&body);
    ledger_close(ledger);
}

static int set_up(void **state)
{
    (void)state;
    snprintf(folder, sizeof folder, "%s/tamper-XXXXXX", test_build());
    if (!mkdtemp(folder))
        return -1;
    make_ledger();
    /* The document's own commands: the block marked sh. */
    return test_shell(
        "sed -n '/^```sh$/,/^```$/p' docs/ledger.md | sed '/^```/d' > '%s/check.sh' && test -s '%s/check.sh'",
        folder, folder);
}

static int tear_down(void **state)
{
    (void)state;
    return test_shell("rm -rf '%s'", folder);
}

static int verify(const char *name)
{
    return test_shell("'%s/hushwatch' verify '%s/%s.ledger' > '%s/verify.out' 2>&1", test_build(), folder,
                      name, folder);
}

static int procedure(const char *name)
{
    return test_shell("LEDGER='%s/%s.ledger' sh '%s/check.sh' > '%s/procedure.out' 2>&1", folder, name,
                      folder, folder);
}

static bool says(const char *output, const char *words)
{
    return test_shell("grep -q -- '%s' '%s/%s.out'", words, folder, output) == 0;
}

/* Copies the good ledger and changes the copy by SQL, as anybody with sqlite3 can. */
static void tamper(const char *name, const char *sql)
{
    assert_int_equal(test_shell("cp '%s/good.ledger' '%s/%s.ledger'", folder, folder, name), 0);
    assert_int_equal(test_shell("sqlite3 '%s/%s.ledger' \"%s\"", folder, name, sql), 0);
}

static void assert_found_by_both(const char *name, const char *sql, const char *verify_says)
{
    tamper(name, sql);
    assert_int_equal(verify(name), 1);
    if (!says("verify", verify_says))
        fail_msg("verify does not say: %s", verify_says);
    assert_int_equal(procedure(name), 1);
    assert_false(says("procedure", "^good$"));
}

static void a_good_ledger_is_good(void **state)
{
    (void)state;
    assert_int_equal(verify("good"), 0);
    assert_true(says("verify", "61 entries from 2026-03-01T12:00:00.000000Z to 2026-03-01T12:01:00.000000Z"));
    assert_int_equal(procedure("good"), 0);
    assert_true(says("procedure", "^good$"));
    /* Both print the same last hash, which is to be noted elsewhere. */
    assert_int_equal(
        test_shell(
            "h=$(sed -n 's/.*last hash //p' '%s/verify.out'); grep -q \"last hash: $h\" '%s/procedure.out'",
            folder, folder),
        0);
}

static void a_changed_entry_is_found(void **state)
{
    (void)state;
    assert_found_by_both("body", "UPDATE entry SET body = replace(body, '170.25', '150.25') WHERE seq = 6",
                         "entry 6: its hash");
    assert_found_by_both("utc", "UPDATE entry SET utc = '2026-03-01T11:00:00.000000Z' WHERE seq = 30",
                         "entry 30: ");
    assert_found_by_both("kind", "UPDATE entry SET kind = 'finding' WHERE seq = 4", "entry 4: ");
    assert_found_by_both("hash", "UPDATE entry SET hash = replace(hash, 'a', 'b') WHERE seq = 61",
                         "entry 61: ");
    assert_found_by_both("null", "UPDATE entry SET body = NULL WHERE seq = 10", "entry 10: ");
    /* Behind a zero byte a text looks unchanged to a careless reader. */
    assert_found_by_both("zero", "UPDATE entry SET body = body || char(0) || 'more' WHERE seq = 10",
                         "entry 10: holds something else than plain text");
}

static void a_removed_entry_is_found(void **state)
{
    (void)state;
    assert_found_by_both("removed", "DELETE FROM entry WHERE seq = 7", "entry 7: is missing");
    assert_found_by_both("first", "DELETE FROM entry WHERE seq = 1", "entry 1: is missing");
    assert_found_by_both("closed-up",
                         "DELETE FROM entry WHERE seq = 7; UPDATE entry SET seq = seq - 1 WHERE seq > 7",
                         "entry 7: its hash");
}

static void an_added_entry_is_found(void **state)
{
    (void)state;
    assert_found_by_both(
        "added",
        "INSERT INTO entry SELECT 62, utc, kind, replace(body, '.note.58', '.note.61'), hash FROM entry "
        "WHERE seq = 59",
        "entry 62: its hash");
    assert_found_by_both(
        "inserted",
        "UPDATE entry SET seq = -seq WHERE seq > 20; UPDATE entry SET seq = 1 - seq WHERE seq < 0; "
        "INSERT INTO entry SELECT 21, utc, kind, replace(body, '.note.19', '.note.999'), hash FROM entry "
        "WHERE seq = 20",
        "entry 21: its hash");
    assert_found_by_both("zeroth",
                         "INSERT INTO entry SELECT 0, utc, kind, body, hash FROM entry WHERE seq = 1",
                         "its number is not allowed");
}

static void swapped_entries_are_found(void **state)
{
    (void)state;
    assert_found_by_both(
        "swapped",
        "UPDATE entry SET seq = 1000 WHERE seq = 11; UPDATE entry SET seq = 11 WHERE seq = 14; "
        "UPDATE entry SET seq = 14 WHERE seq = 1000",
        "entry 11: its hash");
}

/* With the hash made anew by sha256sum the changed entry fits, and the next one does not. */
static void a_hash_made_anew_moves_the_fault_on(void **state)
{
    (void)state;
    tamper("anew", "UPDATE entry SET body = replace(body, '170.25', '150.25') WHERE seq = 6");
    assert_int_equal(
        test_shell("cd '%s' && h=$(sqlite3 anew.ledger \"SELECT writefile('anew.txt', (SELECT hash "
                   "FROM entry WHERE seq = 5) || "
                   "char(10) || seq || char(10) || utc || char(10) || kind || char(10) || body) FROM "
                   "entry WHERE seq = 6\" "
                   "> anew.n; sha256sum < anew.txt | cut -c1-64) && sqlite3 anew.ledger \"UPDATE "
                   "entry SET hash = '$h' WHERE seq = 6\"",
                   folder),
        0);
    assert_int_equal(verify("anew"), 1);
    assert_true(says("verify", "entry 7: its hash"));
    assert_false(says("verify", "entry 6: "));
    assert_true(says("verify", "NOT good: 1 faults"));
    assert_int_equal(procedure("anew"), 1);
    assert_true(says("procedure", "^7: FAILED"));
}

static void a_changed_schema_is_found(void **state)
{
    (void)state;
    tamper("view", "DROP VIEW advice; CREATE VIEW advice AS SELECT * FROM phase");
    assert_int_equal(verify("view"), 1);
    assert_true(says("verify", "the view .advice. is not what the program makes"));
    assert_int_equal(procedure("view"), 0); /* as the document says: it reads the table only */
    tamper("no-view", "DROP VIEW note");
    assert_int_equal(verify("no-view"), 1);
    assert_true(says("verify", "the view .note. is missing"));
    tamper("trigger",
           "CREATE TRIGGER hide AFTER INSERT ON entry BEGIN DELETE FROM entry WHERE seq = new.seq; END");
    assert_int_equal(verify("trigger"), 1);
    assert_true(says("verify", "the trigger .hide. does not belong"));
    tamper("index", "DROP INDEX entry_id");
    assert_int_equal(verify("index"), 1);
    tamper("older", "PRAGMA user_version=1; DROP VIEW source");
    assert_int_equal(verify("older"), 1);
    assert_true(says("verify", "was written by another version (format 1, this one makes"));
    assert_false(says("verify", "source"));
    assert_true(says("verify", "NOT good: 1 faults"));
    tamper("column", "ALTER TABLE entry ADD COLUMN remark TEXT");
    assert_int_equal(verify("column"), 1);
}

/* A flipped byte anywhere in the stored texts: 1,000 in a long run. */
static void any_changed_byte_is_found(void **state)
{
    (void)state;
    int n = test_length() == TEST_SHORT ? 5 : test_length() == TEST_CHECK ? 25 : 1000;
    static const char *const columns[] = {"utc", "kind", "body", "hash"};
    struct random random;
    random_reset(&random, 5);
    for (int i = 0; i < n; i++) {
        char sql[512];
        unsigned seq = (unsigned)(1 + random_bits(&random) % N_ENTRIES);
        const char *column = columns[i % 4];
        unsigned at = (unsigned)(random_bits(&random) % 10000);
        /* The character at that place becomes another one (# and, where it is #, %). */
        snprintf(
            sql, sizeof sql,
            "DROP INDEX entry_id; WITH p AS (SELECT 1 + %u %% length(%s) AS at FROM entry WHERE seq = %u) "
            "UPDATE entry SET %s = substr(%s, 1, (SELECT at FROM p) - 1) || iif(substr(%s, (SELECT at FROM "
            "p), 1) = "
            "'#', '%%', '#') || substr(%s, (SELECT at FROM p) + 1) WHERE seq = %u",
            at, column, seq, column, column, column, column, seq);
        tamper("byte", sql);
        assert_int_equal(verify("byte"), 1);
        char wanted[64];
        snprintf(wanted, sizeof wanted, "entry %u: its hash", seq);
        if (!says("verify", wanted))
            fail_msg("seed 5, change %d: column %s of entry %u is not found", i, column, seq);
        if (i % 5 == 0)
            assert_int_equal(procedure("byte"), 1);
    }
    printf("# figure %d of %d changed characters found\n", n, n);
}

static void wrong_use_has_its_own_exit_code(void **state)
{
    (void)state;
    assert_int_equal(verify("no-such"), 2);
    assert_int_equal(test_shell("'%s/hushwatch' verify > '%s/x.out' 2>&1", test_build(), folder), 2);
    assert_int_equal(test_shell("'%s/hushwatch' verify --help > '%s/x.out' 2>&1", test_build(), folder), 0);
    assert_int_equal(test_shell("'%s/hushwatch' vrify > '%s/x.out' 2>&1", test_build(), folder), 2);
    assert_int_equal(test_shell("seq 1 999 > '%s/text.ledger'", folder), 0);
    assert_int_equal(verify("text"), 1);
    assert_true(says("verify", "not a ledger"));
    tamper("newer", "PRAGMA user_version=99");
    assert_int_equal(verify("newer"), 2);
    assert_true(says("verify", "newer program"));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_good_ledger_is_good),
        cmocka_unit_test(a_changed_entry_is_found),
        cmocka_unit_test(a_removed_entry_is_found),
        cmocka_unit_test(an_added_entry_is_found),
        cmocka_unit_test(swapped_entries_are_found),
        cmocka_unit_test(a_hash_made_anew_moves_the_fault_on),
        cmocka_unit_test(a_changed_schema_is_found),
        cmocka_unit_test(any_changed_byte_is_found),
        cmocka_unit_test(wrong_use_has_its_own_exit_code),
    };
    return cmocka_run_group_tests(tests, set_up, tear_down);
}
