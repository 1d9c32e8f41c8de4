#include "support/live.h"
#include "support/test.h"
#include <dirent.h>
#include <libgen.h>
#include <limits.h>
#include <math.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <unistd.h>

#define MAX_FRAMES 2048

static char folder[PATH_MAX];
static double epoch_s;

static double monotonic_s(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + (double)t.tv_nsec * 1e-9;
}

double live_now_s(void)
{
    return monotonic_s() - epoch_s;
}

static void path_of(const char *name, char out[PATH_MAX])
{
    assert_true(snprintf(out, PATH_MAX, "%s/%s", folder, name) < PATH_MAX);
}

/* The input starts the capture program that lies beside the running one. */
static void capture_beside_us(char out[PATH_MAX + 32])
{
    char self[PATH_MAX];
    ssize_t n = readlink("/proc/self/exe", self, sizeof self - 1);
    assert_true(n > 0);
    self[n] = '\0';
    snprintf(out, PATH_MAX + 32, "%s/hushwatch-capture", dirname(self));
}

void live_hide_capture(void)
{
    char link[PATH_MAX + 32];
    capture_beside_us(link);
    unlink(link);
}

static void put_capture_beside_us(void)
{
    char target[PATH_MAX], link[PATH_MAX + 32], built[PATH_MAX + 32];
    capture_beside_us(link);
    snprintf(built, sizeof built, "%s/hushwatch-capture", test_build());
    assert_non_null(realpath(built, target));
    unlink(link);
    assert_int_equal(symlink(target, link), 0);
}

static void write_epoch(void)
{
    char path[PATH_MAX];
    path_of("epoch", path);
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    epoch_s = monotonic_s();
    fprintf(file, "%lld\n", (long long)(epoch_s * 1e9));
    fclose(file);
}

void live_begin(double rate_hz, uint32_t n_channels, const char *more_keys)
{
    char path[PATH_MAX], plugin[PATH_MAX], built[PATH_MAX];
    snprintf(built, sizeof built, "%s/libasound_module_pcm_feed.so", test_build());
    assert_non_null(realpath(built, plugin));
    snprintf(folder, sizeof folder, "/tmp/hushwatch-live-XXXXXX");
    assert_non_null(mkdtemp(folder));
    path_of("asound.conf", path);
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    fprintf(file, "pcm_type.pcm_feed { lib \"%s\" }\n", plugin);
    fprintf(file,
            "pcm.feed { type pcm_feed rate %.0f channels %u epoch \"%s/epoch\" %s "
            "hint { show on description \"feed\" } }\n",
            rate_hz, n_channels, folder, more_keys);
    /* PortAudio 19.6.0 aborts when every device it knows of works; this one never does. */
    fprintf(file,
            "pcm.never { type pcm_feed epoch \"%s/epoch\" unplug_at 1e-9 "
            "hint { show on description \"never\" } }\n",
            folder);
    fclose(file);
    setenv("ALSA_CONFIG_PATH", path, 1);
    setenv("JACK_NO_START_SERVER", "1", 1);
    unsetenv("PULSE_SERVER");
    put_capture_beside_us();
    write_epoch();
}

void live_end(void)
{
    char path[PATH_MAX];
    path_of("asound.conf", path);
    unlink(path);
    path_of("epoch", path);
    unlink(path);
    rmdir(folder);
}

struct stream_settings live_settings(double rate_hz, uint32_t n_channels)
{
    struct stream_settings settings = {.name = "test", .input = "device", .device = "feed", .latency_s = 0.5};
    settings.rate_hz = rate_hz;
    settings.n_channels = n_channels;
    return settings;
}

void live_open(struct live_listener *listener, const struct stream_settings *settings)
{
    struct problems problems = {.count = 0};
    struct input_facts facts;
    memset(listener, 0, sizeof *listener);
    enum status status = input_find("device")->open(settings, &problems, &listener->input, &facts);
    if (status != STATUS_OK)
        fail_msg("open: %s: %s", status_text(status), problems.lines.data ? problems.lines.data : "");
    assert_int_equal(problems.count, 0);
    assert_true(facts.live && facts.rate_hz == settings->rate_hz && facts.n_channels == settings->n_channels);
    problems_destroy(&problems);
    listener->rate_hz = settings->rate_hz;
    listener->n_channels = settings->n_channels;
}

/* The frame's number out of its samples; -1 where a channel does not fit. */
static int64_t number_of(const float *frame, uint32_t n_channels)
{
    uint16_t words[FLOW_MAX_CHANNELS];
    for (uint32_t c = 0; c < n_channels; c++)
        words[c] = (uint16_t)(int16_t)lrintf(frame[c] * 32768.0f);
    for (uint32_t c = 2; c < n_channels; c++)
        if (words[c] != (uint16_t)(words[0] + c))
            return -1;
    return (int64_t)((uint32_t)words[1] << 16 | words[0]);
}

static void check_sound(struct live_listener *l, const float *samples, uint32_t n)
{
    for (uint32_t i = 0; i < n; i++) {
        int64_t number = number_of(samples + i * l->n_channels, l->n_channels);
        bool first = i == 0 || !l->has_next;
        if (number < 0) {
            l->wrong++;
            continue;
        }
        uint64_t jump = l->has_next ? (uint64_t)number - l->next : 0;
        l->really_lost += jump;
        l->n_inside += !first && jump != 0;
        if (first && l->has_next && (jump != 0 || l->since_heard != 0) && l->n_gaps < LIVE_MAX_GAPS)
            l->gaps[l->n_gaps++] = (struct live_gap){live_now_s(), l->since_heard, jump};
        if (first)
            l->since_heard = 0;
        l->next = (uint64_t)number + 1;
        l->has_next = true;
    }
}

void live_listen(struct live_listener *l, double until_s, enum live_until until)
{
    static float samples[MAX_FRAMES * FLOW_MAX_CHANNELS];
    while (live_now_s() < until_s) {
        struct input_piece piece = {0};
        double before_s = live_now_s();
        enum status status = input_find("device")->read(l->input, samples, MAX_FRAMES, &piece);
        l->longest_read_s = fmax(l->longest_read_s, live_now_s() - before_s);
        if (status == STATUS_TIMEOUT)
            continue;
        assert_int_equal(status, STATUS_OK);
        assert_true(piece.n_frames <= MAX_FRAMES && piece.n_frames + piece.lost_before > 0);
        l->declared += piece.lost_before;
        l->since_heard += piece.lost_before;
        if (piece.n_frames == 0) {
            if (l->silent_since_s == 0)
                l->silent_since_s = live_now_s();
            if (until == LIVE_UNTIL_SILENT)
                return;
            continue;
        }
        check_sound(l, samples, piece.n_frames);
        l->heard += piece.n_frames;
        l->heard_at_s = live_now_s();
        bool after_silence = l->silent_since_s > 0;
        l->silent_since_s = 0;
        if (after_silence && until == LIVE_UNTIL_SOUND)
            return;
    }
}

double live_close(struct live_listener *listener)
{
    double before_s = monotonic_s();
    input_find("device")->close(listener->input);
    listener->input = NULL;
    return monotonic_s() - before_s;
}

/* The parent of a process, and whether it is the capture program. */
static bool is_our_capture(pid_t pid)
{
    char path[64], line[512], *end;
    snprintf(path, sizeof path, "/proc/%d/stat", (int)pid);
    FILE *file = fopen(path, "r");
    if (!file)
        return false;
    size_t n = fread(line, 1, sizeof line - 1, file);
    fclose(file);
    line[n] = '\0';
    end = strrchr(line, ')');
    return end && strstr(line, "(hushwatch-captu") && end[2] != 'Z' && atoi(end + 4) == getpid();
}

pid_t live_capture_pid(void)
{
    pid_t found = 0;
    DIR *processes = opendir("/proc");
    assert_non_null(processes);
    for (struct dirent *entry; (entry = readdir(processes)) != NULL;) {
        int pid = atoi(entry->d_name);
        if (pid > 0 && is_our_capture(pid))
            found = pid;
    }
    closedir(processes);
    return found;
}

void live_wait_s(double seconds)
{
    struct timespec t = {(time_t)seconds, (long)((seconds - floor(seconds)) * 1e9)};
    nanosleep(&t, NULL);
}

void live_check_gap(const struct live_listener *l, uint32_t i, double tolerance_frames, const char *what)
{
    assert_true(l->n_gaps > i);
    double error = (double)l->gaps[i].declared - (double)l->gaps[i].really_lost;
    printf("# figure %s: %llu frames lost, declared %+.0f\n", what,
           (unsigned long long)l->gaps[i].really_lost, error);
    if (fabs(error) > tolerance_frames)
        fail_msg("%s: declared %llu, lost %llu", what, (unsigned long long)l->gaps[i].declared,
                 (unsigned long long)l->gaps[i].really_lost);
}
