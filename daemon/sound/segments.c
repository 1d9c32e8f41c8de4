/* The files of the disk ring; see segments.h. */
#include "sound/segments.h"
#include "sound/sound_file.h"
#include <dirent.h>
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define SAMPLE_BYTES 3
#define HEADER_BYTES 1024 /* at most */

void segment_name(const struct segment *segment, char out[SEGMENT_NAME_SIZE])
{
    snprintf(out, SEGMENT_NAME_SIZE, "%" PRIu32 ".%" PRIu32 ".%012" PRId64 ".wav", segment->stream,
             segment->run, segment->start_ns / TIME_NS_PER_US);
}

int64_t segment_end_ns(const struct segment *segment)
{
    return segment->start_ns + (int64_t)((double)segment->n_frames / segment->rate_hz * 1e9);
}

uint64_t segment_bytes(const struct segment *segment)
{
    return segment->n_frames * segment->n_channels * SAMPLE_BYTES + HEADER_BYTES;
}

enum status segments_add(struct segments *segments, const struct segment *segment)
{
    if (segments->n == segments->capacity) {
        size_t capacity = segments->capacity ? 2 * segments->capacity : 64;
        struct segment *larger = realloc(segments->all, capacity * sizeof *larger);
        if (!larger)
            return STATUS_NO_MEMORY;
        segments->all = larger;
        segments->capacity = capacity;
    }
    size_t at = segments->n;
    while (at > 0 && segments->all[at - 1].start_ns > segment->start_ns)
        at--;
    memmove(&segments->all[at + 1], &segments->all[at], (segments->n - at) * sizeof *segment);
    segments->all[at] = *segment;
    segments->n++;
    return STATUS_OK;
}

void segments_remove(struct segments *segments, size_t i)
{
    segments->n--;
    memmove(&segments->all[i], &segments->all[i + 1], (segments->n - i) * sizeof segments->all[0]);
}

struct segment *segments_open_of(struct segments *segments, uint32_t stream)
{
    for (size_t i = segments->n; i > 0; i--)
        if (segments->all[i - 1].open && segments->all[i - 1].stream == stream)
            return &segments->all[i - 1];
    return NULL;
}

size_t segments_oldest(const struct segments *segments)
{
    size_t i = 0;
    while (i < segments->n && segments->all[i].open)
        i++;
    return i;
}

void segments_destroy(struct segments *segments)
{
    free(segments->all);
    *segments = (struct segments){0};
}

static bool read_name(const char *name, struct segment *out)
{
    char again[SEGMENT_NAME_SIZE];
    int64_t us;
    if (sscanf(name, "%" SCNu32 ".%" SCNu32 ".%" SCNd64 ".wav", &out->stream, &out->run, &us) != 3 ||
        us < 0 || us > INT64_MAX / TIME_NS_PER_US)
        return false;
    out->start_ns = us * TIME_NS_PER_US;
    segment_name(out, again);
    return strcmp(name, again) == 0;
}

enum status segments_find(struct segments *segments, const char *folder, bool keep)
{
    DIR *listing = opendir(folder);
    enum status status = STATUS_OK;
    if (!listing)
        return STATUS_NOT_FOUND;
    struct dirent *file;
    while (status == STATUS_OK && (file = readdir(listing)) != NULL) {
        struct segment segment = {0};
        struct sound_facts facts;
        char path[1024];
        if (!read_name(file->d_name, &segment))
            continue;
        snprintf(path, sizeof path, "%s/%s", folder, file->d_name);
        if (!keep || sound_read_facts(path, &facts) != STATUS_OK) {
            unlink(path);
            continue;
        }
        segment.rate_hz = facts.rate_hz;
        segment.n_channels = facts.n_channels;
        segment.n_frames = facts.n_frames;
        status = segments_add(segments, &segment);
    }
    closedir(listing);
    return status;
}
