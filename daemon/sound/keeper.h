/* What is worth keeping: calls that led to an advice, marks, calls of contacts that were dismissed. Looks at
 * what the watch says and asks for clips. Owned by the watch's thread; waits for nothing. */
#ifndef SOUND_KEEPER_H
#define SOUND_KEEPER_H

#include "base/status.h"
#include "flow.h"
#include "sound/clips.h"

#define KEEPER_MARK_S 30.0      /* of sound before a mark */
#define KEEPER_MARK_AFTER_S 2.0 /* and after it */

struct keeper_setup {
    struct clips *clips; /* borrowed */
    double around_s;     /* of sound before and after a call */
    uint32_t n_streams;
    uint32_t listening[DISK_RING_MAX_STREAMS]; /* the channel of each stream that is kept of a mark, from 1 */
};

struct keeper;

/* STATUS_NO_MEMORY. The caller owns *out. */
enum status keeper_create(const struct keeper_setup *setup, struct keeper **out);
/* Takes NULL. */
void keeper_destroy(struct keeper *keeper);
/* Any outcome of the watch, in order. */
void keeper_take(struct keeper *keeper, const struct outcome *outcome);
/* A mark of an earlier run whose sound was not kept before the program ended. */
void keeper_ask_mark(struct keeper *keeper, const char *note_id, int64_t occurred_ns);

#endif
