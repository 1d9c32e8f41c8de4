/* The watch's thread: takes events in order from the merge, lets the watch conclude, records and publishes.
 */
#ifndef WATCHER_H
#define WATCHER_H

#include "base/status.h"
#include "feed/position.h"
#include "http/board.h"
#include "ledger/outbox.h"
#include "merge.h"
#include "recorder.h"
#include "rule/tally.h"
#include "rule/watch.h"
#include "settings/notes.h"
#include "sound/keeping.h"
#include "stream.h"
#include <stdbool.h>
#include <stdint.h>

struct watcher;

/* Everything is borrowed for the life of the object. */
struct watcher_setup {
    struct merge *merge;
    struct watch *watch;
    struct tally *tally; /* NULL: nothing is summed */
    struct recorder *recorder;
    struct outbox *outbox;
    struct board *board;         /* NULL: nobody looks */
    struct position_feed *feed;  /* NULL: none */
    struct sound_keeping *sound; /* NULL: no sound is kept */
    uint32_t run;
    int64_t zero_unix_ns; /* UTC of watch time zero */
    uint32_t n_streams;
    struct stream *const *streams;
    const struct stream_settings *stream_settings;
    const struct timed_note *notes; /* in order; at_s is watch time */
    unsigned n_notes;
};

enum status watcher_create(const struct watcher_setup *setup, struct watcher **out);
/* Before it starts: marks and clips that a ledger holds, for the pages. */
void watcher_recall(struct watcher *watcher, const char *ledger_path);
/* Publishes what the watch knows now, before anything starts: a page that asks at once sees what is in force.
 */
void watcher_show(struct watcher *watcher, int64_t watch_ns);
/* Starts the thread. `mark` is the run's first event. */
enum status watcher_start(struct watcher *watcher, const struct run_mark *mark);
/* Waits until every stream has ended or watcher_stop was called elsewhere; false after wait_s. */
bool watcher_wait(struct watcher *watcher, double wait_s);
/* Stops the merge and waits for the thread: what is known goes out. */
void watcher_stop(struct watcher *watcher);
void watcher_destroy(struct watcher *watcher);

/* From any thread: hands a note to the watch; see merge_note. */
enum status watcher_take_note(struct watcher *watcher, const struct note *note, char out_id[FLOW_ID_SIZE]);

/* From the writer's thread: lines that are on the disk; context is the watcher. For outbox_setup.committed.
 */
void watcher_set_committed(void *context, const struct ledger_line *lines, size_t n);

/* From any thread. */
struct watcher_state {
    int64_t watch_ns;
    double cpu_s;        /* of its thread */
    int64_t progress_ns; /* monotonic time of its last step */
    uint64_t n_calls, n_impulses, n_contacts, n_advice;
    enum status status; /* STATUS_OK, or the first thing that went wrong inside */
};
void watcher_get_state(struct watcher *watcher, struct watcher_state *out);

#endif
