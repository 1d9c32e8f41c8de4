/* Sound files that the daemon keeps: pieces of the ring as WAV, clips as FLAC; reading both. The only part of
 * daemon/sound that sees libsndfile. Functions wait for the disk: not for threads that listen or watch. */
#ifndef SOUND_SOUND_FILE_H
#define SOUND_SOUND_FILE_H

#include "base/status.h"
#include <stddef.h>
#include <stdint.h>

struct sound_facts {
    double rate_hz;
    uint32_t n_channels;
    uint64_t n_frames;
};

/* A WAV file of 24-bit samples that is being written. Its header is brought up to date by sound_writer_sync,
 * so that a program that is killed leaves a file that every reader takes. */
struct sound_writer;

/* A new file, with the time of its first frame in the broadcast extension (EBU Tech 3285, as UTC).
 * STATUS_EXISTS, STATUS_FULL, STATUS_SYSTEM. */
enum status sound_writer_create(const char *path, double rate_hz, uint32_t n_channels, int64_t start_unix_ns,
                                struct sound_writer **out);
/* n frames, interleaved; beyond full scale they are clipped. STATUS_FULL: they did not all fit. */
enum status sound_writer_put(struct sound_writer *writer, const float *samples, size_t n_frames);
void sound_writer_sync(struct sound_writer *writer);
/* Takes NULL. */
void sound_writer_destroy(struct sound_writer *writer);

/* STATUS_NOT_FOUND, STATUS_BAD_FORMAT. */
enum status sound_read_facts(const char *path, struct sound_facts *out);
/* n frames of one channel (from 1) from a frame on, into out [n]. STATUS_END: the file has fewer. */
enum status sound_read_channel(const char *path, uint32_t channel, uint64_t from_frame, float *out, size_t n);

/* A FLAC file of one channel, 24 bits a sample, on the disk when the function returns. The digest is the
 * file's SHA-256 in lower-case hex. On failure there is no file. STATUS_EXISTS, STATUS_FULL, STATUS_SYSTEM.
 */
#define SOUND_DIGEST_SIZE 65
enum status sound_write_clip(const char *path, double rate_hz, const float *samples, size_t n,
                             char out_digest[SOUND_DIGEST_SIZE], uint64_t *out_bytes);

#endif
