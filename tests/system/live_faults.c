/* The live path when the device, or the program that hears it, is at fault: stalled, unplugged, stopped, gone
 * mad. The limits are the project's own: seen in 2 s, listening again within 5 s of its return, lost frames
 * declared to one buffer across an absence. */
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
    live_check_gap(&l, 0, 600, what); /* one buffer: 12.5 ms, a 16th of the device's 0.2 s */
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
    live_check_gap(&l, 0, 600, "capture stopped and replaced");
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
        live_wait_s(60);
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
        live_wait_s(0.01);
    }
    assert_true(state_letter == 0 || state_letter == 'Z');
    close(pipe_ends[0]);
    close(pipe_ends[1]);
    live_end();
}

int main(int argc, char **argv)
{
    setvbuf(stdout, NULL, _IOLBF, 0);
    if (argc > 1) /* one test by its name */
        cmocka_set_test_filter(argv[1]);
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_stall),         cmocka_unit_test(test_unplug),
        cmocka_unit_test(test_dead_at_start), cmocka_unit_test(test_stopped_capture),
        cmocka_unit_test(test_garbage_ring),  cmocka_unit_test(test_ends_with_its_parent),
    };
    return cmocka_run_group_tests_name("live faults", tests, NULL, NULL);
}
