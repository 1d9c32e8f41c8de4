/* People's notes on a timetable, as a scene or a notes file states them:
 *
 *   notes = ( { at_s = 5.0; kind = "sign-on"; person = "A. Observer"; watch = "visual"; }, ... );
 *
 * Every other key is a field of rule/note.h and goes through the same door as a page's note. */
#ifndef SETTINGS_NOTES_H
#define SETTINGS_NOTES_H

#include "base/status.h"
#include "rule/note.h"
#include "settings/reader.h"

struct timed_note {
    double at_s; /* since the first frame of the sound it goes with */
    struct note note;
};

/* Reads the list under `key`; the caller frees *out. The notes come back in order of time. Adds problems;
 * STATUS_BAD_FORMAT when any was added, STATUS_NO_MEMORY. An absent list gives none. */
enum status notes_read(struct group_reader *group, const char *key, struct timed_note **out, unsigned *out_n);

/* Reads a notes file, which holds nothing but `notes`. */
enum status notes_load(const char *path, struct problems *problems, struct timed_note **out, unsigned *out_n);

#endif
