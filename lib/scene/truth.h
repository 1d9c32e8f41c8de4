/* What a scene truly holds, as one JSON object: sea, hydrophones, and every call, blow, shot and ping with
 * where and when it was given and what each hydrophone hears of it. docs/scenes.md lists the keys. */
#ifndef SCENE_TRUTH_H
#define SCENE_TRUTH_H

#include "base/status.h"
#include "scene/scene.h"

struct truth_sink {
    /* A piece of the text; anything but STATUS_OK ends the work. */
    enum status (*take)(void *context, const char *piece);
    void *context;
};

/* Levels at the hydrophones are measured on the same waveform that render gives, without noise. Times are
 * seconds since the scene's first frame. Snaps of shrimp are counted, not listed. STATUS_BAD_ARGUMENT when
 * scene_check has a word to say, STATUS_NO_MEMORY, or what the sink gave. */
enum status truth_write(const struct scene *scene, const struct truth_sink *sink);

#endif
