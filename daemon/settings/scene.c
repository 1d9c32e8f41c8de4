/* Scene files; see scene.h. Ranges that depend on each other are scene_check's. */
#include "settings/scene.h"
#include "scene/kind.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define FAR_M 1e6
#define LONG_S 1e7
#define MAX_KINDS 96

static void read_place(struct group_reader *group, struct scene_place *place)
{
    group_number(group, "x_m", READER_OPTIONAL, -FAR_M, FAR_M, &place->x_m);
    group_number(group, "y_m", READER_OPTIONAL, -FAR_M, FAR_M, &place->y_m);
    group_number(group, "z_m", READER_OPTIONAL, 0, 11000, &place->z_m);
}

static void read_track(struct group_reader *group, struct scene_track *track)
{
    read_place(group, &track->at_start);
    group_number(group, "course_deg", READER_OPTIONAL, 0, 360, &track->course_deg);
    group_number(group, "speed_m_s", READER_OPTIONAL, 0, 30, &track->speed_m_s);
}

static void read_times(struct group_reader *group, double *start_s, double *end_s)
{
    group_number(group, "start_s", READER_OPTIONAL, 0, LONG_S, start_s);
    group_number(group, "end_s", READER_OPTIONAL, 0, LONG_S, end_s);
}

static void read_count(struct group_reader *group, const char *key, uint32_t max, uint32_t *count)
{
    double number = *count;
    if (group_number(group, key, READER_OPTIONAL, 1, max, &number))
        *count = (uint32_t)number;
}

static void read_hydrophone(struct group_reader *group, void *out)
{
    struct scene_hydrophone *hydrophone = out;
    hydrophone->place.z_m = 10;
    read_place(group, &hydrophone->place);
    struct calibration *calibration = &hydrophone->calibration;
    calibration->role = ROLE_BOTH;
    calibration->self_noise_db = calibration->expected_peak_db = NAN;
    bool sensitivity =
        group_number(group, "sensitivity_db", READER_REQUIRED, -260, -120, &calibration->sensitivity_db);
    bool gain = group_number(group, "gain_db", READER_REQUIRED, -60, 120, &calibration->gain_db);
    bool volts = group_number(group, "full_scale_v", READER_REQUIRED, 1e-3, 100, &calibration->full_scale_v);
    calibration->known = sensitivity && gain && volts;
}

/* A kind by its name; the kind's own settings by their keys. */
static void read_emitter(struct group_reader *group, const char *key, bool animals, const char *usual,
                         struct scene_emitter *emitter)
{
    const char *names[MAX_KINDS];
    unsigned n = 0, chosen = 0;
    const struct scene_kind *kind;
    for (unsigned i = 0; (kind = scene_kind_at(i)) != NULL && n < MAX_KINDS; i++)
        if (kind->is_animal == animals)
            names[n++] = kind->name;
    bool known = group_word(group, key, READER_REQUIRED, names, n, &chosen);
    *emitter = scene_emitter_of(known ? names[chosen] : usual);
    read_track(group, &emitter->track);
    read_count(group, "members", SCENE_MAX_MEMBERS, &emitter->members);
    group_number(group, "spread_m", READER_OPTIONAL, 0, FAR_M, &emitter->spread_m);
    read_times(group, &emitter->start_s, &emitter->end_s);
    group_number(group, "source_level_db", READER_OPTIONAL, 20, 280, &emitter->source_level_db);
    group_number(group, "interval_s", READER_OPTIONAL, 0.01, LONG_S, &emitter->interval_s);
    group_number(group, "pulse_interval_s", READER_OPTIONAL, 0.001, 100, &emitter->pulse_interval_s);
    read_count(group, "pulses", SCENE_MAX_PULSES, &emitter->pulses);
    for (unsigned i = 0; emitter->kind && emitter->kind->settings[i].key; i++) {
        const struct kind_setting *setting = &emitter->kind->settings[i];
        group_number(group, setting->key, READER_OPTIONAL, setting->low, setting->high,
                     &emitter->settings[i]);
    }
}

static void read_animal(struct group_reader *group, void *out)
{
    read_emitter(group, "voice", true, "tone", out);
}

static void read_other(struct group_reader *group, void *out)
{
    read_emitter(group, "kind", false, "", out);
}

static void read_step(struct group_reader *group, void *out)
{
    struct scene_step *step = out;
    step->source_energy_level_db = step->blow_interval_s = NAN;
    group_number(group, "duration_s", READER_REQUIRED, 0.1, LONG_S, &step->duration_s);
    group_number(group, "source_energy_level_db", READER_OPTIONAL, 100, 260, &step->source_energy_level_db);
    group_number(group, "blow_interval_s", isfinite(step->source_energy_level_db), 0.2, 3600,
                 &step->blow_interval_s);
}

/* A list of groups into an array: how many were read. */
static uint32_t read_list(struct group_reader *group, const char *key, uint32_t max, void *array, size_t size,
                          void (*read)(struct group_reader *group, void *out))
{
    unsigned n = group_count_to(group, key, READER_OPTIONAL, max);
    for (unsigned i = 0; i < n; i++) {
        struct group_reader item;
        group_at(group, key, i, &item);
        read(&item, (char *)array + i * size);
        group_done(&item);
    }
    return n;
}

static void read_hammer(struct group_reader *group, void *out)
{
    struct scene_hammer *hammer = out;
    *hammer = scene_hammer_of();
    read_track(group, &hammer->track);
    group_number(group, "start_s", READER_REQUIRED, 0, LONG_S, &hammer->start_s);
    group_number(group, "interval_spread", READER_OPTIONAL, 0, 0.2, &hammer->interval_spread);
    group_number(group, "level_spread_db", READER_OPTIONAL, 0, 10, &hammer->level_spread_db);
    hammer->n_steps =
        read_list(group, "steps", SCENE_MAX_STEPS, hammer->steps, sizeof hammer->steps[0], read_step);
}

static void read_airguns(struct group_reader *group, void *out)
{
    struct scene_airguns *airguns = out;
    *airguns = (struct scene_airguns){.track = {.at_start = {.z_m = 6}}, .end_s = INFINITY};
    read_track(group, &airguns->track);
    read_times(group, &airguns->start_s, &airguns->end_s);
    group_number(group, "shot_interval_s", READER_REQUIRED, 1, 3600, &airguns->shot_interval_s);
    group_number(group, "source_energy_level_db", READER_REQUIRED, 100, 260,
                 &airguns->source_energy_level_db);
    group_number(group, "late_burst_energy_level_db", READER_OPTIONAL, 100, 240,
                 &airguns->late_burst_energy_level_db);
    group_number(group, "reverberation_s", READER_OPTIONAL, 0, 30, &airguns->reverberation_s);
}

static void read_echosounder(struct group_reader *group, void *out)
{
    struct scene_echosounder *sounder = out;
    *sounder = (struct scene_echosounder){.track = {.at_start = {.z_m = 3}}, .end_s = INFINITY};
    read_track(group, &sounder->track);
    read_times(group, &sounder->start_s, &sounder->end_s);
    group_number(group, "frequency_hz", READER_REQUIRED, 100, 500000, &sounder->frequency_hz);
    group_number(group, "ping_s", READER_REQUIRED, 1e-5, 10, &sounder->ping_s);
    group_number(group, "ping_interval_s", READER_REQUIRED, 0.02, 3600, &sounder->ping_interval_s);
    group_number(group, "source_level_db", READER_REQUIRED, 60, 260, &sounder->source_level_db);
}

static void read_ship(struct group_reader *group, void *out)
{
    struct scene_ship *ship = out;
    *ship = (struct scene_ship){.track = {.at_start = {.x_m = 500, .z_m = 4}}};
    read_track(group, &ship->track);
    ship->n_lines =
        group_numbers(group, "lines_hz", READER_REQUIRED, 1, 20000, ship->line_hz, SCENE_MAX_LINES);
    group_number(group, "source_level_db", READER_REQUIRED, 60, 220, &ship->source_level_db);
}

static void read_sea(struct group_reader *root, struct scene_sea *sea)
{
    struct group_reader group;
    group_child(root, "sea", READER_OPTIONAL, &group);
    group_number(&group, "temperature_c", READER_OPTIONAL, -1, 30, &sea->temperature_c);
    group_number(&group, "salinity", READER_OPTIONAL, 0, 42, &sea->salinity);
    group_number(&group, "ph", READER_OPTIONAL, 7.5, 8.5, &sea->ph);
    group_number(&group, "depth_m", READER_OPTIONAL, 0, 3500, &sea->depth_m);
    group_number(&group, "latitude_deg", READER_OPTIONAL, -90, 90, &sea->latitude_deg);
    group_flag(&group, "ambient", READER_OPTIONAL, &sea->ambient);
    group_number(&group, "wind_m_s", READER_OPTIONAL, 0, 40, &sea->wind_m_s);
    group_number(&group, "shipping", READER_OPTIONAL, 0, 1, &sea->shipping);
    group_number(&group, "surface_reflection", READER_OPTIONAL, 0, 1, &sea->surface_reflection);
    group_done(&group);
}

static void read_shrimp(struct group_reader *root, struct scene_shrimp *shrimp)
{
    struct group_reader group;
    group_child(root, "shrimp", READER_OPTIONAL, &group);
    group_number(&group, "snaps_per_s", READER_OPTIONAL, 0, 100, &shrimp->snaps_per_s);
    group_number(&group, "source_level_db", READER_OPTIONAL, 100, 220, &shrimp->source_level_db);
    group_number(&group, "radius_m", READER_OPTIONAL, 20, 1000, &shrimp->radius_m);
    group_done(&group);
}

static void read_scene(struct group_reader *root, struct scene *scene)
{
    scene_reset(scene);
    double seed = (double)scene->seed;
    group_number(root, "seed", READER_OPTIONAL, 0, 2147483647, &seed);
    scene->seed = (uint64_t)seed;
    group_number(root, "duration_s", READER_REQUIRED, 0.1, LONG_S, &scene->duration_s);
    group_number(root, "rate_hz", READER_REQUIRED, 8000, 1e6, &scene->rate_hz);
    read_sea(root, &scene->sea);
    scene->n_hydrophones = read_list(root, "hydrophones", FLOW_MAX_CHANNELS, scene->hydrophones,
                                     sizeof scene->hydrophones[0], read_hydrophone);
    scene->n_animals =
        read_list(root, "animals", SCENE_MAX_ANIMALS, scene->animals, sizeof scene->animals[0], read_animal);
    scene->n_emitters = read_list(root, "emitters", SCENE_MAX_EMITTERS, scene->emitters,
                                  sizeof scene->emitters[0], read_other);
    scene->n_hammers =
        read_list(root, "hammers", SCENE_MAX_HAMMERS, scene->hammers, sizeof scene->hammers[0], read_hammer);
    scene->n_airguns =
        read_list(root, "airguns", SCENE_MAX_AIRGUNS, scene->airguns, sizeof scene->airguns[0], read_airguns);
    scene->n_echosounders = read_list(root, "echosounders", SCENE_MAX_ECHOSOUNDERS, scene->echosounders,
                                      sizeof scene->echosounders[0], read_echosounder);
    scene->n_ships =
        read_list(root, "ships", SCENE_MAX_SHIPS, scene->ships, sizeof scene->ships[0], read_ship);
    read_shrimp(root, &scene->shrimp);
}

enum status scene_load(const char *path, struct problems *problems, struct scene_file *out)
{
    struct reader reader;
    struct scene_file file = {0};
    unsigned before = problems->count;
    enum status status = reader_open(&reader, path, problems, NULL);
    if (status == STATUS_OK) {
        struct group_reader root = reader_root(&reader);
        read_scene(&root, &file.scene);
        enum status notes = notes_read(&root, "notes", &file.notes, &file.n_notes);
        group_done(&root);
        char problem[SCENE_TEXT_SIZE];
        bool shape_is_good = problems->count == before;
        for (uint32_t n = 0; shape_is_good && scene_check(&file.scene, n, problem) != STATUS_OK; n++)
            problems_add(problems, path, 0, "", "%s", problem);
        status = notes == STATUS_NO_MEMORY   ? notes
                 : problems->count != before ? STATUS_BAD_FORMAT
                                             : STATUS_OK;
    }
    reader_close(&reader);
    if (status == STATUS_OK)
        *out = file;
    else
        scene_file_destroy(&file);
    return status;
}

void scene_file_destroy(struct scene_file *file)
{
    if (!file)
        return;
    free(file->notes);
    file->notes = NULL;
    file->n_notes = 0;
}
