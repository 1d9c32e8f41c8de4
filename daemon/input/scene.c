/* A simulated scene as an input: its sound, and the notes of its people. */
#include "settings/scene.h"
#include "input/kinds.h"
#include "scene/render.h"
#include <inttypes.h>
#include <math.h>
#include <stdlib.h>

struct scene_input {
    struct scene_file file;
    struct render *render;
    uint64_t frame, end_frame;
    unsigned next_note;
};

static void close_scene(void *input)
{
    struct scene_input *scene = input;
    if (!scene)
        return;
    render_destroy(scene->render);
    scene_file_destroy(&scene->file);
    free(scene);
}

static void check_shape(const struct stream_settings *settings, const struct scene *scene,
                        struct problems *problems)
{
    if (settings->rate_hz > 0 && settings->rate_hz != scene->rate_hz)
        problems_add(problems, settings->path, 0, "rate_hz",
                     "is %g where the settings say %g; allowed: the same, or none in the settings",
                     scene->rate_hz, settings->rate_hz);
    if (settings->n_channels > 0 && settings->n_channels != scene->n_hydrophones)
        problems_add(problems, settings->path, 0, "hydrophones",
                     "are %" PRIu32 " where the settings say %" PRIu32
                     " channels; allowed: the same, or none in the settings",
                     scene->n_hydrophones, settings->n_channels);
}

static enum status build(const struct stream_settings *settings, struct problems *problems,
                         struct scene_input *scene)
{
    enum status status = scene_load(settings->path, problems, &scene->file);
    if (status != STATUS_OK)
        return status;
    unsigned before = problems->count;
    check_shape(settings, &scene->file.scene, problems);
    if (problems->count != before)
        return STATUS_BAD_FORMAT;
    status = render_create(&scene->file.scene, &scene->render);
    if (status == STATUS_BAD_ARGUMENT)
        problems_add(
            problems, settings->path, 0, "",
            "has a source with more than 512 sounds on their way at once; allowed: longer intervals or "
            "a nearer source");
    return status;
}

static enum status open_scene(const struct stream_settings *settings, struct problems *problems, void **out,
                              struct input_facts *out_facts)
{
    struct scene_input *scene = calloc(1, sizeof *scene);
    if (!scene)
        return STATUS_NO_MEMORY;
    enum status status = build(settings, problems, scene);
    if (status != STATUS_OK) {
        close_scene(scene);
        return status;
    }
    const struct scene *what = &scene->file.scene;
    scene->end_frame = (uint64_t)llround(what->duration_s * what->rate_hz);
    *out_facts = (struct input_facts){
        .rate_hz = what->rate_hz, .n_channels = what->n_hydrophones, .duration_s = what->duration_s};
    *out = scene;
    return STATUS_OK;
}

static enum status read_scene(void *input, float *samples, uint32_t max_frames, struct input_piece *out)
{
    struct scene_input *scene = input;
    if (scene->frame >= scene->end_frame)
        return STATUS_END;
    uint64_t left = scene->end_frame - scene->frame;
    uint32_t n = left < max_frames ? (uint32_t)left : max_frames;
    render_get(scene->render, scene->frame, samples, n);
    scene->frame += n;
    *out = (struct input_piece){.n_frames = n};
    return STATUS_OK;
}

static enum status next_note(void *input, double before_s, struct note *out, double *out_at_s)
{
    struct scene_input *scene = input;
    const struct timed_note *next = scene->file.notes + scene->next_note;
    if (scene->next_note >= scene->file.n_notes || !(next->at_s < before_s))
        return STATUS_END;
    *out = next->note;
    *out_at_s = next->at_s;
    scene->next_note++;
    return STATUS_OK;
}

/* Notes whose time is over are not given again. */
static enum status skip_scene(void *input, double seconds)
{
    struct scene_input *scene = input;
    uint64_t frame = (uint64_t)llround(fmax(0, seconds) * scene->file.scene.rate_hz);
    if (!(seconds >= 0) || frame >= scene->end_frame)
        return STATUS_END;
    scene->frame = frame;
    while (scene->next_note < scene->file.n_notes && scene->file.notes[scene->next_note].at_s < seconds)
        scene->next_note++;
    return STATUS_OK;
}

const struct input_kind input_scene = {
    .name = "scene",
    .needs = {.path = true},
    .is_file = true,
    .open = open_scene,
    .read = read_scene,
    .close = close_scene,
    .next_note = next_note,
    .skip = skip_scene,
};
