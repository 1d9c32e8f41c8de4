/* The kept sound files; see sound_file.h. */
#include "sound/sound_file.h"
#include "base/time.h"
#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <sndfile.h>
#include <sodium.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define CHUNK_FRAMES 4096
#define MAX_CHANNELS 16

struct sound_writer {
    SNDFILE *sound;
};

static enum status create_file(const char *path, int *out_file)
{
    *out_file = open(path, O_RDWR | O_CREAT | O_EXCL | O_CLOEXEC, 0644);
    if (*out_file >= 0)
        return STATUS_OK;
    return errno == EEXIST ? STATUS_EXISTS : errno == ENOSPC ? STATUS_FULL : STATUS_SYSTEM;
}

/* When the first frame was, in the header's two ways: seconds as text, and samples since midnight. */
static void set_time(SNDFILE *sound, double rate_hz, int64_t start_unix_ns)
{
    SF_BROADCAST_INFO header;
    char utc[TIME_UTC_SIZE];
    memset(&header, 0, sizeof header);
    time_format_utc(start_unix_ns, utc);
    memcpy(header.origination_date, utc, 10);
    memcpy(header.origination_time, utc + 11, 8);
    snprintf(header.originator, sizeof header.originator, "hushwatch");
    int64_t day_ns = 86400 * TIME_NS_PER_S, of_day_ns = ((start_unix_ns % day_ns) + day_ns) % day_ns;
    uint64_t samples = (uint64_t)llround((double)of_day_ns * 1e-9 * rate_hz);
    header.time_reference_low = (uint32_t)samples;
    header.time_reference_high = (uint32_t)(samples >> 32);
    header.version = 1;
    sf_command(sound, SFC_SET_BROADCAST_INFO, &header, sizeof header);
}

static SNDFILE *open_to_write(int file, double rate_hz, uint32_t n_channels, int format)
{
    SF_INFO info = {.samplerate = (int)lround(rate_hz), .channels = (int)n_channels, .format = format};
    SNDFILE *sound = sf_open_fd(file, SFM_WRITE, &info, SF_FALSE);
    if (sound)
        sf_command(sound, SFC_SET_CLIPPING, NULL, SF_TRUE);
    return sound;
}

enum status sound_writer_create(const char *path, double rate_hz, uint32_t n_channels, int64_t start_unix_ns,
                                struct sound_writer **out)
{
    int file;
    struct sound_writer *writer = calloc(1, sizeof *writer);
    if (!writer)
        return STATUS_NO_MEMORY;
    enum status status = create_file(path, &file);
    if (status != STATUS_OK) {
        free(writer);
        return status;
    }
    SF_INFO info = {.samplerate = (int)lround(rate_hz),
                    .channels = (int)n_channels,
                    .format = SF_FORMAT_WAV | SF_FORMAT_PCM_24};
    writer->sound = sf_open_fd(file, SFM_WRITE, &info, SF_TRUE); /* closes the file, on failure too */
    if (!writer->sound) {
        unlink(path);
        free(writer);
        return STATUS_FULL;
    }
    sf_command(writer->sound, SFC_SET_CLIPPING, NULL, SF_TRUE);
    set_time(writer->sound, rate_hz, start_unix_ns);
    *out = writer;
    return STATUS_OK;
}

enum status sound_writer_put(struct sound_writer *writer, const float *samples, size_t n_frames)
{
    return sf_writef_float(writer->sound, samples, (sf_count_t)n_frames) == (sf_count_t)n_frames
               ? STATUS_OK
               : STATUS_FULL;
}

void sound_writer_sync(struct sound_writer *writer)
{
    sf_command(writer->sound, SFC_UPDATE_HEADER_NOW, NULL, 0);
}

void sound_writer_destroy(struct sound_writer *writer)
{
    if (!writer)
        return;
    sf_close(writer->sound);
    free(writer);
}

enum status sound_read_facts(const char *path, struct sound_facts *out)
{
    SF_INFO info = {0};
    if (access(path, R_OK) != 0)
        return STATUS_NOT_FOUND;
    SNDFILE *sound = sf_open(path, SFM_READ, &info);
    if (!sound)
        return STATUS_BAD_FORMAT;
    sf_close(sound);
    if (info.frames <= 0 || info.channels < 1 || info.channels > MAX_CHANNELS)
        return STATUS_BAD_FORMAT;
    *out = (struct sound_facts){
        .rate_hz = info.samplerate, .n_channels = (uint32_t)info.channels, .n_frames = (uint64_t)info.frames};
    return STATUS_OK;
}

static enum status pick_channel(SNDFILE *sound, uint32_t n_channels, uint32_t channel, float *out, size_t n)
{
    float *frames = malloc((size_t)CHUNK_FRAMES * n_channels * sizeof *frames);
    if (!frames)
        return STATUS_NO_MEMORY;
    size_t done = 0;
    while (done < n) {
        size_t want = n - done < CHUNK_FRAMES ? n - done : CHUNK_FRAMES;
        sf_count_t got = sf_readf_float(sound, frames, (sf_count_t)want);
        for (sf_count_t i = 0; i < got; i++)
            out[done + (size_t)i] = frames[(size_t)i * n_channels + channel - 1];
        done += got > 0 ? (size_t)got : 0;
        if (got != (sf_count_t)want)
            break;
    }
    free(frames);
    return done == n ? STATUS_OK : STATUS_END;
}

enum status sound_read_channel(const char *path, uint32_t channel, uint64_t from_frame, float *out, size_t n)
{
    SF_INFO info = {0};
    SNDFILE *sound = sf_open(path, SFM_READ, &info);
    if (!sound)
        return STATUS_NOT_FOUND;
    enum status status = STATUS_BAD_ARGUMENT;
    if (info.channels <= MAX_CHANNELS && channel >= 1 && channel <= (uint32_t)info.channels)
        status = sf_seek(sound, (sf_count_t)from_frame, SEEK_SET) == (sf_count_t)from_frame
                     ? pick_channel(sound, (uint32_t)info.channels, channel, out, n)
                     : STATUS_END;
    sf_close(sound);
    return status;
}

static enum status digest_of(int file, char out[SOUND_DIGEST_SIZE], uint64_t *out_bytes)
{
    unsigned char piece[65536], digest[crypto_hash_sha256_BYTES];
    crypto_hash_sha256_state state;
    crypto_hash_sha256_init(&state);
    ssize_t n;
    uint64_t bytes = 0;
    if (lseek(file, 0, SEEK_SET) != 0)
        return STATUS_SYSTEM;
    while ((n = read(file, piece, sizeof piece)) > 0) {
        crypto_hash_sha256_update(&state, piece, (unsigned long long)n);
        bytes += (uint64_t)n;
    }
    if (n < 0)
        return STATUS_SYSTEM;
    crypto_hash_sha256_final(&state, digest);
    sodium_bin2hex(out, SOUND_DIGEST_SIZE, digest, sizeof digest);
    *out_bytes = bytes;
    return STATUS_OK;
}

static enum status write_flac(int file, double rate_hz, const float *samples, size_t n)
{
    SNDFILE *sound = open_to_write(file, rate_hz, 1, SF_FORMAT_FLAC | SF_FORMAT_PCM_24);
    if (!sound)
        return STATUS_SYSTEM;
    bool whole = sf_writef_float(sound, samples, (sf_count_t)n) == (sf_count_t)n;
    whole = sf_close(sound) == 0 && whole;
    return whole ? STATUS_OK : STATUS_FULL;
}

/* A file that is cut still passes for one with FLAC: the frames are counted again. */
static enum status check_clip(const char *path, size_t n)
{
    struct sound_facts facts;
    float last;
    enum status status = sound_read_facts(path, &facts);
    if (status != STATUS_OK || facts.n_frames != n)
        return STATUS_FULL;
    return sound_read_channel(path, 1, n - 1, &last, 1) == STATUS_OK ? STATUS_OK : STATUS_FULL;
}

enum status sound_write_clip(const char *path, double rate_hz, const float *samples, size_t n,
                             char out_digest[SOUND_DIGEST_SIZE], uint64_t *out_bytes)
{
    int file;
    enum status status = create_file(path, &file);
    if (status != STATUS_OK)
        return status;
    status = write_flac(file, rate_hz, samples, n);
    if (status == STATUS_OK && fsync(file) != 0)
        status = errno == ENOSPC ? STATUS_FULL : STATUS_SYSTEM;
    if (status == STATUS_OK)
        status = check_clip(path, n);
    if (status == STATUS_OK)
        status = digest_of(file, out_digest, out_bytes);
    close(file);
    if (status != STATUS_OK)
        unlink(path);
    return status;
}
