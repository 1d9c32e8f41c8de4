/* Scene files: config/scenes/NAME.cfg. docs/scenes.md lists the keys. */
#ifndef SETTINGS_SCENE_H
#define SETTINGS_SCENE_H

#include "base/status.h"
#include "scene/scene.h"
#include "settings/notes.h"
#include "settings/reader.h"

struct scene_file {
    struct scene scene;
    struct timed_note *notes; /* people's notes, in order of time */
    unsigned n_notes;
};

/* Reads and checks a scene. STATUS_NOT_FOUND, STATUS_BAD_FORMAT after adding problems, STATUS_NO_MEMORY. The
 * caller destroys *out, which is plain data but for the notes. */
enum status scene_load(const char *path, struct problems *problems, struct scene_file *out);
/* Takes NULL. */
void scene_file_destroy(struct scene_file *file);

#endif
