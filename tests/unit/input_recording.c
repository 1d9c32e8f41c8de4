/* daemon/input/recording.c: files written with libsndfile itself, and cut or spoilt by hand. */
#include "support/test.h"

#include "base/time.h"
#include "input/input.h"
#include <fcntl.h>
#include <math.h>
#include <sndfile.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <unistd.h>

#define RATE 48000
#define FRAMES 30000

static char folder[256];
static struct stream_settings settings;
static struct problems problems;

static const char *in_folder(const char *name)
{
    static char path[4][512];
    static int next;
    next = (next + 1) % 4;
    snprintf(path[next], sizeof path[next], "%s/%s", folder, name);
    return path[next];
}

static int begin(void **state)
{
    (void)state;
    snprintf(folder, sizeof folder, "/tmp/hushwatch-recording-XXXXXX");
    return mkdtemp(folder) ? 0 : -1;
}

static int end(void **state)
{
    (void)state;
    char command[400];
    snprintf(command, sizeof command, "rm -r '%s'", folder);
    return system(command);
}

static int fresh(void **state)
{
    (void)state;
    memset(&settings, 0, sizeof settings);
    problems_destroy(&problems);
    problems = (struct problems){0};
    return 0;
}

/* A staircase that every format with 16 bits holds exactly: channel 2 is the negative of channel 1. */
static float wanted(uint64_t frame, uint32_t channel)
{
    float value = (float)((int)(frame % 20011) - 10000) / 32768.0f;
    return channel == 0 ? value : -value;
}

struct written {
    int format, rate, channels;
    uint64_t first, frames;
    const char *date, *clock; /* "2026-03-01", "12:00:00"; NULL: no broadcast extension */
    uint64_t samples_since_midnight;
};

static const char *write_file(const char *name, struct written w)
{
    const char *path = in_folder(name);
    SF_INFO info = {.samplerate = w.rate, .channels = w.channels, .format = w.format};
    SNDFILE *file = sf_open(path, SFM_WRITE, &info);
    assert_non_null(file);
    if (w.date) {
        SF_BROADCAST_INFO header;
        memset(&header, 0, sizeof header);
        memcpy(header.origination_date, w.date, 10);
        memcpy(header.origination_time, w.clock, 8);
        header.time_reference_low = (uint32_t)w.samples_since_midnight;
        header.time_reference_high = (uint32_t)(w.samples_since_midnight >> 32);
        assert_int_equal(sf_command(file, SFC_SET_BROADCAST_INFO, &header, sizeof header), SF_TRUE);
    }
    float *samples = malloc(w.frames * (size_t)w.channels * sizeof *samples);
    assert_non_null(samples);
    for (uint64_t i = 0; i < w.frames; i++)
        for (uint32_t c = 0; c < (uint32_t)w.channels; c++)
            samples[i * (size_t)w.channels + c] = wanted(w.first + i, c);
    assert_int_equal(sf_writef_float(file, samples, (sf_count_t)w.frames), (sf_count_t)w.frames);
    sf_close(file);
    free(samples);
    return path;
}

static void add(const char *path)
{
    snprintf(settings.files[settings.n_files++], SITE_PATH_SIZE, "%s", path);
}

static const struct written plain = {SF_FORMAT_WAV | SF_FORMAT_PCM_16, RATE, 2, 0, FRAMES, NULL, NULL, 0};

static enum status open_input(void **input, struct input_facts *facts)
{
    return input_find("recording")->open(&settings, &problems, input, facts);
}

/* Reads all; out[frame] = frame number that the sample says, for channel 1 exactly and channel 2 negated.
 * Returns frames read, lost frames in *lost and the frame at which they were first lost. */
static uint64_t read_all(void *input, double tolerance, uint64_t first_frame, uint64_t *lost,
                         uint64_t *lost_at)
{
    const struct input_kind *kind = input_find("recording");
    static float samples[2 * 1000];
    struct input_piece piece;
    uint64_t frames = 0, at = first_frame;
    *lost = *lost_at = 0;
    enum status status;
    while ((status = kind->read(input, samples, 1000, &piece)) == STATUS_OK) {
        if (piece.lost_before && !*lost)
            *lost_at = frames;
        *lost += piece.lost_before;
        for (uint32_t i = 0; i < piece.n_frames; i++, at++)
            for (uint32_t c = 0; c < 2; c++)
                assert_near(samples[2 * i + c], wanted(at, c), tolerance);
        frames += piece.n_frames;
    }
    assert_int_equal(status, STATUS_END);
    return frames;
}

static void refused(const char *word)
{
    void *input = NULL;
    struct input_facts facts;
    assert_int_not_equal(open_input(&input, &facts), STATUS_OK);
    assert_null(input);
    assert_true(problems.count >= 1);
    if (!strstr(problems.lines.data, word))
        fail_msg("wanted \"%s\" in: %s", word, problems.lines.data);
    if (settings.n_files > 0) /* names a file, and says what is allowed */
        assert_true(strstr(problems.lines.data, settings.files[settings.n_files - 1]) &&
                    strstr(problems.lines.data, "allowed"));
}

/* WAV and FLAC come back exactly, Ogg (Vorbis, lossy) at the right length. */
static void formats_come_back(void **state)
{
    (void)state;
    static const struct {
        const char *name;
        int format;
        double tolerance;
    } files[] = {
        {"a.wav", SF_FORMAT_WAV | SF_FORMAT_PCM_16, 0},   {"a24.wav", SF_FORMAT_WAVEX | SF_FORMAT_PCM_24, 0},
        {"af.wav", SF_FORMAT_WAV | SF_FORMAT_FLOAT, 0},   {"a.rf64", SF_FORMAT_RF64 | SF_FORMAT_PCM_16, 0},
        {"a.flac", SF_FORMAT_FLAC | SF_FORMAT_PCM_16, 0}, {"a.ogg", SF_FORMAT_OGG | SF_FORMAT_VORBIS, 1.0}};
    for (size_t i = 0; i < sizeof files / sizeof files[0]; i++) {
        fresh(NULL);
        struct written w = plain;
        w.format = files[i].format;
        add(write_file(files[i].name, w));
        void *input;
        struct input_facts facts;
        assert_int_equal(open_input(&input, &facts), STATUS_OK);
        assert_true(facts.rate_hz == RATE && facts.n_channels == 2 && !facts.live);
        assert_near(facts.duration_s, (double)FRAMES / RATE, 1e-9);
        uint64_t lost, at;
        assert_int_equal(read_all(input, files[i].tolerance, 0, &lost, &at), FRAMES);
        assert_int_equal(lost, 0);
        input_find("recording")->close(input);
    }
}

/* Samples that are not numbers are passed on as they are. */
static void strange_samples_are_passed_on(void **state)
{
    (void)state;
    const char *path = in_folder("nan.wav");
    SF_INFO info = {.samplerate = RATE, .channels = 1, .format = SF_FORMAT_WAV | SF_FORMAT_FLOAT};
    SNDFILE *file = sf_open(path, SFM_WRITE, &info);
    const float strange[4] = {NAN, INFINITY, 1e-40f, 2.0f};
    assert_int_equal(sf_writef_float(file, strange, 4), 4);
    sf_close(file);
    add(path);
    void *input;
    struct input_facts facts;
    float samples[16];
    struct input_piece piece;
    assert_int_equal(open_input(&input, &facts), STATUS_OK);
    assert_int_equal(input_find("recording")->read(input, samples, 16, &piece), STATUS_OK);
    assert_int_equal(piece.n_frames, 4);
    assert_true(isnan(samples[0]) && isinf(samples[1]) && samples[2] == 1e-40f && samples[3] == 2.0f);
    input_find("recording")->close(input);
}

static void several_files_are_one_stream(void **state)
{
    (void)state;
    struct written a = plain, b = plain;
    a.frames = 12345;
    b.first = a.frames;
    b.frames = FRAMES - a.frames;
    b.format = SF_FORMAT_FLAC | SF_FORMAT_PCM_24;
    add(write_file("one.wav", a));
    add(write_file("two.flac", b));
    void *input;
    struct input_facts facts;
    assert_int_equal(open_input(&input, &facts), STATUS_OK);
    uint64_t lost, at;
    assert_int_equal(read_all(input, 0, 0, &lost, &at), FRAMES);
    assert_int_equal(lost, 0);
    for (uint64_t frame = 0; frame < FRAMES; frame += 4321) { /* into both files */
        assert_int_equal((input_find("recording")->skip)(input, (double)frame / RATE), STATUS_OK);
        assert_int_equal(read_all(input, 0, frame, &lost, &at), FRAMES - frame);
    }
    assert_int_equal((input_find("recording")->skip)(input, (double)FRAMES / RATE), STATUS_END);
    input_find("recording")->close(input);
}

/* The header's time is the start; a hole between header times is exactly so many lost frames. */
static void holes_are_lost_frames(void **state)
{
    (void)state;
    const uint64_t noon = UINT64_C(43200) * RATE, hole = 12 * RATE + 77;
    struct written a = plain, b = plain;
    a.date = b.date = "2026-03-01";
    a.clock = "12:00:00";
    a.samples_since_midnight = noon + 7;
    b.samples_since_midnight = noon + 7 + FRAMES + hole;
    b.clock = "12:00:12";
    b.first = FRAMES;
    add(write_file("h1.wav", a));
    add(write_file("h2.wav", b));
    void *input;
    struct input_facts facts;
    assert_int_equal(open_input(&input, &facts), STATUS_OK);
    int64_t start_ns;
    assert_int_equal(time_parse_utc("2026-03-01T12:00:00.000146Z", &start_ns), STATUS_OK);
    assert_true(facts.has_start_utc);
    assert_string_equal(facts.start_source, "header");
    assert_near((double)(facts.start_unix_ns - start_ns), 0, 500);
    uint64_t lost, at;
    assert_int_equal(read_all(input, 0, 0, &lost, &at), 2 * FRAMES);
    assert_int_equal(lost, hole);
    assert_int_equal(at, FRAMES);
    assert_near(facts.duration_s, (double)(2 * FRAMES + hole) / RATE, 1e-9);
    /* A restart in the middle of the hole. */
    assert_int_equal((input_find("recording")->skip)(input, (double)(FRAMES + 1000) / RATE), STATUS_OK);
    assert_int_equal(read_all(input, 0, FRAMES, &lost, &at), FRAMES);
    assert_int_equal(lost, hole - 1000);
    input_find("recording")->close(input);
}

/* Whole seconds are not fine enough to make a hole of less than one. */
static void header_seconds_are_not_held_too_strictly(void **state)
{
    (void)state;
    struct written a = plain, b = plain;
    a.date = b.date = "2026-03-01";
    a.clock = "12:00:00";
    b.clock = "12:00:01"; /* the sound lasts 0.625 s */
    b.first = FRAMES;
    add(write_file("c1.wav", a));
    add(write_file("c2.wav", b));
    void *input;
    struct input_facts facts;
    assert_int_equal(open_input(&input, &facts), STATUS_OK);
    uint64_t lost, at;
    assert_int_equal(read_all(input, 0, 0, &lost, &at), 2 * FRAMES);
    assert_int_equal(lost, 0);
    input_find("recording")->close(input);
}

static void overlap_is_an_error(void **state)
{
    (void)state;
    struct written a = plain, b = plain;
    a.date = b.date = "2026-03-01";
    a.clock = "12:00:10";
    b.clock = "12:00:05";
    add(write_file("o1.wav", a));
    add(write_file("o2.wav", b));
    refused("before the end of");
}

static void without_a_header_time_the_file_time_counts(void **state)
{
    (void)state;
    const char *path = write_file("m.wav", plain);
    const struct timespec times[2] = {{.tv_sec = 1772366400},
                                      {.tv_sec = 1772366400}}; /* 2026-03-01T12:00:00Z */
    assert_int_equal(utimensat(AT_FDCWD, path, times, 0), 0);
    add(path);
    void *input;
    struct input_facts facts;
    assert_int_equal(open_input(&input, &facts), STATUS_OK);
    assert_string_equal(facts.start_source, "modification time");
    assert_near((double)(facts.start_unix_ns - 1772366400 * TIME_NS_PER_S), -(double)FRAMES / RATE * 1e9,
                1000);
    input_find("recording")->close(input);
}

static void shapes_must_agree(void **state)
{
    (void)state;
    struct written other = plain;
    other.rate = 44100;
    other.channels = 1;
    add(write_file("s1.wav", plain));
    add(write_file("s2.wav", other));
    refused("44100 Hz where the file before says 48000 Hz");
    assert_non_null(strstr(problems.lines.data, "1 channels where the file before says 2"));
    fresh(NULL);
    settings.rate_hz = 96000;
    settings.n_channels = 4;
    add(in_folder("s1.wav"));
    refused("48000 Hz where the settings say 96000 Hz");
    assert_int_equal(problems.count, 2);
}

static void spoil(const char *name, const char *source, long keep)
{
    static unsigned char bytes[1 << 20];
    FILE *in = fopen(in_folder(source), "rb"), *out = fopen(in_folder(name), "wb");
    assert_true(in && out);
    size_t n = fread(bytes, 1, sizeof bytes, in);
    assert_true((long)n > keep);
    fwrite(bytes, 1, keep < 0 ? n - (size_t)-keep : (size_t)keep, out);
    fclose(in);
    fclose(out);
}

static void bad_files_are_named(void **state)
{
    (void)state;
    struct written w = plain;
    write_file("good.wav", w);
    w.format = SF_FORMAT_FLAC | SF_FORMAT_PCM_16;
    write_file("good.flac", w);
    w.format = SF_FORMAT_OGG | SF_FORMAT_VORBIS;
    write_file("good.ogg", w);
    w.format = SF_FORMAT_AIFF | SF_FORMAT_PCM_16;
    write_file("other.aiff", w);
    w.format = plain.format;
    w.frames = 0;
    write_file("nothing.wav", w);
    spoil("empty.wav", "good.wav", 0);
    spoil("cut.wav", "good.wav", -2001);
    spoil("head.wav", "good.wav", 20);
    spoil("cut.flac", "good.flac", -2000);
    spoil("cut.ogg", "good.ogg", -300);
    spoil("half.ogg", "good.ogg", 4500);
    FILE *text = fopen(in_folder("text.wav"), "w");
    fputs("this is a shopping list, not a sound\n", text);
    fclose(text);
    assert_int_equal(mkdir(in_folder("folder.wav"), 0700), 0);
    static const char *const cases[][2] = {
        {"absent.wav", "cannot be opened"}, {"empty.wav", "is empty"},        {"cut.wav", "truncated"},
        {"head.wav", "truncated"},          {"cut.flac", "truncated"},        {"cut.ogg", "truncated"},
        {"half.ogg", "truncated"},          {"text.wav", "not a sound file"}, {"folder.wav", "is not a file"},
        {"other.aiff", "another kind"},     {"nothing.wav", "holds no sound"}};
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        fresh(NULL);
        add(in_folder(cases[i][0]));
        refused(cases[i][1]);
    }
    fresh(NULL);
    refused("is empty; allowed: 1 to");
    fresh(NULL); /* every bad file is named, not only the first */
    add(in_folder("text.wav"));
    add(in_folder("good.wav"));
    add(in_folder("absent.wav"));
    refused("text.wav");
    assert_int_equal(problems.count, 2);
}

/* A file that was good and can no longer be read is lost sound, not silence and not an early end. */
static void a_file_that_vanishes_is_lost_sound(void **state)
{
    (void)state;
    struct written b = plain;
    add(write_file("v1.wav", plain));
    add(write_file("v2.wav", b));
    b.first = FRAMES;
    add(write_file("v3.wav", b));
    void *input;
    struct input_facts facts;
    assert_int_equal(open_input(&input, &facts), STATUS_OK);
    unlink(in_folder("v2.wav"));
    uint64_t lost, at;
    assert_int_equal(read_all(input, 0, 0, &lost, &at), 2 * FRAMES);
    assert_int_equal(lost, FRAMES);
    assert_int_equal(at, FRAMES);
    input_find("recording")->close(input);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup(formats_come_back, fresh),
        cmocka_unit_test_setup(strange_samples_are_passed_on, fresh),
        cmocka_unit_test_setup(several_files_are_one_stream, fresh),
        cmocka_unit_test_setup(holes_are_lost_frames, fresh),
        cmocka_unit_test_setup(header_seconds_are_not_held_too_strictly, fresh),
        cmocka_unit_test_setup(overlap_is_an_error, fresh),
        cmocka_unit_test_setup(without_a_header_time_the_file_time_counts, fresh),
        cmocka_unit_test_setup(shapes_must_agree, fresh),
        cmocka_unit_test_setup(bad_files_are_named, fresh),
        cmocka_unit_test_setup(a_file_that_vanishes_is_lost_sound, fresh),
    };
    return cmocka_run_group_tests_name("input_recording", tests, begin, end);
}
