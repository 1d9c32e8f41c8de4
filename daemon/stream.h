/* One stream's thread: input -> blocks -> listen -> merge. */
#ifndef STREAM_H
#define STREAM_H

#include "base/status.h"
#include "call/catalogue.h"
#include "input/input.h"
#include "listen/listen.h"
#include "merge.h"
#include "settings/site.h"
#include <stdbool.h>
#include <stdint.h>

struct stream;

/* Where a stream's columns go, from its thread. */
struct stream_columns {
    void (*take)(void *context, uint32_t stream, const struct column *column);
    void *context;
};

/* Where its sound goes as it comes, from its thread: n frames, the first of them at a watch time. Must not
 * wait. */
struct stream_sound {
    void (*take)(void *context, uint32_t stream, int64_t start_ns, const float *samples, uint32_t n_frames);
    void *context;
};

struct stream_setup {
    uint32_t number;                        /* from 1 */
    const struct stream_settings *settings; /* borrowed */
    const struct catalogue *catalogue;      /* borrowed */
    struct stream_columns columns;          /* take may be NULL */
    struct stream_sound sound;              /* take may be NULL */
    bool goes_on; /* when the input ends, time goes on as a gap, by the monotonic clock */
};

/* Opens the input, which says its facts; adds problems and gives the input's status when it cannot. */
enum status stream_open(const struct stream_setup *setup, struct problems *problems, struct stream **out);
const struct input_facts *stream_get_facts(const struct stream *stream);

/* Puts together what hears it (plans FFTs: before any stream starts), with the run's number and the watch
 * time of the first frame (of a live stream: the present, for its first frame comes when it comes). skip_s:
 * where a recording or a scene goes on after a restart; one that has nothing left there ends at once. */
enum status stream_prepare(struct stream *stream, uint32_t run, int64_t start_ns, double skip_s);

/* Starts the thread. */
enum status stream_start(struct stream *stream, struct merge *merge);

/* The next note of the input's own timetable, with known_ns set; STATUS_END when there is none. Before start
 * only. */
enum status stream_next_note(struct stream *stream, double *out_at_s, struct note *out);

/* Ends the thread (at most 0.3 s) and waits for it. */
void stream_stop(struct stream *stream);
/* Takes NULL and streams that were never started. */
void stream_destroy(struct stream *stream);

struct stream_state {
    int64_t last_sound_ns; /* monotonic time at which sound last arrived; 0 before the first */
    int64_t heard_ns;      /* watch time up to which it has been heard */
    double heard_s;        /* sound taken in this run */
    double lost_s;         /* sound lost in this run */
    double cpu_s;          /* CPU time of its thread */
    uint32_t map_changes;  /* how often the map was changed, since a clock drifted */
    struct time_map map;   /* in force */
    int64_t map_change_ns; /* of the last change: new less old */
    bool ended;            /* its input has ended */
    enum status status;    /* STATUS_OK, or why the input ended badly */
    char health[160];      /* in words; empty when there is nothing to say */
};

/* From any thread. */
void stream_get_state(struct stream *stream, struct stream_state *out);

/* What became of the sounds that each class and the finder of impulses looked at, about a second old, and
 * exact once the stream has ended; returns how many (0 before the first second). From any thread. */
uint32_t stream_get_accounts(struct stream *stream, struct class_account out[LISTEN_MAX_ACCOUNTS]);

#endif
