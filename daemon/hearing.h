/* Keeps what the pages show beside the watch: last levels, calls, impulses, unheard time. Owned by the watch
 * thread. */
#ifndef HEARING_H
#define HEARING_H

#include "flow.h"
#include "http/board.h"

/* Remembers one outcome of the watch; newest first, oldest dropped. */
void hearing_take(struct hearing_view *hearing, const struct outcome *outcome);

/* Empties the steps that begin up to a watch time. */
void hearing_advance_sound(struct hearing_sound *sound, int64_t watch_ns);

/* Marks, and what completes or takes back one; a note that has to do with none changes nothing. */
void hearing_take_mark(struct hearing_view *hearing, const char *id, const struct note *note);
/* A clip whose entry is written. */
void hearing_add_clip(struct hearing_view *hearing, const char *id, const struct sound_entry_facts *facts);

/* Marks and clips of a ledger, in order; nothing where it cannot be read. */
void hearing_recall(struct hearing_view *hearing, const char *ledger_path);

/* Remembers an advice that waits to be committed, and forgets it once it has been. */
void hearing_add_unrecorded(struct hearing_view *hearing, const char *id);
void hearing_set_recorded(struct hearing_view *hearing, const char *id);

/* Adds a line to the faults of this moment; callers clear n_faults first. */
void hearing_add_fault(struct hearing_view *hearing, const char *format, ...)
    __attribute__((format(printf, 2, 3)));

#endif
