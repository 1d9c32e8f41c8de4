/* One stream's composition: block in, events out. Owns, for each channel, calibration, levels, impulses,
 * calls and channel health; merges a call heard on several channels into one event.
 *
 * Call order: create; push blocks in order of their frames; get at any time; destroy. One owner thread. */
#ifndef LISTEN_LISTEN_H
#define LISTEN_LISTEN_H

#include "base/status.h"
#include "base/time.h"
#include "call/catalogue.h"
#include "call/found.h"
#include "flow.h"
#include "level/calibration.h"
#include <stdbool.h>
#include <stdint.h>

#define COLUMN_ROWS 24
#define COLUMN_BANDS 3

/* A quarter of a second of one band for the strips of sound: loudness in rows of equal ratio, lowest first.
 */
struct column {
    uint32_t band;               /* 0 low, 1 middle, 2 high */
    int64_t start_ns;            /* watch time */
    double low_hz, high_hz;      /* edges of the band */
    uint8_t levels[COLUMN_ROWS]; /* spectral density in steps of 0.5 dB; 0 is COLUMN_FLOOR_DB or less */
};

#define COLUMN_STEP_DB 0.5
#define COLUMN_FLOOR_DB 10.0 /* dB re 1 uPa2/Hz; dB re full scale less 150 on an uncalibrated channel */

struct column_sink {
    void (*take)(void *context, const struct column *column);
    void *context;
};

struct listen_setup {
    uint32_t stream;     /* from 1 */
    uint32_t run;        /* from 1 */
    uint32_t n_channels; /* 1..16 */
    double rate_hz;      /* 8 kHz to 1 MHz */
    struct time_map map; /* from the stream's frames to watch time */
    struct calibration calibration[FLOW_MAX_CHANNELS];
    double range_m[FLOW_MAX_CHANNELS]; /* slant, from the source; NAN or 0 where unknown */
    const struct catalogue *catalogue; /* borrowed for the life of the object */
    struct column_sink columns; /* the strips of the stream's first listening channel; take may be NULL */
};

struct listen;

/* Allocates all that the stream ever needs and plans its FFTs (not thread-safe: at start only).
 * STATUS_BAD_ARGUMENT for a rate or a channel count out of range; STATUS_NO_MEMORY. The caller owns *out. */
enum status listen_create(const struct listen_setup *setup, struct listen **out);
void listen_destroy(struct listen *listen);

/* Takes the next block: its first_frame - lost_before must be the frame after the last block's end. Gives
 * events in order of known_ns. STATUS_BAD_ARGUMENT when frames overlap or the channel count differs. */
enum status listen_push(struct listen *listen, const struct block *block, const struct event_sink *sink);

/* Ends the stream: what is still held (an open call, the running second) is given or dropped by rule. */
enum status listen_finish(struct listen *listen, const struct event_sink *sink);

/* Watch time up to which the stream has been heard. */
int64_t listen_get_time(const struct listen *listen);

/* Changes the map from frames to watch time from the next block on (a live device's clock drifts). */
void listen_set_map(struct listen *listen, const struct time_map *map);

/* What became of the sounds that a class looked at, so that "nothing found" can be explained. A sound is
 * rejected by each class that looks at it and on each channel that listens, and counts as often. */
struct class_account {
    char name[CALL_CLASS_SIZE];
    enum group group; /* unknown: of what is no animal's */
    bool hearable;    /* the rate carries what the class needs, and a channel listens */
    uint64_t n_found; /* calls given; of a class that is no animal's: sounds counted */
    uint64_t rejected[REJECT_COUNT];
};

/* Of each class of the catalogue, and of the source's impulses where a channel measures them. */
#define LISTEN_MAX_ACCOUNTS (CATALOGUE_MAX_CLASSES + 1)

/* Writes one a class of the catalogue, in its order, then that of the impulses, named "impulse"; returns how
 * many. */
uint32_t listen_get_accounts(const struct listen *listen, struct class_account out[LISTEN_MAX_ACCOUNTS]);

/* What listening can say of a group: some class of it is heard; the rate carries none of its classes; or the
 * catalogue has no class for it, because no call of it is proof, and only eyes can find it. In this order,
 * so that the least of several streams' is that of them all. */
enum group_hearing { GROUP_BY_EAR, GROUP_NOT_CARRIED, GROUP_VISUAL_ONLY };

/* Of n accounts of one stream. */
enum group_hearing listen_group_hearing(const struct class_account *accounts, uint32_t n, enum group group);

/* "by ear", "not carried by the rate", "visual only". */
const char *group_hearing_text(enum group_hearing hearing);

#endif
