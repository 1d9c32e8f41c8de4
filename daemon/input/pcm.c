/* Raw samples on standard input or a named pipe, for acquisition cards that PortAudio does not reach: s16,
 * s24 (three bytes), s32 or f32, little-endian, channels interleaved, without any header. A frame cut in two
 * by the pipe waits for its other half; half a frame at the very end is dropped. */
#include "input/kinds.h"
#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <poll.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define WAIT_MS 250
#define ALLOWED_FORMATS "\"s16\", \"s24\", \"s32\", \"f32\""

struct format {
    const char *name;
    uint32_t bytes;
    float (*value)(const unsigned char *bytes);
};

struct pcm {
    const struct format *format;
    uint32_t n_channels;
    int file;
    bool own_file;         /* not standard input */
    unsigned char *bytes;  /* [FLOW_MAX_BLOCK_FRAMES * frame] */
    size_t n_bytes, frame; /* waiting; in one frame */
};

static uint32_t little_endian(const unsigned char *bytes, unsigned n)
{
    uint32_t value = 0;
    for (unsigned i = 0; i < n; i++)
        value |= (uint32_t)bytes[i] << (8 * i);
    return value;
}

static float value_s16(const unsigned char *bytes)
{
    return (float)(int16_t)little_endian(bytes, 2) * 0x1p-15f;
}

static float value_s24(const unsigned char *bytes)
{
    /* In the upper three bytes, so that the sign is where an int32 has it. */
    return (float)((int32_t)(little_endian(bytes, 3) << 8) / 256) * 0x1p-23f;
}

static float value_s32(const unsigned char *bytes)
{
    return (float)(int32_t)little_endian(bytes, 4) * 0x1p-31f;
}

static float value_f32(const unsigned char *bytes)
{
    uint32_t bits = little_endian(bytes, 4);
    float value;
    memcpy(&value, &bits, sizeof value);
    return value;
}

static const struct format formats[] = {
    {"s16", 2, value_s16}, {"s24", 3, value_s24}, {"s32", 4, value_s32}, {"f32", 4, value_f32}};

static const struct format *find_format(const char *name)
{
    for (size_t i = 0; i < sizeof formats / sizeof formats[0]; i++)
        if (strcmp(name, formats[i].name) == 0)
            return &formats[i];
    return NULL;
}

static void close_pcm(void *input)
{
    struct pcm *pcm = input;
    if (!pcm)
        return;
    if (pcm->own_file && pcm->file >= 0)
        close(pcm->file);
    free(pcm->bytes);
    free(pcm);
}

static void check(const struct stream_settings *settings, struct problems *problems)
{
    const char *name = settings->name;
    if (!find_format(settings->format))
        problems_add(problems, name, 0, "format", "is \"%s\"; allowed: " ALLOWED_FORMATS, settings->format);
    if (!(settings->rate_hz > 0))
        problems_add(problems, name, 0, "rate_hz", "is missing; raw samples do not say their rate");
    if (settings->n_channels < 1 || settings->n_channels > FLOW_MAX_CHANNELS)
        problems_add(problems, name, 0, "channels", "are %u; allowed: 1 to %d", settings->n_channels,
                     FLOW_MAX_CHANNELS);
    if (*settings->path == '\0')
        problems_add(problems, name, 0, "path",
                     "is missing; allowed: a named pipe, or \"-\" for standard input");
}

/* Without waiting for a writer: that is what reading is for. */
static enum status open_file(struct pcm *pcm, const char *path, struct problems *problems)
{
    if (strcmp(path, "-") == 0) {
        pcm->file = STDIN_FILENO;
        return STATUS_OK;
    }
    pcm->file = open(path, O_RDONLY | O_NONBLOCK | O_CLOEXEC);
    pcm->own_file = pcm->file >= 0;
    struct stat facts;
    if (pcm->file < 0 || fstat(pcm->file, &facts) != 0) {
        problems_add(problems, path, 0, "", "cannot be opened (%m); allowed: a named pipe, or \"-\"");
        return STATUS_NOT_FOUND;
    }
    if (S_ISDIR(facts.st_mode)) {
        problems_add(problems, path, 0, "", "is a folder; allowed: a named pipe, or \"-\"");
        return STATUS_BAD_FORMAT;
    }
    return STATUS_OK;
}

static enum status open_pcm(const struct stream_settings *settings, struct problems *problems, void **out,
                            struct input_facts *out_facts)
{
    unsigned before = problems->count;
    check(settings, problems);
    if (problems->count != before)
        return STATUS_OUT_OF_RANGE;
    struct pcm *pcm = calloc(1, sizeof *pcm);
    if (!pcm)
        return STATUS_NO_MEMORY;
    pcm->file = -1;
    pcm->format = find_format(settings->format);
    pcm->n_channels = settings->n_channels;
    pcm->frame = (size_t)pcm->format->bytes * pcm->n_channels;
    pcm->bytes = malloc(FLOW_MAX_BLOCK_FRAMES * pcm->frame);
    enum status status = pcm->bytes ? open_file(pcm, settings->path, problems) : STATUS_NO_MEMORY;
    if (status != STATUS_OK) {
        close_pcm(pcm);
        return status;
    }
    *out = pcm;
    *out_facts = (struct input_facts){
        .rate_hz = settings->rate_hz, .n_channels = settings->n_channels, .duration_s = NAN};
    return STATUS_OK;
}

/* STATUS_OK: there are bytes or the end. A pipe that no writer has opened yet is neither. */
static enum status wait_for_bytes(const struct pcm *pcm)
{
    struct pollfd wait = {.fd = pcm->file, .events = POLLIN};
    int ready = poll(&wait, 1, WAIT_MS);
    if (ready == 0 || (ready < 0 && errno == EINTR))
        return STATUS_TIMEOUT;
    if (ready < 0 || (wait.revents & (POLLERR | POLLNVAL)))
        return STATUS_SYSTEM;
    return STATUS_OK;
}

static uint32_t take_frames(struct pcm *pcm, float *samples)
{
    uint32_t n = (uint32_t)(pcm->n_bytes / pcm->frame);
    const struct format *format = pcm->format;
    for (size_t i = 0; i < (size_t)n * pcm->n_channels; i++)
        samples[i] = format->value(pcm->bytes + i * format->bytes);
    size_t used = n * pcm->frame;
    memmove(pcm->bytes, pcm->bytes + used, pcm->n_bytes - used);
    pcm->n_bytes -= used;
    return n;
}

static enum status read_pcm(void *input, float *samples, uint32_t max_frames, struct input_piece *out)
{
    struct pcm *pcm = input;
    if (max_frames == 0)
        return STATUS_BAD_ARGUMENT;
    if (max_frames > FLOW_MAX_BLOCK_FRAMES)
        max_frames = FLOW_MAX_BLOCK_FRAMES;
    enum status status = wait_for_bytes(pcm);
    if (status != STATUS_OK)
        return status;
    ssize_t got = read(pcm->file, pcm->bytes + pcm->n_bytes, max_frames * pcm->frame - pcm->n_bytes);
    if (got < 0)
        return errno == EAGAIN || errno == EINTR ? STATUS_TIMEOUT : STATUS_SYSTEM;
    if (got == 0)
        return STATUS_END;
    pcm->n_bytes += (size_t)got;
    uint32_t n = take_frames(pcm, samples);
    if (n == 0)
        return STATUS_TIMEOUT;
    *out = (struct input_piece){.n_frames = n};
    return STATUS_OK;
}

const struct input_kind input_pcm = {
    .name = "pcm",
    .needs = {.format = true},
    .open = open_pcm,
    .read = read_pcm,
    .close = close_pcm,
};
