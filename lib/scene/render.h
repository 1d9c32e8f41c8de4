/* The simulator: renders a scene to samples, in bounded memory, for as long as it lasts.
 *
 * Every stretch depends on the scene and its frame numbers alone, never on how it was asked for: any
 * chunking, any jump and any repeat give the same bits. Reading on is fast; a jump back begins the schedules
 * again. */
#ifndef SCENE_RENDER_H
#define SCENE_RENDER_H

#include "base/status.h"
#include "scene/scene.h"
#include <stdint.h>

struct render;

/* Copies the scene; plans FFTs (not thread-safe: at start only). STATUS_BAD_ARGUMENT when scene_check has a
 * word to say, or when a source has more than 512 sounds under way at once; STATUS_NO_MEMORY. The caller owns
 * *out. */
enum status render_create(const struct scene *scene, struct render **out);
void render_destroy(struct render *render);

/* Writes n frames from first_frame on, interleaved [n * hydrophones], 1.0 = full scale by each hydrophone's
 * calibration and never beyond, as a converter clips. The scene's duration is the caller's to keep: beyond it
 * there is only noise. */
void render_get(struct render *render, uint64_t first_frame, float *out, uint32_t n);

#endif
