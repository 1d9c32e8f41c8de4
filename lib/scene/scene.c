/* What a scene is made of, and what makes one impossible; see scene.h. */
#include "scene/scene.h"
#include "scene/kind.h"
#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

void scene_reset(struct scene *scene)
{
    *scene = (struct scene){
        .seed = 1,
        .duration_s = 60,
        .rate_hz = 48000,
        .sea = {.temperature_c = 10,
                .salinity = 34,
                .ph = 8,
                .depth_m = 15,
                .latitude_deg = 55,
                .ambient = true,
                .wind_m_s = 4,
                .shipping = 0.3},
        .shrimp = {.source_level_db = 180, .radius_m = 60},
    };
}

struct scene_emitter scene_emitter_of(const char *name)
{
    struct scene_emitter emitter = {.kind = scene_kind_find(name),
                                    .track = {.at_start = {.x_m = 500, .z_m = 15}},
                                    .members = 1,
                                    .spread_m = 50,
                                    .end_s = INFINITY,
                                    .source_level_db = NAN,
                                    .interval_s = NAN,
                                    .pulse_interval_s = NAN};
    for (unsigned i = 0; emitter.kind && emitter.kind->settings[i].key; i++)
        emitter.settings[i] = emitter.kind->settings[i].usual;
    return emitter;
}

enum status scene_emitter_set(struct scene_emitter *emitter, const char *key, double value)
{
    for (unsigned i = 0; emitter->kind && emitter->kind->settings[i].key; i++) {
        const struct kind_setting *setting = &emitter->kind->settings[i];
        if (strcmp(setting->key, key) != 0)
            continue;
        if (!(value >= setting->low && value <= setting->high))
            return STATUS_OUT_OF_RANGE;
        emitter->settings[i] = value;
        return STATUS_OK;
    }
    return STATUS_NOT_FOUND;
}

struct scene_hammer scene_hammer_of(void)
{
    return (struct scene_hammer){
        .track = {.at_start = {.z_m = 10}}, .interval_spread = 0.01, .level_spread_db = 0.3};
}

struct scene_place scene_track_at(const struct scene_track *track, double time_s)
{
    double along_m = track->speed_m_s * time_s, course = track->course_deg * (3.141592653589793 / 180.0);
    struct scene_place place = track->at_start;
    place.x_m += along_m * cos(course);
    place.y_m += along_m * sin(course);
    return place;
}

/* Collects the n-th problem of those found. */
struct search {
    uint32_t left;
    bool found;
    char *out;
};

static void problem(struct search *search, bool wrong, const char *format, ...)
    __attribute__((format(printf, 3, 4)));
static void problem(struct search *search, bool wrong, const char *format, ...)
{
    if (!wrong || search->found)
        return;
    if (search->left > 0) {
        search->left--;
        return;
    }
    search->found = true;
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(search->out, SCENE_TEXT_SIZE, format, arguments);
    va_end(arguments);
}

static void check_hydrophones(const struct scene *scene, struct search *search)
{
    problem(search, scene->n_hydrophones < 1 || scene->n_hydrophones > FLOW_MAX_CHANNELS,
            "there are %u hydrophones; allowed: 1 to %d", scene->n_hydrophones, FLOW_MAX_CHANNELS);
    for (uint32_t i = 0; i < scene->n_hydrophones && i < FLOW_MAX_CHANNELS; i++)
        problem(
            search, !scene->hydrophones[i].calibration.known,
            "hydrophone %u has no calibration (sensitivity_db, gain_db, full_scale_v); without it a level is "
            "no sample",
            i + 1);
}

static bool too_near(const struct scene *scene, const struct scene_track *track)
{
    bool near = false;
    for (uint32_t i = 0; i < scene->n_hydrophones && i < FLOW_MAX_CHANNELS; i++) {
        struct scene_place h = scene->hydrophones[i].place, p = track->at_start;
        double vx = cos(track->course_deg * 0.017453292519943295) * track->speed_m_s;
        double vy = sin(track->course_deg * 0.017453292519943295) * track->speed_m_s;
        double dx = h.x_m - p.x_m, dy = h.y_m - p.y_m, dz = h.z_m - p.z_m;
        double v2 = vx * vx + vy * vy, t = v2 > 0 ? (dx * vx + dy * vy) / v2 : 0;
        t = fmin(scene->duration_s, fmax(0, t)); /* of the closest approach */
        dx -= vx * t;
        dy -= vy * t;
        near = near || dx * dx + dy * dy + dz * dz < 1;
    }
    return near;
}

/* Whatever a kind sounds at by its own settings must be in the band. */
static void check_settings(const struct scene *scene, const struct scene_emitter *emitter, const char *list,
                           uint32_t i, struct search *search)
{
    for (unsigned k = 0; emitter->kind->settings[k].key; k++) {
        const struct kind_setting *setting = &emitter->kind->settings[k];
        double value = emitter->settings[k], high = setting->high;
        if (strcmp(setting->key, "frequency_hz") == 0)
            high = fmin(high, 0.45 * scene->rate_hz);
        problem(search, !(value >= setting->low && value <= high),
                "%s %u: %s; allowed: %g to %g at this rate", list, i + 1, setting->key, setting->low, high);
    }
}

static void check_emitter(const struct scene *scene, const struct scene_emitter *emitter, const char *list,
                          uint32_t i, struct search *search)
{
    const struct scene_kind *kind = emitter->kind;
    problem(search, !kind, "%s %u: is of no kind", list, i + 1);
    if (!kind)
        return;
    problem(search, emitter->members < 1 || emitter->members > SCENE_MAX_MEMBERS,
            "%s %u: members; allowed: 1 to %d", list, i + 1, SCENE_MAX_MEMBERS);
    problem(search, scene->rate_hz < kind->min_rate_hz, "%s %u: %s needs a sampling rate of at least %g Hz",
            list, i + 1, kind->name, kind->min_rate_hz);
    check_settings(scene, emitter, list, i, search);
    const char *impossible = kind->problem ? kind->problem(emitter, scene->rate_hz) : NULL;
    problem(search, impossible != NULL, "%s %u: %s", list, i + 1, impossible ? impossible : "");
    problem(search,
            kind->lasts &&
                (isfinite(emitter->interval_s) || isfinite(emitter->pulse_interval_s) || emitter->pulses > 0),
            "%s %u: %s lasts, and has no interval_s, pulses or pulse_interval_s", list, i + 1, kind->name);
    problem(search, emitter->pulses > SCENE_MAX_PULSES, "%s %u: pulses; allowed: up to %d", list, i + 1,
            SCENE_MAX_PULSES);
    problem(search, emitter->interval_s <= 0 || emitter->pulse_interval_s <= 0,
            "%s %u: interval_s and pulse_interval_s; allowed: more than 0", list, i + 1);
    problem(search, kind->reach == REACH_SEA && too_near(scene, &emitter->track),
            "%s %u: comes nearer to a hydrophone than 1 m, where a source level means nothing", list, i + 1);
}

static void check_sources(const struct scene *scene, struct search *search)
{
    for (uint32_t i = 0; i < scene->n_hammers; i++) {
        const struct scene_hammer *hammer = &scene->hammers[i];
        problem(search, hammer->n_steps < 1, "hammer %u: has no steps; allowed: 1 to %d", i + 1,
                SCENE_MAX_STEPS);
        for (uint32_t k = 0; k < hammer->n_steps; k++)
            problem(
                search,
                !(hammer->steps[k].duration_s > 0) || (isfinite(hammer->steps[k].source_energy_level_db) &&
                                                       !(hammer->steps[k].blow_interval_s >= 0.2)),
                "hammer %u: a step needs duration_s more than 0 and blow_interval_s of at least 0.2", i + 1);
        problem(search, too_near(scene, &hammer->track), "hammer %u: nearer to a hydrophone than 1 m", i + 1);
    }
    for (uint32_t i = 0; i < scene->n_airguns; i++)
        problem(search,
                !(scene->airguns[i].shot_interval_s >= 1) || too_near(scene, &scene->airguns[i].track),
                "airguns %u: shot_interval_s of at least 1 s, and at least 1 m from every hydrophone", i + 1);
    for (uint32_t i = 0; i < scene->n_echosounders; i++) {
        const struct scene_echosounder *sounder = &scene->echosounders[i];
        problem(search, !(sounder->frequency_hz > 0 && sounder->frequency_hz <= 0.45 * scene->rate_hz),
                "echosounder %u: frequency_hz; allowed: up to %g at this rate", i + 1, 0.45 * scene->rate_hz);
        problem(search, !(sounder->ping_s > 0) || !(sounder->ping_interval_s >= fmax(0.02, sounder->ping_s)),
                "echosounder %u: ping_interval_s; allowed: at least ping_s and 0.02", i + 1);
        problem(search, too_near(scene, &sounder->track), "echosounder %u: nearer to a hydrophone than 1 m",
                i + 1);
    }
    for (uint32_t i = 0; i < scene->n_ships; i++)
        problem(search, too_near(scene, &scene->ships[i].track), "ship %u: nearer to a hydrophone than 1 m",
                i + 1);
    problem(search, scene->shrimp.snaps_per_s > 0 && !(scene->shrimp.radius_m >= 20),
            "shrimp: radius_m; allowed: at least 20");
}

enum status scene_check(const struct scene *scene, uint32_t n, char out_problem[SCENE_TEXT_SIZE])
{
    struct search search = {.left = n, .out = out_problem};
    problem(&search, !(scene->rate_hz >= 8000 && scene->rate_hz <= 1e6), "rate_hz; allowed: 8000 to 1000000");
    problem(&search, !(scene->duration_s > 0 && scene->duration_s <= 1e7),
            "duration_s; allowed: more than 0, up to 10000000");
    check_hydrophones(scene, &search);
    for (uint32_t i = 0; i < scene->n_animals; i++)
        check_emitter(scene, &scene->animals[i], "animal", i, &search);
    for (uint32_t i = 0; i < scene->n_emitters && i < SCENE_MAX_EMITTERS; i++)
        check_emitter(scene, &scene->emitters[i], "emitter", i, &search);
    check_sources(scene, &search);
    return search.found ? STATUS_OUT_OF_RANGE : STATUS_OK;
}
