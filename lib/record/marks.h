/* Bodies of the entries that the daemon and the scan write themselves, not the watch: run, permit, health,
 * calibration, clock, sound, stamp. The counter of an id runs per run, stream and kind, from 1, as
 * everywhere. Every function: STATUS_NO_MEMORY leaves out unusable. Texts are borrowed for the call. */
#ifndef RECORD_MARKS_H
#define RECORD_MARKS_H

#include "base/status.h"
#include "base/text.h"
#include "base/time.h"
#include "flow.h"
#include "level/calibration.h"
#include "rule/permit.h"
#include <stdint.h>

/* What a run is besides its outage. Empty texts ("" or NULL) become null. */
struct run_facts {
    const char *site;       /* the site's name */
    const char *settings;   /* every effective setting, one a line */
    const char *permit;     /* the id of the permit in force; its text is in the `permit` entry */
    const char *version;    /* of the program */
    const char *build;      /* build id of the program: sameness holds for one build ... */
    const char *cpu;        /* ... on one kind of CPU */
    const char *command;    /* "watch" or "scan" */
    const char *start_from; /* how the start was known: "clock", "header", "modification time", "option" */
    uint32_t n_streams;     /* that are heard ... */
    const uint32_t *n_channels; /* ... and the channels of each; NULL for none */
    const char *input;          /* what is heard: recordings, devices, scene; one a line */
};

/* mark: the outage before the run; the run starts at its outage_end_ns. zero_unix_ns: UTC of watch time zero
 * in this run. facts may be NULL: then only the outage is said. Key "watch_zero_utc" is left out without
 * facts. */
enum status entry_body_run(uint32_t run, const struct run_mark *mark, int64_t zero_unix_ns,
                           const struct run_facts *facts, struct text *out);

/* What a rerun needs of a `run` and of a `permit` entry. Texts are reset first and the caller's to destroy.
 * STATUS_NOT_FOUND where there is none (an older version's entry); STATUS_BAD_FORMAT, STATUS_NO_MEMORY. */
#define ENTRY_MAX_STREAMS 8
enum status entry_run_settings(const char *body, struct text *settings, uint32_t *n_streams,
                               uint32_t n_channels[ENTRY_MAX_STREAMS]);
enum status entry_permit_text(const char *body, struct text *text);

/* The permit in force: its file's whole text, the text's SHA-256, and every value with its mark and source.
 */
enum status entry_body_permit(uint32_t run, uint64_t counter, const struct permit *permit,
                              const char *file_text, struct text *out);

/* The health of the watch or of one stream (0: of the watch): whether it is well, and a sentence. */
enum status entry_body_health(uint32_t run, uint32_t stream, uint64_t counter, bool ok, const char *text,
                              struct text *out);

/* A channel's calibration and place. x, y, z from the source's reference point: ahead, to starboard, down. */
struct channel_facts {
    uint32_t channel; /* from 1 */
    const char *serial;
    const char *certificate_date, *due_date; /* "2026-03-01", or empty */
    const char *stream_name;
    double rate_hz;
    double x_m, y_m, z_m; /* NAN where unknown */
};
enum status entry_body_calibration(uint32_t run, uint32_t stream, uint64_t counter,
                                   const struct calibration *calibration, const struct channel_facts *facts,
                                   struct text *out);

/* A field check: a channel heard a tone of known level, and the entry (of kind calibration too) says how far
 * the stated sensitivity is from what was measured. */
struct field_check_facts {
    struct channel_facts channel;
    double tone_hz, tone_db; /* what the calibrator gives, SPL in dB re 1 uPa */
    double measured_db;      /* with the stated sensitivity */
    double sensitivity_db;   /* stated, at tone_hz */
    double
        change_db;  /* of the difference since the last check of this hydrophone; NAN where there was none */
    double seconds; /* of steady tone */
    const char *input; /* what was heard */
};
enum status entry_body_field_check(uint32_t run, uint32_t stream, uint64_t counter,
                                   const struct field_check_facts *facts, struct text *out);

/* A change of the map from a stream's frames to watch time (stream > 0), or from watch time to UTC (stream 0,
 * map NULL): what it is from now on and why it changed. */
struct clock_facts {
    const struct time_map *map; /* NULL for the watch's map to UTC */
    int64_t zero_unix_ns;       /* UTC of watch time zero */
    double offset_s;            /* new less old, where they meet; NAN where nothing was before */
    const char *source;         /* "system", "nominal rate", "measured against the monotonic clock" ... */
    const char *reason;
};
enum status entry_body_clock(uint32_t run, uint32_t stream, uint64_t counter, const struct clock_facts *facts,
                             struct text *out);

/* A clip: a stretch of sound that is kept, as a FLAC file of one channel, and why. */
#define SOUND_FILE_SIZE 64
#define SOUND_MAX_CAUSES 3
enum sound_reason { SOUND_ADVICE, SOUND_MARK, SOUND_DISMISSED };
struct sound_entry_facts {
    uint32_t stream, channel;   /* from 1 */
    uint64_t counter;           /* of the entry */
    int64_t start_ns, end_ns;   /* watch time */
    double rate_hz, missing_s;  /* seconds of it that the ring did not have: silence in the file */
    enum sound_reason reason;   /* a call that led to an advice, a mark, a call of a dismissed contact */
    double low_hz, high_hz;     /* of what it is kept for; NAN where nothing is known */
    char file[SOUND_FILE_SIZE]; /* within the folder of the clips */
    char sha256[65];            /* of the file, lower-case hex */
    uint64_t bytes;             /* of the file */
    uint32_t n_causes;          /* ids of the call, the mark, the advice ... */
    char causes[SOUND_MAX_CAUSES][FLOW_ID_SIZE];
};
enum status entry_body_sound(uint32_t run, const struct sound_entry_facts *facts, struct text *out);
const char *sound_reason_text(enum sound_reason reason); /* "advice", "mark", "dismissed" */

/* A signed text that fixes the entries first..last. */
struct stamp_facts {
    const char *text;      /* the text that is signed, exactly */
    const char *signature; /* Ed25519, lower-case hex */
    const char *key;       /* the public key, lower-case hex */
    int64_t first, last;   /* seq */
};
enum status entry_body_stamp(uint32_t run, uint64_t counter, const struct stamp_facts *facts,
                             struct text *out);

#endif
