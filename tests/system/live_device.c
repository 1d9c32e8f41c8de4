/* The live path on a sound device without hardware: the real input, the real capture program, PortAudio and
 * ALSA; only the device is a plugin (tests/support/pcm_feed.c), whose sound is its own frame number. What the
 * input says of lost frames is held against those numbers. The limits (seen in 2 s, listening again within 5
 * s, lost frames exact within a process and to one buffer across an absence) are the project's own. */
#include "support/live.h"
#include "support/test.h"

#include <math.h>
#include <signal.h>
#include <stdlib.h>
#include <sys/mman.h>
#include <sys/resource.h>
#include <sys/wait.h>
#include <unistd.h>

#define SEEN_S 2.0
#define AGAIN_S 5.0
#define READ_S 0.4 /* a read waits at most 0.25 s, and on a machine under load it wakes late */

static void wait_s(double seconds)
{
    struct timespec t = {(time_t)seconds, (long)((seconds - floor(seconds)) * 1e9)};
    nanosleep(&t, NULL);
}

/* One gap of the listener against the truth. */
static void check_gap(const struct live_listener *l, uint32_t i, double tolerance_frames, const char *what)
{
    assert_true(l->n_gaps > i);
    double error = (double)l->gaps[i].declared - (double)l->gaps[i].really_lost;
    printf("# figure %s: %llu frames lost, declared %+.0f\n", what,
           (unsigned long long)l->gaps[i].really_lost, error);
    if (fabs(error) > tolerance_frames)
        fail_msg("%s: declared %llu, lost %llu", what, (unsigned long long)l->gaps[i].declared,
                 (unsigned long long)l->gaps[i].really_lost);
}

/* CPU time of a process so far. */
static double cpu_of(pid_t pid)
{
    char path[64], line[512];
    unsigned long user = 0, system = 0;
    snprintf(path, sizeof path, "/proc/%d/stat", (int)pid);
    FILE *file = fopen(path, "r");
    assert_non_null(file);
    assert_non_null(fgets(line, sizeof line, file));
    fclose(file);
    assert_int_equal(sscanf(strrchr(line, ')') + 1, " %*c %*d %*d %*d %*d %*d %*u %*u %*u %*u %*u %lu %lu",
                            &user, &system),
                     2);
    return (double)(user + system) / (double)sysconf(_SC_CLK_TCK);
}

static void hear_exact(double rate_hz, uint32_t n_channels)
{
    struct live_listener l;
    struct stream_settings settings = live_settings(rate_hz, n_channels);
    live_begin(rate_hz, n_channels, "");
    live_open(&l, &settings);
    double start_s = live_now_s();
    live_listen(&l, start_s + 2.5, LIVE_TIME);
    printf("# figure %.0f Hz, %u channels: %llu frames in 2.5 s, %llu wrong, %u breaks, capture took %.2f s "
           "of CPU\n",
           rate_hz, n_channels, (unsigned long long)l.heard, (unsigned long long)l.wrong, l.n_gaps,
           cpu_of(live_capture_pid()));
    assert_int_equal(l.wrong, 0);
    assert_int_equal(l.n_gaps + l.n_inside, 0);
    assert_int_equal(l.declared, 0);
    assert_near((double)l.heard / rate_hz, 2.5, 0.2);
    double close_s = live_close(&l);
    assert_true(close_s < 0.2);
    assert_int_equal(live_capture_pid(), 0);
    live_end();
}

static void test_exact_48k(void **state)
{
    (void)state;
    hear_exact(48000, 2);
}

static void test_exact_192k(void **state)
{
    (void)state;
    hear_exact(192000, 8);
}

/* The most that Debian's PortAudio takes. */
static void test_exact_384k(void **state)
{
    (void)state;
    hear_exact(384000, 16);
}

/* The driver loses frames because nobody fetched them: the capture program stands still for longer than the
 * device can hold. It is the real overrun of ALSA. */
static void overruns(double rate_hz, uint32_t n_channels, const char *keys)
{
    struct live_listener l;
    struct stream_settings settings = live_settings(rate_hz, n_channels);
    settings.latency_s = 0.2;
    live_begin(rate_hz, n_channels, keys);
    live_open(&l, &settings);
    live_listen(&l, live_now_s() + 2, LIVE_TIME);
    uint32_t expected = l.n_gaps; /* a loaded machine may lose frames by itself: these count as well */
    const int times = test_length() == TEST_LONG ? 20 : 3;
    for (int i = 0; i < times; i++) {
        pid_t pid = live_capture_pid();
        assert_true(pid > 0);
        kill(pid, SIGSTOP);
        live_listen(&l, live_now_s() + 0.4 + 0.1 * (i % 5), LIVE_TIME);
        kill(pid, SIGCONT);
        live_listen(&l, live_now_s() + 1.2, LIVE_TIME);
        expected++;
        assert_int_equal(live_capture_pid(), pid);
    }
    assert_true(l.n_gaps >= expected);
    assert_int_equal(l.wrong + l.n_inside, 0);
    for (uint32_t i = 0; i < l.n_gaps; i++)
        check_gap(&l, i, 0, "overrun");
    live_close(&l);
    live_end();
}

static void test_overruns_exact(void **state)
{
    (void)state;
    overruns(48000, 2, "ppm -60");
    if (test_length() != TEST_SHORT)
        overruns(192000, 2, "ppm 40");
}

/* The hardware itself says that it lost something: little, and flagged. */
static void test_small_overrun_exact(void **state)
{
    (void)state;
    struct live_listener l;
    struct stream_settings settings = live_settings(96000, 4);
    live_begin(96000, 4, "ppm 20 overrun_at 2.5");
    live_open(&l, &settings);
    live_listen(&l, 3.5, LIVE_TIME);
    assert_int_equal(l.wrong + l.n_inside, 0);
    assert_int_equal(l.n_gaps, 1);
    assert_true(l.gaps[0].really_lost > 0 && l.gaps[0].really_lost < 9600);
    check_gap(&l, 0, 0, "overrun by the hardware");
    live_close(&l);
    live_end();
}

/* The reader is away for longer than the ring holds: the ring counts what it could not take. */
static void test_slow_reader_exact(void **state)
{
    (void)state;
    struct live_listener l;
    struct stream_settings settings = live_settings(48000, 2);
    live_begin(48000, 2, "");
    live_open(&l, &settings);
    live_listen(&l, live_now_s() + 1, LIVE_TIME);
    wait_s(4);
    live_listen(&l, live_now_s() + 1, LIVE_TIME);
    assert_int_equal(l.wrong + l.n_inside, 0);
    assert_int_equal(l.n_gaps, 1);
    assert_true(l.gaps[0].really_lost > 48000);
    check_gap(&l, 0, 0, "reader away for 4 s");
    live_close(&l);
    live_end();
}

/* A device that gives nothing for a second, says nothing of it, and goes on: how much is lost is exact, where
 * is known to the block in which it happened. */
static void test_short_stall_exact(void **state)
{
    (void)state;
    struct live_listener l;
    struct stream_settings settings = live_settings(48000, 2);
    live_begin(48000, 2, "ppm 30 stall_at 3 stall_until 4");
    live_open(&l, &settings);
    live_listen(&l, 5.5, LIVE_TIME);
    printf("# figure stall of 1 s, not told: %llu frames lost, %llu declared\n",
           (unsigned long long)l.really_lost, (unsigned long long)l.declared);
    assert_int_equal(l.wrong, 0);
    assert_near((double)l.really_lost, 48000, 2);
    assert_int_equal(l.declared, l.really_lost);
    live_close(&l);
    live_end();
}

/* The device goes at gone_s and comes back at back_s. */
static void away(const char *keys, double gone_s, double back_s, const char *what)
{
    struct live_listener l;
    struct stream_settings settings = live_settings(48000, 2);
    char health[160];
    live_begin(48000, 2, keys);
    live_open(&l, &settings);
    double start_s = live_now_s();
    live_listen(&l, gone_s, LIVE_TIME);
    assert_true(l.heard > 48000);
    live_listen(&l, gone_s + 2 * SEEN_S, LIVE_UNTIL_SILENT);
    double seen_s = l.silent_since_s - gone_s;
    assert_true(l.silent_since_s > 0);
    input_find("device")->get_health(l.input, health, sizeof health);
    live_listen(&l, back_s, LIVE_TIME);
    /* Time went on: what was declared reaches to the present. */
    assert_near((double)(l.heard + l.declared) / 48000, live_now_s() - start_s, 0.5);
    live_listen(&l, back_s + 2 * AGAIN_S, LIVE_UNTIL_SOUND);
    double again_s = l.heard_at_s - back_s;
    printf("# figure %s: seen after %.2f s, listening again %.2f s after its return, longest read %.3f s; "
           "\"%s\"\n",
           what, seen_s, again_s, l.longest_read_s, health);
    assert_true(seen_s <= SEEN_S);
    assert_true(again_s > 0 && again_s <= AGAIN_S);
    assert_true(l.longest_read_s < READ_S);
    live_listen(&l, live_now_s() + 0.5, LIVE_TIME);
    assert_int_equal(l.wrong, 0);
    check_gap(&l, 0, 600, what); /* one buffer: 12.5 ms, a 16th of the device's 0.2 s */
    live_close(&l);
    live_end();
}

static void test_stall(void **state)
{
    (void)state;
    away("stall_at 3 stall_until 7", 3, 7, "stall");
}

/* An unplugged device makes PortAudio flood its error output for ever: that must cost neither memory nor
 * time. */
static void test_unplug(void **state)
{
    (void)state;
    struct rusage before, after;
    getrusage(RUSAGE_SELF, &before);
    away("unplug_at 3 replug_at 7.3", 3, 7.3, "unplug and replug");
    getrusage(RUSAGE_SELF, &after);
    double cpu_s = (double)(after.ru_utime.tv_sec - before.ru_utime.tv_sec + after.ru_stime.tv_sec -
                            before.ru_stime.tv_sec) +
                   1e-6 * (double)(after.ru_utime.tv_usec - before.ru_utime.tv_usec + after.ru_stime.tv_usec -
                                   before.ru_stime.tv_usec);
    printf("# figure flood: %ld KiB more memory, %.2f s of CPU in all\n", after.ru_maxrss - before.ru_maxrss,
           cpu_s);
    assert_true(after.ru_maxrss - before.ru_maxrss < 32768);
    assert_true(cpu_s < 2);
}

/* Known, and dead from the start: opening works, time goes on, and sound comes when it comes. */
static void test_dead_at_start(void **state)
{
    (void)state;
    struct live_listener l;
    struct stream_settings settings = live_settings(48000, 2);
    char health[160];
    live_begin(48000, 2, "stall_at 0.001 stall_until 5");
    live_open(&l, &settings);
    double start_s = live_now_s();
    live_listen(&l, 4.5, LIVE_TIME);
    assert_int_equal(l.heard, 0);
    assert_near((double)l.declared / 48000, live_now_s() - start_s, 0.5);
    input_find("device")->get_health(l.input, health, sizeof health);
    assert_non_null(strstr(health, "the device gives no sound"));
    live_listen(&l, 5 + 2 * AGAIN_S, LIVE_UNTIL_SOUND);
    printf("# figure dead at the start: listening %.2f s after it came\n", l.heard_at_s - 5);
    assert_true(l.heard > 0 && l.heard_at_s - 5 <= AGAIN_S);
    live_listen(&l, live_now_s() + 0.5, LIVE_TIME);
    assert_near((double)(l.heard + l.declared) / 48000, live_now_s() - start_s, 0.2);
    assert_int_equal(l.wrong + l.n_inside, 0);
    input_find("device")->get_health(l.input, health, sizeof health);
    assert_ptr_equal(strstr(health, "capturing"), health);
    live_close(&l);
    live_end();
}

static void test_stopped_capture(void **state)
{
    (void)state;
    struct live_listener l;
    struct stream_settings settings = live_settings(48000, 2);
    live_begin(48000, 2, "");
    live_open(&l, &settings);
    live_listen(&l, live_now_s() + 1, LIVE_TIME);
    pid_t pid = live_capture_pid();
    assert_true(pid > 0);
    double stopped_s = live_now_s();
    kill(pid, SIGSTOP);
    live_listen(&l, stopped_s + 2 * SEEN_S, LIVE_UNTIL_SILENT);
    double seen_s = l.silent_since_s - stopped_s;
    live_listen(&l, stopped_s + 2 * AGAIN_S, LIVE_UNTIL_SOUND);
    double again_s = l.heard_at_s - stopped_s;
    printf("# figure capture stopped: seen after %.2f s, listening again after %.2f s\n", seen_s, again_s);
    assert_true(seen_s > 0 && seen_s <= SEEN_S && again_s <= AGAIN_S);
    assert_true(live_capture_pid() > 0 && live_capture_pid() != pid);
    assert_int_equal(kill(pid, 0), -1);
    check_gap(&l, 0, 600, "capture stopped and replaced");
    /* Closing does not wait for a process that stands still. */
    kill(live_capture_pid(), SIGSTOP);
    double close_s = live_close(&l);
    printf("# figure closing with a stopped capture: %.3f s\n", close_s);
    assert_true(close_s < 0.2);
    assert_int_equal(live_capture_pid(), 0);
    live_end();
}

/* The capture program's memory, written over by somebody. */
static void test_garbage_ring(void **state)
{
    (void)state;
    struct live_listener l;
    struct stream_settings settings = live_settings(48000, 2);
    char path[64];
    live_begin(48000, 2, "");
    live_open(&l, &settings);
    live_listen(&l, live_now_s() + 1, LIVE_TIME);
    pid_t pid = live_capture_pid();
    snprintf(path, sizeof path, "/proc/%d/fd/3", (int)pid);
    FILE *memory = fopen(path, "r+");
    assert_non_null(memory);
    unsigned char *bytes = mmap(NULL, 4096, PROT_READ | PROT_WRITE, MAP_SHARED, fileno(memory), 0);
    assert_true(bytes != MAP_FAILED);
    double broken_s = live_now_s();
    memset(bytes, 0xee, 4096);
    live_listen(&l, broken_s + 2 * SEEN_S, LIVE_UNTIL_SILENT);
    double seen_s = l.silent_since_s - broken_s;
    live_listen(&l, broken_s + AGAIN_S, LIVE_UNTIL_SOUND);
    printf("# figure impossible index: seen after %.2f s, listening again after %.2f s\n", seen_s,
           l.heard_at_s - broken_s);
    assert_true(seen_s > 0 && seen_s <= SEEN_S);
    assert_true(live_capture_pid() > 0 && live_capture_pid() != pid);
    live_listen(&l, live_now_s() + 0.5, LIVE_TIME);
    assert_int_equal(l.wrong, 0);
    munmap(bytes, 4096);
    fclose(memory);
    live_close(&l);
    live_end();
}

static void refused(struct stream_settings settings, enum status wanted, const char *word)
{
    struct problems problems = {.count = 0};
    struct input_facts facts;
    void *input = &facts;
    enum status status = input_find("device")->open(&settings, &problems, &input, &facts);
    assert_int_equal(status, wanted);
    assert_true(problems.count > 0);
    if (!strstr(problems.lines.data, word))
        fail_msg("\"%s\" is not in: %s", word, problems.lines.data);
    assert_ptr_equal(input, &facts);
    printf("# figure refused: %.*s\n", (int)strcspn(problems.lines.data, "\n"), problems.lines.data);
    problems_destroy(&problems);
    assert_int_equal(live_capture_pid(), 0);
}

static void test_refused(void **state)
{
    (void)state;
    live_begin(48000, 2, "");
    struct stream_settings settings = live_settings(48000, 2);
    snprintf(settings.device, sizeof settings.device, "hydrophones");
    refused(settings, STATUS_NOT_FOUND, "0 (2 channels, 48000 Hz) \"feed\"");
    snprintf(settings.device, sizeof settings.device, "17");
    refused(settings, STATUS_NOT_FOUND, "\"feed\"");
    refused(live_settings(96000, 2), STATUS_NOT_FOUND, "96000");
    refused(live_settings(48000, 3), STATUS_NOT_FOUND, "3");
    refused(live_settings(500000, 2), STATUS_OUT_OF_RANGE, "384000");
    settings = live_settings(48000, 2);
    settings.latency_s = 0.05;
    refused(settings, STATUS_OUT_OF_RANGE, "latency_s");
    live_hide_capture();
    refused(live_settings(48000, 2), STATUS_SYSTEM, "cannot be started: No such file");
    live_end();
}

/* Runs the capture program with these words; its exit code, and what it wrote where. */
static int run_program(const char *words, const char *stream, char *out, size_t size)
{
    char command[1024];
    snprintf(command, sizeof command, "%s/hushwatch-capture %s %s", test_build(), words, stream);
    FILE *pipe_end = popen(command, "r");
    assert_non_null(pipe_end);
    size_t n = fread(out, 1, size - 1, pipe_end);
    out[n] = '\0';
    int how = pclose(pipe_end);
    assert_true(WIFEXITED(how));
    return WEXITSTATUS(how);
}

static void test_command_line(void **state)
{
    (void)state;
    const struct {
        const char *words, *complaint;
    } wrong[] = {
        {"", "--list, or --memory"},
        {"--memory 0 --device feed --rate 5 --channels 2", "--rate 5: allowed are 1000 to 384000"},
        {"--memory 0 --device feed --rate 48000 --channels 17", "--channels 17: allowed are 1 to 16"},
        {"--memory 0 --device feed --rate 48000 --channels 2 --latency 0.1", "allowed are 0.2 to 5"},
        {"--memory 0 --device feed --rate 48000 --channels 2 more", "see --help"},
        {"--memory 0 --device feed --rate 48000 --channels 2 </dev/null", "no memory that can be shared"},
        {"--unknown", "unrecognized option"}};
    char said[4096];
    live_begin(48000, 2, "");
    assert_int_equal(run_program("--help", "2>/dev/null", said, sizeof said), 0);
    assert_non_null(strstr(said, "--list"));
    assert_int_equal(run_program("--list", "2>/dev/null", said, sizeof said), 0);
    assert_non_null(strstr(said, "     0         2       48000  feed\n"));
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
        assert_int_equal(run_program(wrong[i].words, "2>&1", said, sizeof said), 2);
        if (!strstr(said, wrong[i].complaint))
            fail_msg("%s: %s", wrong[i].words, said);
    }
    live_end();
}

/* By number, and by a part of the name. */
static void test_names(void **state)
{
    (void)state;
    const char *names[] = {"0", "fee"};
    live_begin(48000, 2, "");
    for (int i = 0; i < 2; i++) {
        struct live_listener l;
        struct stream_settings settings = live_settings(48000, 2);
        snprintf(settings.device, sizeof settings.device, "%s", names[i]);
        live_open(&l, &settings);
        live_listen(&l, live_now_s() + 0.3, LIVE_TIME);
        assert_true(l.heard > 0 && l.wrong == 0);
        live_close(&l);
    }
    live_end();
}

/* Whoever started the capture program dies without a word: it ends too. */
static void test_ends_with_its_parent(void **state)
{
    (void)state;
    int pipe_ends[2];
    live_begin(48000, 2, "");
    assert_int_equal(pipe(pipe_ends), 0);
    pid_t parent = fork();
    if (parent == 0) {
        struct live_listener l;
        struct stream_settings settings = live_settings(48000, 2);
        live_open(&l, &settings);
        pid_t pid = live_capture_pid();
        if (write(pipe_ends[1], &pid, sizeof pid) != (ssize_t)sizeof pid)
            _exit(1);
        wait_s(60);
        _exit(0);
    }
    pid_t capture = 0;
    assert_int_equal(read(pipe_ends[0], &capture, sizeof capture), sizeof capture);
    assert_true(capture > 0 && kill(capture, 0) == 0);
    kill(parent, SIGKILL);
    waitpid(parent, NULL, 0);
    char path[64], state_letter = 0;
    snprintf(path, sizeof path, "/proc/%d/stat", (int)capture);
    for (int i = 0; i < 100; i++) { /* gone, or a zombie that its new parent has not fetched */
        FILE *file = fopen(path, "r");
        state_letter = 0;
        if (!file || fscanf(file, "%*d (%*[^)]) %c", &state_letter) != 1)
            state_letter = 0;
        if (file)
            fclose(file);
        if (state_letter == 0 || state_letter == 'Z')
            break;
        wait_s(0.01);
    }
    assert_true(state_letter == 0 || state_letter == 'Z');
    close(pipe_ends[0]);
    close(pipe_ends[1]);
    live_end();
}

int main(int argc, char **argv)
{
    if (argc > 1) /* one test by its name */
        cmocka_set_test_filter(argv[1]);
    setvbuf(stdout, NULL, _IOLBF, 0);
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_exact_48k),
        cmocka_unit_test(test_exact_192k),
        cmocka_unit_test(test_exact_384k),
        cmocka_unit_test(test_overruns_exact),
        cmocka_unit_test(test_small_overrun_exact),
        cmocka_unit_test(test_slow_reader_exact),
        cmocka_unit_test(test_short_stall_exact),
        cmocka_unit_test(test_stall),
        cmocka_unit_test(test_unplug),
        cmocka_unit_test(test_dead_at_start),
        cmocka_unit_test(test_stopped_capture),
        cmocka_unit_test(test_garbage_ring),
        cmocka_unit_test(test_refused),
        cmocka_unit_test(test_command_line),
        cmocka_unit_test(test_names),
        cmocka_unit_test(test_ends_with_its_parent),
    };
    return cmocka_run_group_tests_name("live device", tests, NULL, NULL);
}
