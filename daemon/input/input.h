/* Where sound comes from: one table line each (input.c), one file each (device, recording, pcm, scene). */
#ifndef INPUT_INPUT_H
#define INPUT_INPUT_H

#include "base/status.h"
#include "flow.h"
#include "settings/reader.h"
#include "settings/site.h"
#include <stdbool.h>
#include <stdint.h>

/* What an opened input says of itself. */
struct input_facts {
    double rate_hz;
    uint32_t n_channels;
    bool live;          /* may lose sound, cannot wait; time is the clock's */
    bool has_start_utc; /* a recording whose header, or else whose modification time, tells when it began */
    int64_t start_unix_ns;
    const char *start_source; /* "header", "modification time" ...; static */
    double duration_s;        /* NAN where unknown */
};

/* One piece of sound, or of its absence. */
struct input_piece {
    uint64_t lost_before; /* frames lost directly before these */
    uint32_t n_frames;    /* 0 with lost_before > 0: only silence of the input, by the clock */
};

/* What the settings of a stream must say for a kind of input. */
struct input_needs {
    bool device;         /* which device: `device` */
    bool format;         /* the sound does not say it: `rate_hz` and `channel_count` */
    bool files;          /* at least one of `files` */
    bool path;           /* `path` */
    double most_rate_hz; /* the greatest `rate_hz` that it can be read at; 0: any */
};

/* One kind of input: what it is called, and how it is read. */
struct input_kind {
    const char *name;
    struct input_needs needs;
    bool is_file; /* can be opened to look at it, and nobody else notices */
    /* STATUS_OK and an object the caller closes, or another status after adding problems that name what is
     * wrong (file, what, what is allowed; for an unknown device the known ones). */
    enum status (*open)(const struct stream_settings *settings, struct problems *problems, void **out,
                        struct input_facts *out_facts);
    /* Up to max_frames interleaved frames, 1.0 = full scale, into samples. Waits at most 0.25 s.
     * STATUS_TIMEOUT: nothing yet and nothing lost; STATUS_END: no more; STATUS_SYSTEM: broken for good (a
     * live device never is: it reports lost frames by the monotonic clock and goes on trying). */
    enum status (*read)(void *input, float *samples, uint32_t max_frames, struct input_piece *out);
    void (*close)(void *input); /* takes NULL */
    /* The next note of the input's timetable whose time is before `before_s` (seconds since the input's first
     * frame); STATUS_END when there is none. NULL for inputs without one. */
    enum status (*next_note)(void *input, double before_s, struct note *out, double *out_at_s);
    /* Goes to where the input would be after so many seconds (a restart in the middle); NULL where it cannot.
     */
    enum status (*skip)(void *input, double seconds);
    /* A short line on the health of a live input for people ("capturing", "no block for 2.1 s, starting
     * again" ...); NULL where there is nothing to say. */
    void (*get_health)(void *input, char *out, size_t size);
};

/* The table (kinds.h), closed by NULL. */
extern const struct input_kind *const input_kinds[];
/* The kind of that name, or NULL. */
const struct input_kind *input_find(const char *name);

#endif
