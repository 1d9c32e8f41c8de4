/* The board: what people may see, as one immutable text that the watch thread publishes and the pages read.
 *
 * Call order: create; then the watch thread alone publishes, while any thread takes and releases snapshots;
 * destroy when no thread uses it any more. A reader never touches a live structure and never holds the
 * board's lock longer than a pointer takes to copy. */
#ifndef HTTP_BOARD_H
#define HTTP_BOARD_H

#include "base/status.h"
#include "flow.h"
#include "http/columns.h"
#include "listen/listen.h"
#include "record/marks.h"
#include "rule/permit.h"
#include "rule/watch.h"
#include "settings/site.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define BOARD_MAX_CALLS 40
#define BOARD_MAX_IMPULSES 40
#define BOARD_MAX_UNHEARD 40
#define BOARD_MAX_FAULTS 20 /* two of each stream, and those of the watch */
#define BOARD_MAX_EXPOSURES 64
#define BOARD_MAX_SOURCES 32  /* channels that measure impulses */
#define BOARD_CURVE_STEPS 360 /* an hour */
#define BOARD_CURVE_STEP_S 10
#define BOARD_MAX_HEARD 7200 /* impulses of which the curve can be made again: an hour of 120 a minute */
#define BOARD_MAX_UNRECORDED 8
#define BOARD_MAX_MARKS 24
#define BOARD_MAX_CLIPS 32
#define BOARD_MAX_SOUNDS 32    /* classes that are no animal's */
#define BOARD_SOUND_STEP_S 600 /* an hour is the step at hand and the five before it */
#define BOARD_SOUND_STEPS 144  /* a day */
#define BOARD_MAX_LEVELS (SITE_MAX_STREAMS * FLOW_MAX_CHANNELS)
#define BOARD_LINE_SIZE 192

/* What never changes in a run. Everything is copied. */
struct board_setup {
    const char *site; /* the site's name */
    const struct permit *permit;
    uint32_t run;            /* from 1 */
    int64_t unix_at_zero_ns; /* UTC, since 1970, of watch time 0: see hearing_view for its changes */
    uint32_t n_stations;
    char stations[SITE_MAX_STATIONS][NOTE_NAME_SIZE]; /* crew stations that acknowledge for themselves */
    uint32_t n_streams;
};

struct hearing_stream {
    char name[NOTE_NAME_SIZE];
    char input[32];
    double rate_hz;
    uint32_t n_channels;
    bool hearing;                 /* false: nothing is being heard now, whatever the reason */
    char health[BOARD_LINE_SIZE]; /* in words: "capturing", "no block for 2.1 s, starting again" */
    int64_t heard_ns;             /* watch time up to which the stream has been heard */
    double block_age_s;           /* since the last block arrived; NAN where none has */
    double unheard_s;             /* unheard time of this run so far */
    double masked_s;              /* time of this run in which the own source covered some band */
    uint32_t n_accounts;          /* listen_get_accounts */
    struct class_account accounts[LISTEN_MAX_ACCOUNTS];
};

/* Impulsiveness of a channel's last whole minute of watch time: a remark for people, marked as research. */
struct hearing_research {
    double kurtosis;            /* NAN before the first minute */
    double window_s, high_hz;   /* of the sound in it, over 0 Hz to high_hz */
    double sel_db, adjusted_db; /* SEL of that minute, and kurtosis-adjusted (Goley et al. 2011) */
};

struct hearing_level {
    uint32_t stream; /* from 1 */
    struct level level;
    struct hearing_research research;
    int64_t minute; /* number of the minute that is being gathered */
    struct moments moments;
    double energy, seconds; /* of it: sum of p^2 T, uPa2 s, and T */
};

struct hearing_call {
    uint32_t stream;
    char id[FLOW_ID_SIZE];
    struct call call;
};

struct hearing_impulse {
    uint32_t stream;
    char id[FLOW_ID_SIZE];
    struct impulse impulse;
};

/* What the curve needs of an impulse, should a person say that it is another's. */
struct hearing_heard {
    int64_t step;
    uint64_t counter;
    uint32_t run, stream;
    float sel_db, peak_db;
    bool ours;
};

struct hearing_unheard {
    uint32_t stream;
    struct unheard unheard;
};

/* Sounds of a class that is no animal's, counted in steps of the last day. */
struct hearing_sound {
    char class_name[CALL_CLASS_SIZE];
    int64_t last_ns;                    /* end of the newest */
    int64_t step;                       /* number of the step at hand */
    uint32_t counts[BOARD_SOUND_STEPS]; /* by step modulo their number */
    uint64_t n, n_against;              /* of this run: sounds; calls that they took back */
};

/* A moment that somebody marked, and what became of it. */
struct hearing_mark {
    char id[FLOW_ID_SIZE];
    int64_t occurred_ns;
    char person[NOTE_NAME_SIZE];
    bool withdrawn;                 /* by a correction */
    char completed[NOTE_NAME_SIZE]; /* id of the note that says what it was; "" while the mark is open */
    char text[BOARD_LINE_SIZE];     /* of the mark, then of what completed it */
};

/* A stretch of sound that is kept; its entry's id is what GET /clip/ID takes. */
struct hearing_clip {
    char id[FLOW_ID_SIZE];
    struct sound_entry_facts facts;
};

/* What the daemon knows beside the watch. Lists are newest first. About 500 kB: not for the stack. */
struct hearing_view {
    int64_t unix_at_zero_ns; /* UTC of watch time 0 by the clock map in force */
    uint32_t n_streams;
    struct hearing_stream streams[SITE_MAX_STREAMS];
    uint32_t n_levels; /* the last second of each channel */
    struct hearing_level levels[BOARD_MAX_LEVELS];
    uint32_t n_calls;
    struct hearing_call calls[BOARD_MAX_CALLS];
    uint32_t n_impulses;
    struct hearing_impulse impulses[BOARD_MAX_IMPULSES];
    uint32_t n_sounds;
    struct hearing_sound sounds[BOARD_MAX_SOUNDS];
    uint32_t n_marks;
    struct hearing_mark marks[BOARD_MAX_MARKS];
    uint32_t n_clips;
    struct hearing_clip clips[BOARD_MAX_CLIPS];
    uint32_t n_unheard;
    struct hearing_unheard unheard[BOARD_MAX_UNHEARD];
    uint32_t n_curve; /* the loudest of our impulses in each step of the last hour, oldest first */
    int64_t curve_step[BOARD_CURVE_STEPS]; /* watch time / BOARD_CURVE_STEP_S */
    float curve_sel_db[BOARD_CURVE_STEPS], curve_peak_db[BOARD_CURVE_STEPS];
    uint64_t n_heard; /* all so far; the last of them are kept, the n-th at n % BOARD_MAX_HEARD */
    struct hearing_heard heard[BOARD_MAX_HEARD];
    uint32_t n_exposures; /* the last word on each criterion */
    struct exposure_outcome exposures[BOARD_MAX_EXPOSURES];
    uint32_t n_sources; /* the last of each stream */
    struct source_outcome sources[BOARD_MAX_SOURCES];
    bool recording;                       /* false: entries are not reaching the disk */
    char recording_text[BOARD_LINE_SIZE]; /* why not, in words; empty while it records */
    int64_t committed_seq;                /* last committed entry; 0 where none is */
    int64_t committed_ns;  /* watch time up to which the ledger holds everything (it goes on with watch
                              time while there is nothing to write, and stands still when the writer does) */
    uint32_t n_unrecorded; /* ids of advice whose entries are not committed yet */
    char unrecorded[BOARD_MAX_UNRECORDED][FLOW_ID_SIZE];
    uint32_t n_faults;
    char faults[BOARD_MAX_FAULTS][BOARD_LINE_SIZE];
};

/* One published text; immutable from then on. */
struct snapshot {
    uint64_t sequence; /* from 1 */
    uint64_t urgent;   /* rises when advice or phase differ from the snapshot before */
    const char
        *event; /* "id: RUN-SEQUENCE\nevent: state\ndata: JSON\n\n" (WHATWG HTML, server-sent events) */
    size_t event_length;
    const char *json; /* the JSON within it */
    size_t json_length;
    int64_t watch_ns;
    int64_t committed_seq, committed_ns;
};

struct board;

/* Publishes a first, empty snapshot. STATUS_BAD_ARGUMENT for too many streams or stations; STATUS_NO_MEMORY.
 * The caller owns *out. */
enum status board_create(const struct board_setup *setup, struct board **out);
void board_destroy(struct board *board);

/* Renders both views and puts the text in place of the one before; one caller thread. STATUS_NO_MEMORY leaves
 * the old one in force. */
enum status board_publish(struct board *board, const struct watch_view *watch,
                          const struct hearing_view *hearing);

/* A column of a strip of sound, for GET /api/sound; any thread. STATUS_BAD_ARGUMENT for a stream or band that
 * does not exist and for a column that is not later than the one before. */
enum status board_push_column(struct board *board, uint32_t stream, const struct column *column);

/* The current snapshot, to be given back with board_release. Never NULL. */
const struct snapshot *board_take(struct board *board);
void board_release(struct board *board, const struct snapshot *snapshot);

/* Waits until the sequence is above `seen`, board_wake is called or the time is over; returns the sequence.
 */
uint64_t board_wait(struct board *board, uint64_t seen, int64_t timeout_ns);
void board_wake(struct board *board);

/* What never changes in a run, as JSON; owned by the board. */
const char *board_fixed_json(const struct board *board);
uint32_t board_run(const struct board *board);
struct columns *board_columns(struct board *board);

#endif
