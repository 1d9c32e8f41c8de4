/* The simulator; see render.h. Sound is made tile by tile: noise, what every source has under way, ships'
 * lines. */
#include "scene/render.h"
#include "base/random.h"
#include "base/units.h"
#include "scene/noise.h"
#include "scene/path.h"
#include "scene/schedule.h"
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#define MAX_UNDER_WAY 512
#define TWO_PI 6.283185307179586476925

/* A source, and those of its emissions that are on their way through the sea. */
struct source {
    struct schedule schedule;
    bool ended;
    uint32_t capacity, n_under_way;
    struct emission *under_way; /* [capacity + 1]; the last place is for the next one */
};

struct render {
    struct scene scene;
    struct path_sea sea;
    struct noise *noise; /* NULL: none */
    uint32_t n_sources;
    struct source *sources;
    uint32_t tile_frames;
    uint64_t tile; /* what `samples` holds */
    bool has_tile;
    float *samples; /* [hydrophones][tile_frames], full-scale units */
    float *alike;   /* [tile_frames], Pa: what all hydrophones have at once */
};

static void reset_source(struct source *source)
{
    schedule_reset(&source->schedule);
    source->n_under_way = 0;
    source->ended = !schedule_next(&source->schedule, &source->under_way[source->capacity]);
}

/* The longest that a source's sound travels to any hydrophone, from either end of its track. */
static double max_travel_s(const struct render *render, const struct schedule *schedule)
{
    double range_m = 0, more_m = 0;
    struct scene_track track = schedule->track;
    if (schedule->kind == EMISSION_SNAP) {
        track.at_start = render->scene.hydrophones[0].place;
        more_m = render->scene.shrimp.radius_m + 10;
    }
    for (uint32_t i = 0; i < render->scene.n_hydrophones; i++)
        for (int end = 0; end < 2; end++) {
            struct scene_place place = scene_track_at(&track, end * render->scene.duration_s);
            range_m = fmax(range_m, path_range_m(&render->sea, &place, i, true));
        }
    return (range_m + more_m) / render->sea.speed_m_s;
}

static enum status make_source(const struct render *render, struct source *source)
{
    double tile_s = render->tile_frames / render->scene.rate_hz;
    double under_way_s =
        max_travel_s(render, &source->schedule) + schedule_max_length_s(&source->schedule) + 2 * tile_s;
    double capacity = ceil(under_way_s / schedule_min_spacing_s(&source->schedule)) + 1;
    if (!(capacity <= MAX_UNDER_WAY))
        return STATUS_BAD_ARGUMENT;
    source->capacity = (uint32_t)capacity;
    source->under_way = calloc(source->capacity + 1, sizeof *source->under_way);
    if (!source->under_way)
        return STATUS_NO_MEMORY;
    reset_source(source);
    return STATUS_OK;
}

static enum status make_sources(struct render *render)
{
    uint32_t n = schedule_count(&render->scene);
    struct schedule *schedules = calloc(n ? n : 1, sizeof *schedules);
    render->sources = calloc(n ? n : 1, sizeof *render->sources);
    enum status status = schedules && render->sources ? STATUS_OK : STATUS_NO_MEMORY;
    if (status == STATUS_OK) {
        schedule_list(&render->scene, schedules);
        render->n_sources = n;
    }
    for (uint32_t i = 0; i < n && status == STATUS_OK; i++) {
        render->sources[i].schedule = schedules[i];
        status = make_source(render, &render->sources[i]);
    }
    free(schedules);
    return status;
}

void render_destroy(struct render *render)
{
    if (!render)
        return;
    noise_destroy(render->noise);
    for (uint32_t i = 0; i < render->n_sources; i++)
        free(render->sources[i].under_way);
    free(render->sources);
    free(render->samples);
    free(render->alike);
    free(render);
}

static enum status build(struct render *render)
{
    const struct scene *scene = &render->scene;
    render->sea = path_sea_of(scene);
    render->tile_frames = noise_tile_frames(scene->rate_hz);
    render->samples = calloc((size_t)render->tile_frames * scene->n_hydrophones, sizeof *render->samples);
    render->alike = calloc(render->tile_frames, sizeof *render->alike);
    if (!render->samples || !render->alike)
        return STATUS_NO_MEMORY;
    enum status status = STATUS_OK;
    if (scene->sea.ambient)
        status = noise_create(scene->rate_hz, scene->n_hydrophones, scene->seed, scene->sea.wind_m_s,
                              scene->sea.shipping, &render->noise);
    return status == STATUS_OK ? make_sources(render) : status;
}

enum status render_create(const struct scene *scene, struct render **out)
{
    char problem[SCENE_TEXT_SIZE];
    if (scene_check(scene, 0, problem) != STATUS_OK)
        return STATUS_BAD_ARGUMENT;
    struct render *render = calloc(1, sizeof *render);
    if (!render)
        return STATUS_NO_MEMORY;
    render->scene = *scene;
    enum status status = build(render);
    if (status != STATUS_OK) {
        render_destroy(render);
        return status;
    }
    *out = render;
    return STATUS_OK;
}

static bool is_over(const struct render *render, const struct emission *emission, double time_s)
{
    for (uint32_t i = 0; i < render->scene.n_hydrophones; i++) {
        double start_s, end_s;
        path_heard(&render->sea, emission, i, &start_s, &end_s);
        if (end_s > time_s)
            return false;
    }
    return true;
}

/* Under way in a tile is what was given before its end and is not over before its start: the same list, in
 * the same order, however the tile was come to. */
static void update_source(const struct render *render, struct source *source, double start_s, double end_s)
{
    uint32_t kept = 0;
    for (uint32_t i = 0; i < source->n_under_way; i++) {
        if (is_over(render, &source->under_way[i], start_s))
            continue;
        if (kept != i)
            source->under_way[kept] = source->under_way[i];
        kept++;
    }
    source->n_under_way = kept;
    struct emission *next = &source->under_way[source->capacity];
    while (!source->ended && next->start_s < end_s) {
        if (!is_over(render, next, start_s) && source->n_under_way < source->capacity)
            source->under_way[source->n_under_way++] = *next;
        source->ended = !schedule_next(&source->schedule, next);
    }
}

/* A line's phase goes linearly over a tile, from and to its exact values, which gives Doppler shift. */
static void add_line(const struct render *render, const struct scene_ship *ship, double line_hz, double phase,
                     uint32_t hydrophone, bool by_surface, float *out)
{
    double rate_hz = render->scene.rate_hz, speed_m_s = render->sea.speed_m_s;
    double start_s = (double)(render->tile * render->tile_frames) / rate_hz;
    double tile_s = render->tile_frames / rate_hz;
    double range_m = path_retarded_range_m(&render->sea, &ship->track, hydrophone, by_surface, start_s);
    double end_m =
        path_retarded_range_m(&render->sea, &ship->track, hydrophone, by_surface, start_s + tile_s);
    double cycles = line_hz * (start_s - range_m / speed_m_s) + phase;
    double turn = TWO_PI * line_hz / rate_hz * (1 - (end_m - range_m) / speed_m_s / tile_s);
    double loss_db = range_m * absorption_db_m(&render->sea.absorption, line_hz);
    double peak_pa = 1.4142135623730951e-6 * units_amplitude_ratio(ship->source_level_db - loss_db);
    peak_pa *= by_surface ? -render->scene.sea.surface_reflection : 1;
    double angle = TWO_PI * (cycles - floor(cycles)), re = cos(angle), im = sin(angle);
    double turn_re = cos(turn), turn_im = sin(turn);
    for (uint32_t i = 0; i < render->tile_frames; i++) {
        double at_m = range_m + (end_m - range_m) * i / render->tile_frames;
        out[i] += (float)(peak_pa / at_m * im);
        double next = re * turn_re - im * turn_im;
        im = re * turn_im + im * turn_re;
        re = next;
    }
}

static void add_ships(const struct render *render, uint32_t hydrophone, float *out)
{
    const struct scene *scene = &render->scene;
    for (uint32_t s = 0; s < scene->n_ships; s++) {
        const struct scene_ship *ship = &scene->ships[s];
        struct random random;
        random_reset(&random, scene->seed * 977 + s);
        for (uint32_t k = 0; k < ship->n_lines; k++) {
            double phase = random_uniform(&random);
            add_line(render, ship, ship->line_hz[k], phase, hydrophone, false, out);
            if (scene->sea.surface_reflection > 0)
                add_line(render, ship, ship->line_hz[k], phase, hydrophone, true, out);
        }
    }
}

/* Pascals to full scale; a converter clips. */
static void convert(const struct calibration *calibration, float *samples, uint32_t n)
{
    float factor = (float)(1.0 / calibration_pa_per_unit(calibration));
    for (uint32_t i = 0; i < n; i++) {
        float value = samples[i] * factor;
        samples[i] = value > 1.0f ? 1.0f : value < -1.0f ? -1.0f : value;
    }
}

/* What is under way and comes by the sea and by each hydrophone's own way, or alike to all. */
static void add_under_way(const struct render *render, bool alike, uint32_t channel, float *out)
{
    for (uint32_t s = 0; s < render->n_sources; s++)
        for (uint32_t i = 0; i < render->sources[s].n_under_way; i++) {
            const struct emission *emission = &render->sources[s].under_way[i];
            if ((emission->reach == REACH_ALIKE) == alike)
                path_add(&render->sea, emission, channel, render->tile * render->tile_frames,
                         render->tile_frames, out);
        }
}

static void make_tile(struct render *render, uint64_t tile)
{
    uint32_t n = render->tile_frames;
    double start_s = (double)(tile * n) / render->scene.rate_hz;
    double end_s = (double)((tile + 1) * n) / render->scene.rate_hz;
    bool backwards = render->has_tile && tile < render->tile;
    render->tile = tile;
    render->has_tile = true;
    for (uint32_t s = 0; s < render->n_sources; s++) {
        if (backwards)
            reset_source(&render->sources[s]);
        update_source(render, &render->sources[s], start_s, end_s);
    }
    memset(render->alike, 0, n * sizeof *render->alike);
    add_under_way(render, true, 0, render->alike);
    for (uint32_t channel = 0; channel < render->scene.n_hydrophones; channel++) {
        float *out = render->samples + (size_t)channel * n;
        memcpy(out, render->alike, n * sizeof *out);
        if (render->noise)
            noise_add(render->noise, tile, channel, out);
        add_under_way(render, false, channel, out);
        add_ships(render, channel, out);
        convert(&render->scene.hydrophones[channel].calibration, out, n);
    }
}

void render_get(struct render *render, uint64_t first_frame, float *out, uint32_t n)
{
    uint32_t n_channels = render->scene.n_hydrophones;
    for (uint32_t done = 0; done < n;) {
        uint64_t tile = (first_frame + done) / render->tile_frames;
        uint32_t from = (uint32_t)((first_frame + done) % render->tile_frames);
        uint32_t count = render->tile_frames - from < n - done ? render->tile_frames - from : n - done;
        if (!render->has_tile || render->tile != tile)
            make_tile(render, tile);
        for (uint32_t channel = 0; channel < n_channels; channel++) {
            const float *samples = render->samples + (size_t)channel * render->tile_frames + from;
            for (uint32_t i = 0; i < count; i++)
                out[(size_t)(done + i) * n_channels + channel] = samples[i];
        }
        done += count;
    }
}
