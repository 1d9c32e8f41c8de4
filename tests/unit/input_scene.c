/* daemon/input/scene.c and daemon/settings/scene.c: the project's own scenes, and a short one written here.
 */
#include "support/test.h"

#include "input/input.h"
#include "scene/render.h"
#include "settings/scene.h"
#include <math.h>
#include <stdlib.h>
#include <unistd.h>

static char path[256];
static struct problems problems;

static const char scene_text[] =
    "seed = 4; duration_s = 3.0; rate_hz = 48000.0;\n"
    "hydrophones = ( { z_m = 9.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; },\n"
    "                { y_m = 3.0; z_m = 9.0; sensitivity_db = -170.0; gain_db = 0.0; full_scale_v = 10.0; } "
    ");\n"
    "animals = ( { voice = \"delphinid whistle\"; members = 2; start_s = 0.5; } );\n"
    "notes = ( { at_s = 2.5; kind = \"remark\"; text = \"third\"; },\n"
    "          { at_s = 0.5; kind = \"remark\"; text = \"first\"; },\n"
    "          { at_s = 1.5; kind = \"sighting\"; person = \"A\"; group = \"delphinid\"; distance_m = 400; } "
    ");\n";

static int begin(void **state)
{
    (void)state;
    snprintf(path, sizeof path, "/tmp/hushwatch-scene-%d.cfg", (int)getpid());
    FILE *file = fopen(path, "w");
    return !file || fputs(scene_text, file) < 0 || fclose(file) != 0;
}

static int end(void **state)
{
    (void)state;
    problems_destroy(&problems);
    return unlink(path);
}

static void *open_scene(double rate_hz, uint32_t n_channels, struct input_facts *facts)
{
    struct stream_settings settings = {.rate_hz = rate_hz, .n_channels = n_channels};
    snprintf(settings.path, sizeof settings.path, "%s", path);
    void *input = NULL;
    problems_destroy(&problems);
    problems = (struct problems){0};
    enum status status = input_find("scene")->open(&settings, &problems, &input, facts);
    assert_true((status == STATUS_OK) == (input != NULL) && (status == STATUS_OK) == (problems.count == 0));
    return input;
}

/* What the input gives is what the renderer gives, to the last frame; also after a skip. */
static void sound_is_the_renderers(void **state)
{
    (void)state;
    const struct input_kind *kind = input_find("scene");
    const uint32_t n = 3 * 48000;
    struct scene_file file;
    struct render *render;
    assert_int_equal(scene_load(path, &problems, &file), STATUS_OK);
    assert_int_equal(render_create(&file.scene, &render), STATUS_OK);
    float *want = malloc(n * 2 * sizeof *want), samples[2 * 2048];
    assert_non_null(want);
    render_get(render, 0, want, n);
    for (int skipped = 0; skipped < 2; skipped++) {
        struct input_facts facts;
        struct input_piece piece;
        void *input = open_scene(0, 0, &facts);
        assert_true(facts.rate_hz == 48000 && facts.n_channels == 2 && facts.duration_s == 3 && !facts.live);
        uint32_t at = skipped ? 61234 : 0;
        if (skipped)
            assert_int_equal((kind->skip)(input, at / 48000.0), STATUS_OK);
        while (kind->read(input, samples, 2048, &piece) == STATUS_OK) {
            assert_true(piece.n_frames > 0 && piece.lost_before == 0 && at + piece.n_frames <= n);
            assert_memory_equal(samples, want + 2 * (size_t)at, piece.n_frames * 2 * sizeof *want);
            at += piece.n_frames;
        }
        assert_int_equal(at, n);
        assert_int_equal((kind->skip)(input, 3.0), STATUS_END);
        kind->close(input);
    }
    free(want);
    render_destroy(render);
    scene_file_destroy(&file);
}

static void notes_come_in_order_and_in_time(void **state)
{
    (void)state;
    const struct input_kind *kind = input_find("scene");
    struct input_facts facts;
    struct note note;
    double at_s;
    void *input = open_scene(0, 0, &facts);
    assert_int_equal(kind->next_note(input, 0.5, &note, &at_s), STATUS_END);
    assert_int_equal(kind->next_note(input, 0.6, &note, &at_s), STATUS_OK);
    assert_true(at_s == 0.5 && note.kind == NOTE_REMARK && strcmp(note.text, "first") == 0);
    assert_int_equal(kind->next_note(input, 1.0, &note, &at_s), STATUS_END);
    assert_int_equal((kind->skip)(input, 1.5), STATUS_OK); /* a note of this very moment is still to come */
    assert_int_equal(kind->next_note(input, INFINITY, &note, &at_s), STATUS_OK);
    assert_true(at_s == 1.5 && note.kind == NOTE_SIGHTING && note.group == GROUP_DELPHINID &&
                note.distance_m == 400);
    assert_int_equal((kind->skip)(input, 2.9), STATUS_OK);
    assert_int_equal(kind->next_note(input, INFINITY, &note, &at_s), STATUS_END);
    kind->close(input);
    kind->close(NULL);
}

static void settings_that_do_not_fit(void **state)
{
    (void)state;
    struct input_facts facts;
    assert_null(open_scene(96000, 4, &facts));
    assert_int_equal(problems.count, 2);
    assert_non_null(strstr(problems.lines.data, "is 48000 where the settings say 96000"));
    assert_non_null(strstr(problems.lines.data, "are 2 where the settings say 4 channels"));
    void *input = open_scene(48000, 2, &facts);
    assert_non_null(input);
    input_find("scene")->close(input);
}

/* Every scene of the project loads, can be rendered, and its notes and sounds lie within it. */
static void own_scenes_load(void **state)
{
    (void)state;
    static const char *const names[] = {"demonstration", "busy", "quiet"};
    for (int i = 0; i < 3; i++) {
        char name[128];
        struct scene_file file;
        struct render *render;
        float samples[FLOW_MAX_CHANNELS];
        snprintf(name, sizeof name, "config/scenes/%s.cfg", names[i]);
        if (scene_load(name, &problems, &file) != STATUS_OK)
            fail_msg("%s", problems.lines.data);
        assert_int_equal(render_create(&file.scene, &render), STATUS_OK);
        render_get(render, 1000, samples, 1);
        for (unsigned n = 0; n < file.n_notes; n++)
            assert_true(file.notes[n].at_s < file.scene.duration_s);
        for (uint32_t a = 0; a < file.scene.n_animals; a++)
            assert_true(file.scene.animals[a].start_s < file.scene.duration_s);
        for (uint32_t h = 0; h < file.scene.n_hammers; h++)
            assert_true(file.scene.hammers[h].start_s < file.scene.duration_s);
        render_destroy(render);
        scene_file_destroy(&file);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(sound_is_the_renderers),
        cmocka_unit_test(notes_come_in_order_and_in_time),
        cmocka_unit_test(settings_that_do_not_fit),
        cmocka_unit_test(own_scenes_load),
    };
    return cmocka_run_group_tests_name("input_scene", tests, begin, end);
}
