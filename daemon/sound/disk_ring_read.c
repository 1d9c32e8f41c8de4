/* Reading the disk ring; see disk_ring.h. */
#include "base/time.h"
#include "sound/disk_ring_inner.h"
#include <math.h>
#include <stdlib.h>

/* The files of a stream that hold anything of a stretch, copied; the caller frees. */
static enum status pick_segments(struct disk_ring *ring, uint32_t stream, int64_t from_ns, int64_t to_ns,
                                 struct segments *out)
{
    enum status status = STATUS_OK;
    pthread_mutex_lock(&ring->lock);
    for (size_t i = 0; i < ring->segments.n && status == STATUS_OK; i++) {
        const struct segment *segment = &ring->segments.all[i];
        if (segment->stream == stream && segment->n_frames > 0 && segment->start_ns < to_ns &&
            segment_end_ns(segment) > from_ns)
            status = segments_add(out, segment);
    }
    pthread_mutex_unlock(&ring->lock);
    return status;
}

/* Reads one file's part; returns how many frames of out it filled. */
static size_t read_part(const struct disk_ring *ring, const struct segment *segment, uint32_t channel,
                        int64_t from_ns, struct disk_ring_sound *out)
{
    char path[2 * DISK_RING_PATH_SIZE];
    int64_t offset = llround((double)(segment->start_ns - from_ns) * 1e-9 * out->rate_hz);
    uint64_t skip = offset < 0 ? (uint64_t)-offset : 0;
    size_t at = offset > 0 ? (size_t)offset : 0;
    if (segment->rate_hz != out->rate_hz || channel > segment->n_channels || skip >= segment->n_frames ||
        at >= out->n)
        return 0;
    uint64_t left = segment->n_frames - skip;
    size_t n = left < out->n - at ? (size_t)left : out->n - at;
    disk_ring_path(ring, segment, path);
    return sound_read_channel(path, channel, skip, out->samples + at, n) == STATUS_OK ? n : 0;
}

enum status disk_ring_read(struct disk_ring *ring, uint32_t stream, uint32_t channel, int64_t from_ns,
                           int64_t to_ns, size_t most, struct disk_ring_sound *out)
{
    if (stream < 1 || stream > ring->setup.n_streams || channel < 1 ||
        channel > ring->setup.streams[stream - 1].n_channels || to_ns <= from_ns)
        return STATUS_BAD_ARGUMENT;
    struct segments parts = {0};
    enum status status = pick_segments(ring, stream, from_ns, to_ns, &parts);
    struct disk_ring_sound sound = {.rate_hz = ring->setup.streams[stream - 1].rate_hz};
    int64_t end_ns = from_ns;
    for (size_t i = 0; i < parts.n; i++)
        end_ns = segment_end_ns(&parts.all[i]) > end_ns ? segment_end_ns(&parts.all[i]) : end_ns;
    double n = round((double)((end_ns < to_ns ? end_ns : to_ns) - from_ns) * 1e-9 * sound.rate_hz);
    sound.n = n < (double)most ? (size_t)n : most;
    if (status == STATUS_OK && sound.n == 0)
        status = STATUS_NOT_FOUND;
    if (status == STATUS_OK && !(sound.samples = calloc(sound.n, sizeof *sound.samples)))
        status = STATUS_NO_MEMORY;
    size_t filled = 0;
    for (size_t i = 0; i < parts.n && status == STATUS_OK; i++)
        filled += read_part(ring, &parts.all[i], channel, from_ns, &sound);
    segments_destroy(&parts);
    if (status == STATUS_OK && filled == 0)
        status = STATUS_NOT_FOUND;
    if (status != STATUS_OK) {
        free(sound.samples);
        return status;
    }
    sound.missing_s = sound.n > filled ? (double)(sound.n - filled) / sound.rate_hz : 0;
    *out = sound;
    return STATUS_OK;
}
