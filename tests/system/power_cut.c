/* Simulated power cuts: everything that a writer of a ledger asks of the file system is recorded, then cut at
 * random moments. What was synced is there; of the rest nothing, all, a random part, or a part torn at 512
 * bytes. In every case the ledger must open, verify, and hold every entry that was acknowledged before the
 * cut. */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "ledger/ledger.h"
#include "ledger/verify.h"
#include <fcntl.h>
#include <stdbool.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <sys/syscall.h>
#include <unistd.h>

#define MAX_STEPS 60000
#define SECTOR 512
#define MAX_FILE (16U << 20)

/* ---- the record: made by definitions that come before the C library's, for SQLite too */

enum step_kind { STEP_WRITE, STEP_TRUNCATE, STEP_SYNC, STEP_REMOVE, STEP_ACKNOWLEDGED };

struct step {
    enum step_kind kind;
    int file; /* 0: the ledger, 1: its -wal */
    int64_t offset, length;
    unsigned char *data;
};

static char folder[512];
static bool recording;
static struct step steps[MAX_STEPS];
static size_t n_steps;

static int file_of(const char *path)
{
    size_t length = strlen(path);
    if (length > 7 && strcmp(path + length - 7, ".ledger") == 0)
        return 0;
    return length > 4 && strcmp(path + length - 4, "-wal") == 0 ? 1 : -1;
}

static int file_of_descriptor(int fd)
{
    char name[64], path[1024];
    snprintf(name, sizeof name, "/proc/self/fd/%d", fd);
    ssize_t n = readlink(name, path, sizeof path - 1);
    path[n > 0 ? n : 0] = '\0';
    return file_of(path);
}

static void add_step(enum step_kind kind, int file, int64_t offset, const void *data, size_t length)
{
    if (!recording || file < 0)
        return;
    if (n_steps == MAX_STEPS)
        fail_msg("more than %d steps", MAX_STEPS);
    struct step *step = &steps[n_steps++];
    *step = (struct step){.kind = kind, .file = file, .offset = offset, .length = (int64_t)length};
    if (data) {
        step->data = malloc(length);
        assert_non_null(step->data);
        memcpy(step->data, data, length);
    }
}

ssize_t pwrite64(int fd, const void *data, size_t length, off64_t offset)
{
    if (recording)
        add_step(STEP_WRITE, file_of_descriptor(fd), offset, data, length);
    return syscall(SYS_pwrite64, fd, data, length, offset);
}

int ftruncate64(int fd, off64_t length)
{
    if (recording)
        add_step(STEP_TRUNCATE, file_of_descriptor(fd), 0, NULL, (size_t)length);
    return (int)syscall(SYS_ftruncate, fd, length);
}

int fdatasync(int fd)
{
    if (recording)
        add_step(STEP_SYNC, file_of_descriptor(fd), 0, NULL, 0);
    return 0; /* the cut is simulated: the real disk need not be waited for */
}

int unlink(const char *path)
{
    if (recording)
        add_step(STEP_REMOVE, file_of(path), 0, NULL, 0);
    return (int)syscall(SYS_unlink, path);
}

/* Appends of 1 to 5 entries over two lives of the writer, enough for several checkpoints. */
static void record_writer(void)
{
    struct random random;
    random_reset(&random, 3);
    char path[600], problem[LEDGER_PROBLEM_SIZE];
    snprintf(path, sizeof path, "%s/traced.ledger", folder);
    recording = true;
    unsigned counter = 0;
    for (int life = 0; life < 2; life++) {
        struct ledger *ledger;
        assert_int_equal(ledger_open(path, LEDGER_WRITE, &ledger, problem), STATUS_OK);
        for (int batch = 0; batch < 300; batch++) {
            static char bodies[5][2400];
            struct ledger_line lines[5];
            size_t n = 1 + random_bits(&random) % 5;
            for (size_t i = 0; i < n; i++) {
                snprintf(bodies[i], sizeof bodies[i],
                         "{\"health\":\"%0*d\",\"id\":\"1.0.health.%u\",\"ok\":true,\"stream\":0}",
                         (int)(random_bits(&random) % (batch % 20 == 0 ? 2000 : 200)), 7, ++counter);
                lines[i] = (struct ledger_line){
                    .utc = "2026-03-01T12:00:00.000000Z", .kind = "health", .body = bodies[i]};
            }
            assert_int_equal(ledger_append(ledger, lines, n, problem), STATUS_OK);
            add_step(STEP_ACKNOWLEDGED, 0, lines[n - 1].seq, NULL, 0);
        }
        ledger_close(ledger);
    }
    recording = false;
}

/* ---- the cut */

struct image {
    bool exists;
    int64_t size;
    unsigned char *data; /* [MAX_FILE] */
};

static void apply(struct image *image, const struct step *step, int64_t from, int64_t to)
{
    if (step->kind == STEP_REMOVE) {
        image->exists = false;
        image->size = 0;
        return;
    }
    image->exists = true;
    if (step->kind == STEP_TRUNCATE) {
        if (step->length > image->size)
            memset(image->data + image->size, 0, (size_t)(step->length - image->size));
        image->size = step->length;
        return;
    }
    int64_t start = step->offset + from, end = step->offset + to;
    assert_true(end <= MAX_FILE);
    if (start > image->size)
        memset(image->data + image->size, 0, (size_t)(start - image->size));
    memcpy(image->data + start, step->data + from, (size_t)(to - from));
    if (end > image->size)
        image->size = end;
}

enum cut_mode { CUT_NONE, CUT_ALL, CUT_SOME, CUT_TORN, CUT_MODES };

/* A write that had not been synced: there, not there, or there in part. Removals and sizes follow the writes.
 */
static void apply_unsynced(struct image *image, const struct step *step, enum cut_mode mode,
                           struct random *random)
{
    bool keep = mode == CUT_ALL || (mode != CUT_NONE && random_bits(random) % 2 == 0);
    if (step->kind != STEP_WRITE || mode != CUT_TORN) {
        if (keep)
            apply(image, step, 0, step->length);
        return;
    }
    for (int64_t at = 0; at < step->length; at += SECTOR)
        if (random_bits(random) % 2 == 0)
            apply(image, step, at, at + SECTOR < step->length ? at + SECTOR : step->length);
}

/* The files after a cut behind `n` steps; gives the last acknowledged seq. With `syncs` false no sync has had
 * effect. */
static int64_t cut(size_t n, enum cut_mode mode, bool syncs, struct random *random, struct image images[2])
{
    size_t synced[2] = {0, 0}; /* steps of the file up to here are on the disk */
    int64_t acknowledged = 0;
    for (size_t i = 0; i < n; i++) {
        if (steps[i].kind == STEP_SYNC && syncs)
            synced[steps[i].file] = i;
        if (steps[i].kind == STEP_ACKNOWLEDGED)
            acknowledged = steps[i].offset;
    }
    for (int f = 0; f < 2; f++) {
        images[f].exists = false;
        images[f].size = 0;
        for (size_t i = 0; i < n; i++) {
            if (steps[i].file != f || steps[i].kind == STEP_SYNC || steps[i].kind == STEP_ACKNOWLEDGED)
                continue;
            /* Names are kept by the directory, which the file system writes in its own order: taken as done.
             */
            if (i < synced[f] || steps[i].kind == STEP_REMOVE)
                apply(&images[f], &steps[i], 0, steps[i].length);
            else
                apply_unsynced(&images[f], &steps[i], mode, random);
        }
    }
    return acknowledged;
}

static void write_image(const char *name, const struct image *image)
{
    char path[700];
    snprintf(path, sizeof path, "%s/%s", folder, name);
    unlink(path);
    if (!image->exists)
        return;
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    assert_int_equal(fwrite(image->data, 1, (size_t)image->size, file), (size_t)image->size);
    fclose(file);
}

enum result { RESULT_GOOD, RESULT_LOST, RESULT_DAMAGED };

/* Opens what the cut has left as the next run would, and reads it as an auditor would. */
static enum result look(const struct image images[2], int64_t acknowledged)
{
    char path[700], problem[LEDGER_PROBLEM_SIZE];
    struct ledger *ledger;
    struct verify_facts facts;
    snprintf(path, sizeof path, "%s/cut.ledger-shm", folder);
    unlink(path);
    write_image("cut.ledger", &images[0]);
    write_image("cut.ledger-wal", &images[1]);
    snprintf(path, sizeof path, "%s/cut.ledger", folder);
    if (ledger_open(path, LEDGER_WRITE, &ledger, problem) != STATUS_OK)
        return RESULT_DAMAGED;
    enum status status = ledger_verify(ledger, NULL, NULL, &facts);
    ledger_close(ledger);
    if (status != STATUS_OK)
        return RESULT_DAMAGED;
    return facts.n_entries >= acknowledged ? RESULT_GOOD : RESULT_LOST;
}

static void make_images(struct image images[2])
{
    for (int f = 0; f < 2; f++) {
        images[f] = (struct image){.data = malloc(MAX_FILE)};
        assert_non_null(images[f].data);
    }
}

static void try_cuts(int n, bool syncs, unsigned counts[3])
{
    struct image images[2];
    struct random random;
    random_reset(&random, 17);
    make_images(images);
    for (int i = 0; i < n; i++) {
        size_t at = (size_t)(random_uniform(&random) * (double)n_steps);
        int64_t acknowledged = cut(at, (enum cut_mode)(i % CUT_MODES), syncs, &random, images);
        enum result result = look(images, acknowledged);
        if (syncs && result != RESULT_GOOD)
            print_error("seed 17, cut %d behind step %zu of %zu: %s\n", i, at, n_steps,
                        result == RESULT_LOST ? "acknowledged entries lost" : "damaged");
        counts[result]++;
        if (syncs && result != RESULT_GOOD)
            break;
    }
    free(images[0].data);
    free(images[1].data);
}

static void no_acknowledged_entry_is_lost_by_power_cuts(void **state)
{
    (void)state;
    int n = test_length() == TEST_SHORT ? 60 : test_length() == TEST_CHECK ? 400 : 10000;
    unsigned counts[3] = {0};
    try_cuts(n, true, counts);
    printf("# figure %d power cuts in %zu steps: %u acknowledged lost, %u damaged\n", n, n_steps,
           counts[RESULT_LOST], counts[RESULT_DAMAGED]);
    assert_int_equal(counts[RESULT_GOOD], n);
}

/* The same on a disk that forgets its syncs: then this test must see losses, or it could see none above
 * either. */
static void a_disk_that_forgets_syncs_is_seen(void **state)
{
    (void)state;
    unsigned counts[3] = {0};
    try_cuts(80, false, counts);
    printf("# figure 80 power cuts on a disk that forgets syncs: %u lost, %u damaged\n", counts[RESULT_LOST],
           counts[RESULT_DAMAGED]);
    assert_true(counts[RESULT_LOST] + counts[RESULT_DAMAGED] > 20);
}

static int set_up(void **state)
{
    (void)state;
    snprintf(folder, sizeof folder, "%s/power-XXXXXX", test_build());
    if (!mkdtemp(folder))
        return -1;
    record_writer();
    return 0;
}

static int tear_down(void **state)
{
    (void)state;
    char command[600];
    for (size_t i = 0; i < n_steps; i++)
        free(steps[i].data);
    snprintf(command, sizeof command, "rm -rf '%s'", folder);
    return system(command);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(no_acknowledged_entry_is_lost_by_power_cuts),
        cmocka_unit_test(a_disk_that_forgets_syncs_is_seen),
    };
    return cmocka_run_group_tests(tests, set_up, tear_down);
}
