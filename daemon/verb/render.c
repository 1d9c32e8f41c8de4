/* hushwatch render: writes a scene's sound to a WAV file and its truth to JSON. */
#include "scene/render.h"
#include "scene/truth.h"
#include "settings/scene.h"
#include "verb/verb.h"
#include <errno.h>
#include <fcntl.h>
#include <getopt.h>
#include <inttypes.h>
#include <math.h>
#include <sndfile.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define CHUNK_FRAMES 4096

static const char help[] =
    "usage: hushwatch render SCENE --out WAV --truth JSON\n\n"
    "Renders a scene (config/scenes/NAME.cfg; docs/scenes.md lists its keys) as fast as it can.\n"
    "  --out WAV     the sound: 32-bit float, 1.0 = full scale by each hydrophone's calibration\n"
    "  --truth JSON  what it holds: every call, blow, shot and ping, where, when, and how loud at each\n"
    "                hydrophone\n"
    "The same scene gives the same samples. Files that exist are not overwritten.\n"
    "Exit code: 0 good, 2 wrong use or a wrong scene, 3 a file could not be written.\n";

struct options {
    const char *scene, *out, *truth;
};

/* VERB_GOOD and a scene to render, or an exit code with *options untouched where there is none. */
static int read_options(int argc, char **argv, struct options *options, bool *out_asked_help)
{
    static const struct option known[] = {{"out", required_argument, NULL, 'o'},
                                          {"truth", required_argument, NULL, 't'},
                                          {"help", no_argument, NULL, 'h'},
                                          {NULL, 0, NULL, 0}};
    int option;
    optind = 1;
    while ((option = getopt_long(argc, argv, "", known, NULL)) != -1) {
        if (option == 'o')
            options->out = optarg;
        else if (option == 't')
            options->truth = optarg;
        else if (option == 'h')
            *out_asked_help = true;
        else
            return VERB_WRONG_USE;
    }
    if (*out_asked_help)
        return VERB_GOOD;
    if (optind + 1 == argc)
        options->scene = argv[optind];
    if (options->scene && options->out && options->truth)
        return VERB_GOOD;
    fprintf(stderr, "hushwatch render: needs one SCENE, --out WAV and --truth JSON; see --help\n");
    return VERB_WRONG_USE;
}

/* A new file, or an exit code. */
static int create_file(const char *path, int *out_file)
{
    *out_file = open(path, O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, 0644);
    if (*out_file >= 0)
        return VERB_GOOD;
    if (errno == EEXIST) {
        fprintf(stderr, "hushwatch render: %s exists and is not overwritten; choose another name\n", path);
        return VERB_WRONG_USE;
    }
    fprintf(stderr, "hushwatch render: %s cannot be written (%m)\n", path);
    return VERB_SYSTEM;
}

static int write_samples(const struct scene *scene, struct render *render, SNDFILE *sound, const char *path)
{
    float *samples = malloc((size_t)CHUNK_FRAMES * scene->n_hydrophones * sizeof *samples);
    uint64_t frames = (uint64_t)llround(scene->duration_s * scene->rate_hz);
    int code = samples ? VERB_GOOD : VERB_SYSTEM;
    for (uint64_t at = 0; at < frames && code == VERB_GOOD; at += CHUNK_FRAMES) {
        uint32_t n = frames - at < CHUNK_FRAMES ? (uint32_t)(frames - at) : CHUNK_FRAMES;
        render_get(render, at, samples, n);
        if (sf_writef_float(sound, samples, n) != n) {
            fprintf(stderr, "hushwatch render: %s could not be written to its end: %s\n", path,
                    sf_strerror(sound));
            code = VERB_SYSTEM;
        }
    }
    free(samples);
    return code;
}

/* RF64 where the file outgrows what WAV can say of itself, WAV where not. */
static int write_sound(const struct scene *scene, int file, const char *path)
{
    struct render *render;
    enum status status = render_create(scene, &render);
    if (status != STATUS_OK) {
        fprintf(
            stderr, "hushwatch render: %s\n",
            status == STATUS_NO_MEMORY
                ? "out of memory"
                : "a source has more than 512 sounds on their way at once; allowed: longer intervals or a "
                  "nearer source");
        close(file);
        return status == STATUS_NO_MEMORY ? VERB_SYSTEM : VERB_WRONG_USE;
    }
    SF_INFO info = {.samplerate = (int)lround(scene->rate_hz),
                    .channels = (int)scene->n_hydrophones,
                    .format = SF_FORMAT_RF64 | SF_FORMAT_FLOAT};
    SNDFILE *sound = sf_open_fd(file, SFM_WRITE, &info, SF_TRUE);
    int code = sound ? VERB_GOOD : VERB_SYSTEM;
    if (!sound) {
        fprintf(stderr, "hushwatch render: %s cannot be written: %s\n", path, sf_strerror(NULL));
        close(file);
    } else {
        sf_command(sound, SFC_RF64_AUTO_DOWNGRADE, NULL, SF_TRUE);
        code = write_samples(scene, render, sound, path);
        if (sf_close(sound) != 0 && code == VERB_GOOD) {
            fprintf(stderr, "hushwatch render: %s could not be finished\n", path);
            code = VERB_SYSTEM;
        }
    }
    render_destroy(render);
    return code;
}

static enum status put_text(void *context, const char *piece)
{
    return fputs(piece, context) >= 0 ? STATUS_OK : STATUS_SYSTEM;
}

static int write_truth(const struct scene *scene, int file, const char *path)
{
    FILE *out = fdopen(file, "w");
    if (!out) {
        close(file);
        return VERB_SYSTEM;
    }
    const struct truth_sink sink = {put_text, out};
    enum status status = truth_write(scene, &sink);
    if (fclose(out) != 0 && status == STATUS_OK)
        status = STATUS_SYSTEM;
    if (status != STATUS_OK)
        fprintf(stderr, "hushwatch render: %s could not be written (%s)\n", path, status_text(status));
    return status == STATUS_OK ? VERB_GOOD : VERB_SYSTEM;
}

/* What could not be finished is not left behind to be taken for good. */
static int write_both(const struct scene *scene, const struct options *options)
{
    int sound, truth;
    int code = create_file(options->out, &sound);
    if (code != VERB_GOOD)
        return code;
    code = create_file(options->truth, &truth);
    if (code != VERB_GOOD) {
        close(sound);
        unlink(options->out);
        return code;
    }
    code = write_sound(scene, sound, options->out);
    if (code == VERB_GOOD)
        code = write_truth(scene, truth, options->truth);
    else
        close(truth);
    if (code != VERB_GOOD) {
        unlink(options->out);
        unlink(options->truth);
        return code;
    }
    printf("sound: %s, %g s at %g Hz, %" PRIu32 " channels\n", options->out, scene->duration_s,
           scene->rate_hz, scene->n_hydrophones);
    printf("truth: %s\n", options->truth);
    return VERB_GOOD;
}

int verb_render(int argc, char **argv)
{
    struct options options = {0};
    bool asked_help = false;
    int code = read_options(argc, argv, &options, &asked_help);
    if (code != VERB_GOOD)
        return code;
    if (asked_help) {
        fputs(help, stdout);
        return VERB_GOOD;
    }
    struct scene_file *file = calloc(1, sizeof *file);
    struct problems problems = {0};
    enum status status = file ? scene_load(options.scene, &problems, file) : STATUS_NO_MEMORY;
    if (status == STATUS_OK)
        code = write_both(&file->scene, &options);
    else
        code = status == STATUS_NO_MEMORY ? VERB_SYSTEM : VERB_WRONG_USE;
    if (problems.count > 0)
        fputs(problems.lines.data, stderr);
    problems_destroy(&problems);
    scene_file_destroy(file);
    free(file);
    return code;
}
