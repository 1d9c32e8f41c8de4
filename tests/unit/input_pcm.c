/* daemon/input/pcm.c on a real named pipe. Expected values follow from the definition of each format: a
 * signed integer of b bits is its value over 2^(b-1). */
#include "support/test.h"

#include "base/random.h"
#include "input/input.h"
#include <fcntl.h>
#include <math.h>
#include <pthread.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <unistd.h>

static char path[256];

static int begin(void **state)
{
    (void)state;
    snprintf(path, sizeof path, "/tmp/hushwatch-pcm-%d", (int)getpid());
    return mkfifo(path, 0600);
}

static int end(void **state)
{
    (void)state;
    return unlink(path);
}

static struct stream_settings settings_for(const char *format, uint32_t n_channels)
{
    struct stream_settings settings = {.rate_hz = 500000, .n_channels = n_channels};
    snprintf(settings.format, sizeof settings.format, "%s", format);
    snprintf(settings.path, sizeof settings.path, "%s", path);
    return settings;
}

struct writer {
    const unsigned char *bytes;
    size_t n;
    uint64_t seed;
};

/* Writes in pieces of random size, so that frames are cut anywhere. */
static void *write_pieces(void *context)
{
    const struct writer *writer = context;
    struct random random;
    random_reset(&random, writer->seed);
    int file = open(path, O_WRONLY);
    for (size_t done = 0; file >= 0 && done < writer->n;) {
        size_t piece = 1 + random_bits(&random) % 97;
        if (piece > writer->n - done)
            piece = writer->n - done;
        ssize_t wrote = write(file, writer->bytes + done, piece);
        if (wrote < 0)
            break;
        done += (size_t)wrote;
    }
    close(file);
    return NULL;
}

/* Sends the bytes down the pipe and returns all the samples that came out. */
static size_t through_the_pipe(const char *format, uint32_t n_channels, const unsigned char *bytes, size_t n,
                               float *out)
{
    const struct input_kind *kind = input_find("pcm");
    struct stream_settings settings = settings_for(format, n_channels);
    struct problems problems = {0};
    struct input_facts facts;
    void *input = NULL;
    assert_int_equal(kind->open(&settings, &problems, &input, &facts), STATUS_OK);
    assert_true(facts.rate_hz == 500000 && facts.n_channels == n_channels && !facts.live);
    pthread_t thread;
    struct writer writer = {bytes, n, 7};
    pthread_create(&thread, NULL, write_pieces, &writer);
    size_t frames = 0;
    struct input_piece piece;
    enum status status;
    while ((status = kind->read(input, out + frames * n_channels, 64, &piece)) != STATUS_END) {
        if (status == STATUS_TIMEOUT)
            continue;
        assert_int_equal(status, STATUS_OK);
        assert_true(piece.n_frames > 0 && piece.n_frames <= 64 && piece.lost_before == 0);
        frames += piece.n_frames;
    }
    pthread_join(thread, NULL);
    kind->close(input);
    problems_destroy(&problems);
    return frames;
}

static void put(unsigned char *bytes, uint32_t value, unsigned n)
{
    for (unsigned i = 0; i < n; i++)
        bytes[i] = (unsigned char)(value >> (8 * i));
}

static void integers_are_exact(void **state)
{
    (void)state;
    enum { N = 3000 };
    static unsigned char bytes[N * 4];
    static float out[N];
    static const struct {
        const char *name;
        unsigned bits;
    } formats[] = {{"s16", 16}, {"s24", 24}, {"s32", 32}};
    for (int f = 0; f < 3; f++) {
        unsigned bits = formats[f].bits;
        int64_t full = INT64_C(1) << (bits - 1);
        static int64_t values[N];
        struct random random;
        random_reset(&random, bits);
        for (int i = 0; i < N; i++)
            values[i] = (int64_t)(random_bits(&random) % (uint64_t)(2 * full)) - full;
        values[0] = -full;
        values[1] = full - 1;
        values[2] = -1;
        for (int i = 0; i < N; i++)
            put(bytes + (size_t)i * bits / 8, (uint32_t)values[i], bits / 8);
        assert_int_equal(through_the_pipe(formats[f].name, 3, bytes, (size_t)N * bits / 8, out), N / 3);
        for (int i = 0; i < N; i++) /* s32 has more bits than a float; the nearest float is exact enough */
            assert_true(out[i] == (float)values[i] / (float)full);
    }
}

static void floats_pass_bit_for_bit(void **state)
{
    (void)state;
    const float values[8] = {0.5f, -1.0f, NAN, INFINITY, 1e-40f, 3.0f, -0.0f, 0.1f};
    float out[8];
    assert_int_equal(through_the_pipe("f32", 2, (const unsigned char *)values, sizeof values, out), 4);
    assert_memory_equal(out, values, sizeof values);
}

/* Half a frame at the end is no frame. */
static void a_cut_frame_at_the_end_is_dropped(void **state)
{
    (void)state;
    const unsigned char bytes[11] = {0, 0x40, 0, 0x20, 0, 0x10, 0, 0x08, 0, 0x04, 0};
    float out[8];
    assert_int_equal(through_the_pipe("s16", 2, bytes, sizeof bytes, out), 2);
    assert_true(out[0] == 0.5f && out[1] == 0.25f && out[2] == 0.125f && out[3] == 0.0625f);
}

/* Without a writer, and with one that says nothing: a quarter of a second, not for ever. */
static void a_silent_pipe_is_a_timeout(void **state)
{
    (void)state;
    const struct input_kind *kind = input_find("pcm");
    struct stream_settings settings = settings_for("s16", 1);
    struct problems problems = {0};
    struct input_facts facts;
    void *input = NULL;
    float sample[4];
    struct input_piece piece;
    assert_int_equal(kind->open(&settings, &problems, &input, &facts), STATUS_OK);
    for (int writer = 0; writer < 2; writer++) {
        int file = writer ? open(path, O_WRONLY) : -1;
        struct timespec before, after;
        clock_gettime(CLOCK_MONOTONIC, &before);
        assert_int_equal(kind->read(input, sample, 4, &piece), STATUS_TIMEOUT);
        clock_gettime(CLOCK_MONOTONIC, &after);
        double waited_s =
            (double)(after.tv_sec - before.tv_sec) + (double)(after.tv_nsec - before.tv_nsec) / 1e9;
        assert_true(waited_s > 0.2 && waited_s < 0.5);
        if (file >= 0) {
            assert_int_equal(write(file, "\0\100", 2), 2);
            close(file);
        }
    }
    assert_int_equal(kind->read(input, sample, 4, &piece), STATUS_OK);
    assert_true(piece.n_frames == 1 && sample[0] == 0.5f);
    assert_int_equal(kind->read(input, sample, 4, &piece), STATUS_END);
    kind->close(input);
    problems_destroy(&problems);
}

static void bad_settings_are_all_named(void **state)
{
    (void)state;
    struct stream_settings settings = {.format = "u8", .n_channels = 17};
    struct problems problems = {0};
    struct input_facts facts;
    void *input = NULL;
    assert_int_equal(input_find("pcm")->open(&settings, &problems, &input, &facts), STATUS_OUT_OF_RANGE);
    assert_int_equal(problems.count, 4);
    assert_non_null(strstr(problems.lines.data, "\"s16\", \"s24\", \"s32\", \"f32\""));
    settings = settings_for("s16", 1);
    snprintf(settings.path, sizeof settings.path, "/nowhere/pipe");
    assert_int_equal(input_find("pcm")->open(&settings, &problems, &input, &facts), STATUS_NOT_FOUND);
    snprintf(settings.path, sizeof settings.path, "/tmp");
    assert_int_equal(input_find("pcm")->open(&settings, &problems, &input, &facts), STATUS_BAD_FORMAT);
    assert_int_equal(problems.count, 6);
    assert_null(input);
    problems_destroy(&problems);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(integers_are_exact),
        cmocka_unit_test(floats_pass_bit_for_bit),
        cmocka_unit_test(a_cut_frame_at_the_end_is_dropped),
        cmocka_unit_test(a_silent_pipe_is_a_timeout),
        cmocka_unit_test(bad_settings_are_all_named),
    };
    return cmocka_run_group_tests_name("input_pcm", tests, begin, end);
}
