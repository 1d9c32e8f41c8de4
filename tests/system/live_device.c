/* The live path on a sound device without hardware: the real input, the real capture program, PortAudio and
 * ALSA; only the device is a plugin (tests/support/pcm_feed.c), whose sound is its own frame number. What the
 * input says of lost frames is held against those numbers. The limits (seen in 2 s, listening again within 5
 * s, lost frames exact within a process and to one buffer across an absence) are the project's own. */
#include "support/live.h"
#include "support/test.h"

#include <math.h>
#include <signal.h>
#include <stdlib.h>
#include <sys/wait.h>
#include <unistd.h>

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
        live_check_gap(&l, i, 0, "overrun");
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
    live_check_gap(&l, 0, 0, "overrun by the hardware");
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
    live_wait_s(4);
    live_listen(&l, live_now_s() + 1, LIVE_TIME);
    assert_int_equal(l.wrong + l.n_inside, 0);
    assert_int_equal(l.n_gaps, 1);
    assert_true(l.gaps[0].really_lost > 48000);
    live_check_gap(&l, 0, 0, "reader away for 4 s");
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

int main(int argc, char **argv)
{
    if (argc > 1) /* one test by its name */
        cmocka_set_test_filter(argv[1]);
    setvbuf(stdout, NULL, _IOLBF, 0);
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_exact_48k),           cmocka_unit_test(test_exact_192k),
        cmocka_unit_test(test_exact_384k),          cmocka_unit_test(test_overruns_exact),
        cmocka_unit_test(test_small_overrun_exact), cmocka_unit_test(test_slow_reader_exact),
        cmocka_unit_test(test_short_stall_exact),   cmocka_unit_test(test_refused),
        cmocka_unit_test(test_command_line),        cmocka_unit_test(test_names),
    };
    return cmocka_run_group_tests_name("live device", tests, NULL, NULL);
}
