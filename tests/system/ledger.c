/* daemon/ledger on a real file system: chain, repeats, locks, bad files, a refusing disk, floods, kills. */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "ledger/outbox.h"
#include "ledger/verify.h"
#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <signal.h>
#include <stdbool.h>
#include <stdlib.h>
#include <sys/mount.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/syscall.h>
#include <sys/wait.h>
#include <unistd.h>

/* ---- a disk whose syncs fail: this definition comes before the C library's for SQLite too */

static _Atomic int sync_failures; /* how many of the next fdatasync calls fail; -1: all */

int fdatasync(int fd)
{
    if (sync_failures != 0) {
        if (sync_failures > 0)
            sync_failures--;
        errno = EIO;
        return -1;
    }
    return (int)syscall(SYS_fdatasync, fd);
}

/* ---- helpers */

static char folder[512];
static char disk[600]; /* a small one that a test mounts */

static const char *in_folder(const char *name)
{
    static char paths[8][700];
    static unsigned next;
    char *path = paths[next++ % 8];
    snprintf(path, sizeof paths[0], "%s/%s", folder, name);
    return path;
}

static int set_up(void **state)
{
    (void)state;
    snprintf(folder, sizeof folder, "%s/ledger-XXXXXX", test_build());
    return mkdtemp(folder) ? 0 : -1;
}

static int tear_down(void **state)
{
    (void)state;
    char command[700];
    if (*disk)
        umount(disk);
    snprintf(command, sizeof command, "rm -rf '%s'", folder);
    return system(command);
}

struct made {
    char utc[TIME_UTC_SIZE], body[256];
};

static void make_remark(struct made *made, unsigned i)
{
    time_format_utc(INT64_C(1772366400) * TIME_NS_PER_S + (int64_t)i * 1000000, made->utc);
    snprintf(made->body, sizeof made->body,
             "{\"id\":\"1.0.note.%u\",\"known_s\":%u.000000,\"note\":\"remark\",\"occurred_s\":%u.000000,"
             "\"text\":\"line %u\"}",
             i, i, i, i);
}

static enum status append_remarks(struct ledger *ledger, unsigned first, unsigned n, int64_t *out_last_seq)
{
    struct made *made = calloc(n, sizeof *made);
    struct ledger_line *lines = calloc(n, sizeof *lines);
    char problem[LEDGER_PROBLEM_SIZE] = "";
    assert_true(made && lines);
    for (unsigned i = 0; i < n; i++) {
        make_remark(&made[i], first + i);
        lines[i] = (struct ledger_line){.utc = made[i].utc, .kind = "note", .body = made[i].body};
    }
    enum status status = ledger_append(ledger, lines, n, problem);
    if (status == STATUS_OK && out_last_seq)
        *out_last_seq = lines[n - 1].seq;
    if (status != STATUS_OK)
        assert_true(*problem != '\0');
    free(made);
    free(lines);
    return status;
}

static struct ledger *open_or_fail(const char *path, enum ledger_open_mode mode)
{
    struct ledger *ledger;
    char problem[LEDGER_PROBLEM_SIZE];
    if (ledger_open(path, mode, &ledger, problem) != STATUS_OK)
        fail_msg("%s", problem);
    return ledger;
}

static int64_t assert_verifies(const char *path)
{
    struct ledger *ledger = open_or_fail(path, LEDGER_READ);
    struct verify_facts facts;
    assert_int_equal(ledger_verify(ledger, NULL, NULL, &facts), STATUS_OK);
    assert_int_equal(facts.n_faults, 0);
    ledger_close(ledger);
    return facts.n_entries;
}

static void assert_refused(const char *path, enum ledger_open_mode mode, enum status wanted, const char *word)
{
    struct ledger *ledger = NULL;
    char problem[LEDGER_PROBLEM_SIZE] = "";
    assert_int_equal(ledger_open(path, mode, &ledger, problem), wanted);
    assert_null(ledger);
    if (!strstr(problem, path) || !strstr(problem, word))
        fail_msg("the problem says: %s", problem);
}

static void shell(const char *format, const char *path)
{
    char command[1024];
    snprintf(command, sizeof command, format, path);
    assert_int_equal(system(command), 0);
}

/* ---- tests */

static void entries_go_on_over_runs(void **state)
{
    (void)state;
    const char *path = in_folder("go-on.ledger");
    struct ledger *ledger = open_or_fail(path, LEDGER_CREATE);
    struct ledger_tail tail;
    assert_int_equal(ledger_get_tail(ledger, &tail), STATUS_OK);
    assert_int_equal(tail.seq, 0);
    assert_int_equal(tail.run, 0);
    int64_t last = 0;
    assert_int_equal(append_remarks(ledger, 1, 300, &last), STATUS_OK);
    assert_int_equal(last, 300);
    char problem[LEDGER_PROBLEM_SIZE];
    struct ledger_line run = {
        .utc = "2026-03-01T13:00:00.000000Z",
        .kind = "run",
        .body = "{\"id\":\"7.0.run.1\",\"outage_end_s\":0.000000,\"outage_start_s\":0.000000}"};
    assert_int_equal(ledger_append(ledger, &run, 1, problem), STATUS_OK);
    assert_int_equal(run.seq, 301);
    ledger_close(ledger);
    assert_int_not_equal(access(in_folder("go-on.ledger.lock"), F_OK), 0);
    assert_refused(path, LEDGER_CREATE, STATUS_EXISTS, "exists already");
    ledger = open_or_fail(path, LEDGER_WRITE);
    assert_int_equal(ledger_get_tail(ledger, &tail), STATUS_OK);
    assert_int_equal(tail.seq, 301);
    assert_int_equal(tail.run, 7);
    assert_string_equal(tail.utc, run.utc);
    assert_int_equal(append_remarks(ledger, 301, 10, &last), STATUS_OK);
    assert_int_equal(last, 311);
    ledger_close(ledger);
    assert_int_equal(assert_verifies(path), 311);
}

static void a_repeated_write_is_harmless(void **state)
{
    (void)state;
    const char *path = in_folder("repeat.ledger");
    struct ledger *ledger = open_or_fail(path, LEDGER_WRITE);
    int64_t last = 0;
    assert_int_equal(append_remarks(ledger, 1, 20, &last), STATUS_OK);
    assert_int_equal(append_remarks(ledger, 5, 16, &last), STATUS_OK);
    assert_int_equal(last, 20);
    assert_int_equal(append_remarks(ledger, 15, 10, &last), STATUS_OK); /* 15 to 20 again, then 21 to 24 */
    assert_int_equal(last, 24);
    ledger_close(ledger);
    assert_int_equal(assert_verifies(path), 24);
}

/* A commit whose sync fails may be in the file or not (SQLite: SQLITE_IOERR_FSYNC); the retry must find out.
 */
static void a_failed_sync_neither_loses_nor_doubles(void **state)
{
    (void)state;
    const char *path = in_folder("sync.ledger");
    struct ledger *ledger = open_or_fail(path, LEDGER_WRITE);
    unsigned next = 1, failed = 0;
    for (int round = 0; round < 20; round++) {
        sync_failures = round % 3;
        enum status status;
        while ((status = append_remarks(ledger, next, 3, NULL)) != STATUS_OK) {
            assert_int_equal(status, STATUS_SYSTEM);
            failed++;
        }
        next += 3;
    }
    assert_true(failed >= 13);
    ledger_close(ledger);
    assert_int_equal(assert_verifies(path), 60);
}

static void one_writes_at_a_time(void **state)
{
    (void)state;
    const char *path = in_folder("lock.ledger");
    struct ledger *ledger = open_or_fail(path, LEDGER_WRITE);
    char number[24];
    snprintf(number, sizeof number, "process %ld", (long)getpid());
    assert_refused(path, LEDGER_WRITE, STATUS_BUSY, number);
    assert_int_equal(append_remarks(ledger, 1, 5, NULL), STATUS_OK);
    assert_int_equal(assert_verifies(path), 5); /* readers are not shut out */
    ledger_close(ledger);
    shell("echo 999999 > '%s.lock'", path); /* left by a program that was killed: nobody holds it */
    ledger = open_or_fail(path, LEDGER_WRITE);
    ledger_close(ledger);
}

static void other_files_are_refused(void **state)
{
    (void)state;
    const char *path = in_folder("none.ledger");
    assert_refused(path, LEDGER_READ, STATUS_NOT_FOUND, "cannot be read");
    assert_refused(in_folder("no-folder/x.ledger"), LEDGER_WRITE, STATUS_NOT_FOUND, "");
    path = in_folder("text.ledger");
    shell("seq 1 5000 > '%s'", path);
    assert_refused(path, LEDGER_READ, STATUS_BAD_FORMAT, "not a ledger");
    assert_refused(path, LEDGER_WRITE, STATUS_BAD_FORMAT, "not a ledger");
    shell("seq 1 5000 | cmp - '%s'", path); /* untouched */
    path = in_folder("other.ledger");
    shell("sqlite3 '%s' 'CREATE TABLE entry(x)'", path);
    assert_refused(path, LEDGER_READ, STATUS_BAD_FORMAT, "not a ledger");
    assert_refused(path, LEDGER_WRITE, STATUS_BAD_FORMAT, "not a ledger");
    path = in_folder("empty.ledger");
    shell(": > '%s'", path);
    assert_refused(path, LEDGER_READ, STATUS_BAD_FORMAT, "empty");
    assert_refused(folder, LEDGER_READ, STATUS_BAD_FORMAT, "not a file");
    path = in_folder("newer.ledger");
    ledger_close(open_or_fail(path, LEDGER_WRITE));
    shell("sqlite3 '%s' 'PRAGMA user_version=99'", path);
    assert_refused(path, LEDGER_READ, STATUS_OUT_OF_RANGE, "newer");
    assert_refused(path, LEDGER_WRITE, STATUS_OUT_OF_RANGE, "newer");
    path = in_folder("view.ledger");
    ledger_close(open_or_fail(path, LEDGER_WRITE));
    shell("sqlite3 '%s' 'DROP VIEW advice'", path);
    assert_refused(path, LEDGER_WRITE, STATUS_MISMATCH, "advice");
    ledger_close(open_or_fail(path, LEDGER_READ)); /* readable all the same, so that verify can tell */
}

/* The first pages overwritten by zeros, as a dying disk does. */
static void a_damaged_file_is_said(void **state)
{
    (void)state;
    const char *path = in_folder("damaged.ledger");
    struct ledger *ledger = open_or_fail(path, LEDGER_WRITE);
    assert_int_equal(append_remarks(ledger, 1, 2000, NULL), STATUS_OK);
    ledger_close(ledger);
    shell("dd if=/dev/zero of='%s' bs=4096 seek=40 count=20 conv=notrunc status=none", path);
    ledger = open_or_fail(path, LEDGER_READ);
    struct verify_facts facts;
    enum status status = ledger_verify(ledger, NULL, NULL, &facts);
    assert_true(status == STATUS_MISMATCH || status == STATUS_BAD_FORMAT);
    ledger_close(ledger);
}

/* As an ordinary user: root may write everything. */
static void files_that_may_only_be_read(void **state)
{
    (void)state;
    const char *path = in_folder("read-only.ledger");
    struct ledger *ledger = open_or_fail(path, LEDGER_WRITE);
    assert_int_equal(append_remarks(ledger, 1, 7, NULL), STATUS_OK);
    ledger_close(ledger);
    assert_int_equal(chmod(path, 0444), 0);
    assert_int_equal(chmod(folder, 0555), 0);
    pid_t child = fork();
    if (child == 0) {
        struct ledger *other = NULL;
        char problem[LEDGER_PROBLEM_SIZE] = "";
        struct verify_facts facts;
        if (getuid() == 0 && setuid(65534) != 0)
            _exit(1);
        if (ledger_open(path, LEDGER_WRITE, &other, problem) != STATUS_SYSTEM ||
            !strstr(problem, "only be read"))
            _exit(2);
        /* In a folder that cannot be written SQLite cannot make its index files; it can be read all the same.
         */
        if (ledger_open(path, LEDGER_READ, &other, problem) != STATUS_OK)
            _exit(3);
        _exit(ledger_verify(other, NULL, NULL, &facts) == STATUS_OK && facts.n_entries == 7 ? 0 : 4);
    }
    int result;
    assert_int_equal(waitpid(child, &result, 0), child);
    assert_int_equal(chmod(folder, 0755), 0);
    assert_int_equal(result, 0);
}

/* ---- the outbox */

struct acknowledged {
    unsigned n; /* written by the writer thread, read after destroy */
};

static void count_committed(void *context, const struct ledger_line *lines, size_t n)
{
    (void)lines;
    ((struct acknowledged *)context)->n += (unsigned)n;
}

static struct outbox *start_outbox(struct ledger *ledger, struct acknowledged *acknowledged)
{
    struct outbox *outbox;
    struct outbox_setup setup = {
        .ledger = ledger, .run = 1, .committed = count_committed, .context = acknowledged};
    assert_int_equal(outbox_create(&setup, &outbox), STATUS_OK);
    return outbox;
}

static enum status push_remark(struct outbox *outbox, unsigned i)
{
    struct made made;
    make_remark(&made, i);
    return outbox_push(outbox, made.utc, "note", made.body);
}

static enum status push_level(struct outbox *outbox, unsigned i)
{
    char body[256];
    snprintf(
        body, sizeof body,
        "{\"bands\":[[1.00]],\"channel\":1,\"id\":\"1.1.level.%u\",\"peak_db\":[1.00],\"relative\":false,"
        "\"seconds\":[1.000000],\"spl_db\":[1.00],\"start_s\":[1.000000],\"stream\":1}",
        i);
    return outbox_push(outbox, "2026-03-01T12:00:00.000000Z", "level", body);
}

static void an_outbox_ends_with_everything_written(void **state)
{
    (void)state;
    const char *path = in_folder("end.ledger");
    struct ledger *ledger = open_or_fail(path, LEDGER_WRITE);
    struct acknowledged acknowledged = {0};
    struct outbox *outbox = start_outbox(ledger, &acknowledged);
    for (unsigned i = 1; i <= 2000; i++)
        assert_int_equal(push_remark(outbox, i), STATUS_OK);
    uint64_t lost = 1;
    assert_int_equal(outbox_destroy(outbox, 1.0, &lost), STATUS_OK);
    assert_int_equal(lost, 0);
    assert_int_equal(acknowledged.n, 2000);
    ledger_close(ledger);
    assert_int_equal(assert_verifies(path), 2000);
}

/* Block arrival to committed advice is budgeted 0.3 s; the disk's part, one entry at a time. */
static void one_entry_is_committed_at_once(void **state)
{
    (void)state;
    struct ledger *ledger = open_or_fail(in_folder("once.ledger"), LEDGER_WRITE);
    struct acknowledged acknowledged = {0};
    struct outbox *outbox = start_outbox(ledger, &acknowledged);
    double worst = 0;
    for (unsigned i = 1; i <= 200; i++) {
        struct timespec a, b;
        clock_gettime(CLOCK_MONOTONIC, &a);
        assert_int_equal(push_remark(outbox, i), STATUS_OK);
        assert_int_equal(outbox_wait(outbox, 5), STATUS_OK);
        clock_gettime(CLOCK_MONOTONIC, &b);
        double seconds = (double)(b.tv_sec - a.tv_sec) + (double)(b.tv_nsec - a.tv_nsec) * 1e-9;
        worst = seconds > worst ? seconds : worst;
    }
    printf("# figure from push to commit, worst of 200: %.1f ms\n", worst * 1e3);
    assert_true(worst < 1.0);
    assert_int_equal(outbox_destroy(outbox, 1.0, NULL), STATUS_OK);
    ledger_close(ledger);
}

static enum status take_sentence(void *context, int n, const char *const *columns)
{
    assert_int_equal(n, 1);
    snprintf(context, 256, "%s", columns[0]);
    return STATUS_OK;
}

static void a_refusing_disk_keeps_the_reserve(void **state)
{
    (void)state;
    const char *path = in_folder("flood.ledger");
    struct ledger *ledger = open_or_fail(path, LEDGER_WRITE);
    struct acknowledged acknowledged = {0};
    struct outbox *outbox = start_outbox(ledger, &acknowledged);
    struct outbox_view view;
    sync_failures = -1;
    unsigned levels = 0, remarks = 0;
    for (unsigned i = 1; i <= 5000; i++)
        levels += push_level(outbox, i) == STATUS_OK;
    assert_int_equal(levels, OUTBOX_CAPACITY - OUTBOX_RESERVE);
    for (unsigned i = 1; i <= OUTBOX_RESERVE + 55; i++)
        remarks += push_remark(outbox, i) == STATUS_OK;
    assert_int_equal(remarks, OUTBOX_RESERVE);
    usleep(700000);
    outbox_get_view(outbox, &view);
    assert_int_equal(view.state, OUTBOX_FAILING);
    assert_false(view.recording);
    assert_int_equal(view.n_refused, 55);
    assert_int_equal(view.n_refused_levels, 1000);
    assert_int_equal(view.n_waiting, OUTBOX_CAPACITY);
    assert_true(view.waiting_ns > 500000000);
    assert_non_null(strstr(view.problem, path));
    sync_failures = 0;
    assert_int_equal(outbox_wait(outbox, 30), STATUS_OK);
    outbox_get_view(outbox, &view);
    assert_int_equal(view.state, OUTBOX_OK);
    assert_true(view.recording);
    assert_string_equal(view.problem, "");
    uint64_t lost = 1;
    assert_int_equal(outbox_destroy(outbox, 5, &lost), STATUS_OK);
    assert_int_equal(lost, 0);
    char sentence[256] = "";
    assert_int_equal(ledger_select(ledger, "SELECT health FROM health", 0, NULL, take_sentence, sentence),
                     STATUS_OK);
    assert_non_null(strstr(sentence, " 55 entries, 1000 pieces of levels"));
    ledger_close(ledger);
    assert_int_equal(assert_verifies(path), OUTBOX_CAPACITY + 1);
}

/* Fills the disk while writing, then makes room: nothing is lost. */
static void fill_and_empty(const char *path, void (*make_room)(void))
{
    struct ledger *ledger = open_or_fail(path, LEDGER_WRITE);
    struct acknowledged acknowledged = {0};
    struct outbox *outbox = start_outbox(ledger, &acknowledged);
    struct outbox_view view = {0};
    unsigned i = 0;
    for (; i < OUTBOX_RESERVE && view.state != OUTBOX_FULL; i++) {
        assert_int_equal(push_remark(outbox, i + 1), STATUS_OK);
        if (i % 10 == 0)
            usleep(500); /* several transactions */
        outbox_get_view(outbox, &view);
    }
    assert_int_equal(view.state, OUTBOX_FULL);
    assert_true(view.recording);
    unsigned before = (unsigned)view.last_seq;
    for (unsigned more = 0; more < 500; more++, i++)
        assert_int_equal(push_remark(outbox, i + 1), STATUS_OK);
    usleep(600000);
    outbox_get_view(outbox, &view);
    assert_int_equal(view.state, OUTBOX_FULL);
    assert_true(view.n_waiting >= 500);
    make_room();
    assert_int_equal(outbox_wait(outbox, 20), STATUS_OK);
    assert_int_equal(outbox_destroy(outbox, 2, NULL), STATUS_OK);
    ledger_close(ledger);
    printf("# figure full after %u entries; %u were written in all, 0 lost\n", before, i);
    assert_int_equal(acknowledged.n, i);
    assert_int_equal(assert_verifies(path), i);
}

static void enlarge_disk(void)
{
    assert_int_equal(mount("tmpfs", disk, "tmpfs", MS_REMOUNT, "size=64m"), 0);
}

static void raise_limit(void)
{
    struct rlimit limit;
    getrlimit(RLIMIT_FSIZE, &limit);
    limit.rlim_cur = limit.rlim_max;
    setrlimit(RLIMIT_FSIZE, &limit);
}

static void a_full_disk_loses_nothing(void **state)
{
    (void)state;
    snprintf(disk, sizeof disk, "%s/disk", folder);
    assert_int_equal(mkdir(disk, 0755), 0);
    if (mount("tmpfs", disk, "tmpfs", 0, "size=1m") != 0) {
        disk[0] = '\0';
        printf("# no right to mount a small disk: only the size limit is tried\n");
        return;
    }
    fill_and_empty(in_folder("disk/full.ledger"), enlarge_disk);
    assert_int_equal(umount(disk), 0);
    disk[0] = '\0';
}

static void a_size_limit_loses_nothing(void **state)
{
    (void)state;
    struct rlimit limit;
    getrlimit(RLIMIT_FSIZE, &limit);
    limit.rlim_cur = 600 * 1024;
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &limit), 0);
    fill_and_empty(in_folder("limit.ledger"), raise_limit);
}

/* ---- kill -9 at random moments */

static void tell_parent(void *context, const struct ledger_line *lines, size_t n)
{
    int out = *(int *)context;
    int64_t last = lines[n - 1].seq;
    if (write(out, &last, sizeof last) != sizeof last)
        _exit(9);
}

/* The writer that is killed: entries as fast as the disk takes them, each batch told to the parent. */
static void write_until_killed(const char *path, int out, unsigned seed)
{
    struct ledger *ledger;
    struct outbox *outbox;
    char problem[LEDGER_PROBLEM_SIZE];
    struct ledger_tail tail;
    if (ledger_open(path, LEDGER_WRITE, &ledger, problem) != STATUS_OK ||
        ledger_get_tail(ledger, &tail) != STATUS_OK)
        _exit(2);
    struct outbox_setup setup = {
        .ledger = ledger, .run = 1, .committed = tell_parent, .context = &out, .wait_for_room = true};
    if (outbox_create(&setup, &outbox) != STATUS_OK)
        _exit(3);
    struct random random;
    random_reset(&random, seed);
    for (unsigned i = (unsigned)tail.seq + 1;; i++) {
        if (push_remark(outbox, i) != STATUS_OK)
            _exit(4);
        if (random_uniform(&random) < 0.05)
            usleep((unsigned)(3000 * random_uniform(&random)));
    }
}

/* Reads what was acknowledged until the writer has been dead; kills it after `life_us`. */
static int64_t kill_writer(pid_t child, int in, unsigned life_us)
{
    int64_t acknowledged = 0, seq;
    struct timespec start, now;
    bool killed = false;
    clock_gettime(CLOCK_MONOTONIC, &start);
    for (;;) {
        clock_gettime(CLOCK_MONOTONIC, &now);
        int64_t age_us = (now.tv_sec - start.tv_sec) * 1000000 + (now.tv_nsec - start.tv_nsec) / 1000;
        if (!killed && age_us >= life_us) {
            kill(child, SIGKILL);
            killed = true;
        }
        struct pollfd poll_in = {.fd = in, .events = POLLIN};
        if (poll(&poll_in, 1, killed ? 1000 : 1) <= 0)
            continue;
        ssize_t n = read(in, &seq, sizeof seq);
        if (n != sizeof seq)
            return acknowledged;
        acknowledged = seq;
    }
}

static void no_acknowledged_entry_is_lost_by_kills(void **state)
{
    (void)state;
    const char *path = in_folder("kill.ledger");
    int kills = test_length() == TEST_SHORT ? 10 : test_length() == TEST_CHECK ? 40 : 500;
    struct random random;
    random_reset(&random, 11);
    int64_t there = 0, unacknowledged = 0;
    for (int i = 0; i < kills; i++) {
        int ends[2];
        assert_int_equal(pipe2(ends, O_CLOEXEC), 0);
        pid_t child = fork();
        if (child == 0) {
            close(ends[0]);
            write_until_killed(path, ends[1], (unsigned)i);
        }
        close(ends[1]);
        int64_t acknowledged =
            kill_writer(child, ends[0], (unsigned)(10000 + 90000 * random_uniform(&random)));
        close(ends[0]);
        int result;
        assert_int_equal(waitpid(child, &result, 0), child);
        assert_true(WIFSIGNALED(result));
        if (access(path, F_OK) != 0)
            continue; /* killed before the file was there */
        struct ledger *ledger = open_or_fail(path, LEDGER_WRITE);
        struct ledger_tail tail;
        assert_int_equal(ledger_get_tail(ledger, &tail), STATUS_OK);
        ledger_close(ledger);
        assert_true(tail.seq >= acknowledged && tail.seq >= there);
        unacknowledged += acknowledged > 0 ? tail.seq - acknowledged : 0;
        there = tail.seq;
        if (i % 10 == 9)
            assert_int_equal(assert_verifies(path), there);
    }
    printf("# figure %d kills, %lld entries, 0 acknowledged lost, %lld written but not yet acknowledged\n",
           kills, (long long)there, (long long)unacknowledged);
    assert_true(there > kills);
    assert_int_equal(assert_verifies(path), there);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(entries_go_on_over_runs),
        cmocka_unit_test(a_repeated_write_is_harmless),
        cmocka_unit_test(a_failed_sync_neither_loses_nor_doubles),
        cmocka_unit_test(one_writes_at_a_time),
        cmocka_unit_test(other_files_are_refused),
        cmocka_unit_test(a_damaged_file_is_said),
        cmocka_unit_test(files_that_may_only_be_read),
        cmocka_unit_test(an_outbox_ends_with_everything_written),
        cmocka_unit_test(one_entry_is_committed_at_once),
        cmocka_unit_test(a_refusing_disk_keeps_the_reserve),
        cmocka_unit_test(a_full_disk_loses_nothing),
        cmocka_unit_test(a_size_limit_loses_nothing),
        cmocka_unit_test(no_acknowledged_entry_is_lost_by_kills),
    };
    return cmocka_run_group_tests(tests, set_up, tear_down);
}
