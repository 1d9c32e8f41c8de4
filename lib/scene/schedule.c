/* When each source gives its next sound; see schedule.h. Rhythms of animals: recipe.h and the comments here.
 */
#include "scene/schedule.h"
#include "base/units.h"
#include "scene/kind.h"
#include "scene/recipe.h"
#include <math.h>

#define BLOW_LENGTH_S 0.5
#define SNAP_LENGTH_S 0.002

static uint64_t mix(uint64_t a, uint64_t b)
{
    uint64_t x = (a + UINT64_C(0x9e3779b97f4a7c15)) ^ (b * UINT64_C(0xbf58476d1ce4e5b9));
    x = (x ^ (x >> 30)) * UINT64_C(0x94d049bb133111eb);
    return x ^ (x >> 31);
}

double emission_sound_s(const struct emission *emission)
{
    return fmax(emission->sound.length_s, emission->tail.length_s);
}

double emission_length_s(const struct emission *emission)
{
    double last_s = emission->n_pulses > 0 ? emission->pulse_s[emission->n_pulses - 1] : 0;
    return last_s + emission_sound_s(emission);
}

uint32_t schedule_count(const struct scene *scene)
{
    uint32_t n =
        scene->n_hammers + scene->n_airguns + scene->n_echosounders + (scene->shrimp.snaps_per_s > 0);
    for (uint32_t i = 0; i < scene->n_animals; i++)
        n += scene->animals[i].members;
    for (uint32_t i = 0; i < scene->n_emitters; i++)
        n += scene->emitters[i].members;
    return n;
}

static const struct scene_emitter *emitter_of(const struct schedule *schedule)
{
    return schedule->kind == EMISSION_CALL ? &schedule->scene->animals[schedule->source]
                                           : &schedule->scene->emitters[schedule->source];
}

static struct schedule *list_one(const struct scene *scene, enum emission_kind kind, uint32_t source,
                                 uint32_t member, struct scene_track track, struct schedule *out)
{
    *out =
        (struct schedule){.scene = scene, .kind = kind, .source = source, .member = member, .track = track};
    out->identity = mix(mix(scene->seed, kind + 1), (uint64_t)source << 16 | member);
    schedule_reset(out);
    return out + 1;
}

/* Members keep company, each at its own place. */
static struct scene_track member_track(const struct scene *scene, const struct scene_emitter *emitter,
                                       uint64_t salt, uint32_t source, uint32_t member)
{
    struct scene_track track = emitter->track;
    if (member > 0) {
        struct random random;
        random_reset(&random, mix(mix(scene->seed, salt), (uint64_t)source << 16 | member));
        track.at_start.x_m += emitter->spread_m * random_between(&random, -1, 1);
        track.at_start.y_m += emitter->spread_m * random_between(&random, -1, 1);
    }
    return track;
}

void schedule_list(const struct scene *scene, struct schedule *out)
{
    for (uint32_t i = 0; i < scene->n_animals; i++)
        for (uint32_t m = 0; m < scene->animals[i].members; m++)
            out = list_one(scene, EMISSION_CALL, i, m, member_track(scene, &scene->animals[i], 0x7472, i, m),
                           out);
    for (uint32_t i = 0; i < scene->n_emitters; i++)
        for (uint32_t m = 0; m < scene->emitters[i].members; m++)
            out = list_one(scene, EMISSION_SOUND, i, m,
                           member_track(scene, &scene->emitters[i], 0x656d, i, m), out);
    for (uint32_t i = 0; i < scene->n_hammers; i++)
        out = list_one(scene, EMISSION_BLOW, i, 0, scene->hammers[i].track, out);
    for (uint32_t i = 0; i < scene->n_airguns; i++)
        out = list_one(scene, EMISSION_SHOT, i, 0, scene->airguns[i].track, out);
    for (uint32_t i = 0; i < scene->n_echosounders; i++)
        out = list_one(scene, EMISSION_PING, i, 0, scene->echosounders[i].track, out);
    if (scene->shrimp.snaps_per_s > 0)
        list_one(scene, EMISSION_SNAP, 0, 0, (struct scene_track){0}, out);
}

void schedule_reset(struct schedule *schedule)
{
    const struct scene *scene = schedule->scene;
    struct random random;
    random_reset(&random, schedule->identity);
    schedule->number = 0;
    schedule->step = 0;
    schedule->phrases_left = schedule->in_phrase = schedule->phrase_length = 0;
    schedule->until_rest = 40;
    schedule->next_s = 0;
    switch (schedule->kind) {
    case EMISSION_CALL:
    case EMISSION_SOUND:
        schedule->next_s = emitter_of(schedule)->start_s;
        if (schedule->member > 0) /* the others fall in one by one */
            schedule->next_s += random_between(&random, 0, 2 * schedule_min_spacing_s(schedule) + 2);
        schedule->n_types = 3 + (uint32_t)(random_bits(&random) % 6);
        break;
    case EMISSION_BLOW:
        schedule->next_s = schedule->step_start_s = scene->hammers[schedule->source].start_s;
        break;
    case EMISSION_SHOT:
        schedule->next_s = scene->airguns[schedule->source].start_s;
        break;
    case EMISSION_PING:
        schedule->next_s = scene->echosounders[schedule->source].start_s;
        break;
    case EMISSION_SNAP:
        break;
    }
}

/* Humpback song (Payne and McVay 1971): 3 to 8 unit types; a phrase of 4 to 8 units is repeated 5 to 20
 * times, then another. */
static uint32_t next_unit(struct schedule *schedule, struct random *random)
{
    if (schedule->in_phrase == schedule->phrase_length) {
        schedule->in_phrase = 0;
        if (schedule->phrases_left == 0) {
            schedule->phrases_left = 5 + (uint32_t)(random_bits(random) % 16);
            schedule->phrase_length = 4 + (uint32_t)(random_bits(random) % 5);
            for (uint32_t i = 0; i < schedule->phrase_length; i++)
                schedule->phrase[i] = (uint32_t)(random_bits(random) % schedule->n_types);
        }
        schedule->phrases_left--;
    }
    return schedule->phrase[schedule->in_phrase++];
}

/* From one start to the next. */
static double spacing_s(struct schedule *schedule, struct kind_order *order, double length_s,
                        struct random *random)
{
    const struct scene_kind *kind = order->emitter->kind;
    if (kind->lasts)
        return kind->min_spacing_s;
    order->rests = --schedule->until_rest == 0;
    if (order->rests)
        schedule->until_rest = 40 + (uint32_t)(random_bits(random) % 20);
    if (isfinite(order->emitter->interval_s))
        return order->emitter->interval_s * (kind->is_machine ? 1 : random_between(random, 0.8, 1.2));
    return kind->spacing_s ? kind->spacing_s(order, length_s, random) : kind->min_spacing_s;
}

static bool next_sound(struct schedule *schedule, struct random *random, struct emission *out)
{
    const struct scene_emitter *emitter = emitter_of(schedule);
    if (schedule->next_s >= emitter->end_s)
        return false;
    struct kind_order order = {.emitter = emitter,
                               .rate_hz = schedule->scene->rate_hz,
                               .repertoire = schedule->identity,
                               .number = out->number,
                               .since_s = schedule->next_s - emitter->start_s};
    order.unit = emitter->kind->is_song ? next_unit(schedule, random) : 0;
    kind_make(&order, random, out);
    double next_s = spacing_s(schedule, &order, emission_length_s(out), random);
    schedule->next_s += fmax(next_s, schedule_min_spacing_s(schedule));
    return true;
}

/* Steps without blows are passed over. */
static bool find_step(struct schedule *schedule, const struct scene_hammer *hammer)
{
    while (schedule->step < hammer->n_steps) {
        const struct scene_step *step = &hammer->steps[schedule->step];
        double end_s = schedule->step_start_s + step->duration_s;
        if (isfinite(step->source_energy_level_db) && schedule->next_s < end_s)
            return true;
        schedule->step++;
        schedule->step_start_s = end_s;
        schedule->next_s = fmax(schedule->next_s, end_s);
    }
    return false;
}

static bool next_blow(struct schedule *schedule, struct random *random, struct emission *out)
{
    const struct scene_hammer *hammer = &schedule->scene->hammers[schedule->source];
    if (!find_step(schedule, hammer))
        return false;
    out->start_s = schedule->next_s;
    const struct scene_step *step = &hammer->steps[schedule->step];
    recipe_blow(schedule->scene->rate_hz, &out->sound);
    out->level_db = step->source_energy_level_db + hammer->level_spread_db * random_normal(random);
    out->amplitude = 1e-6 * units_amplitude_ratio(out->level_db);
    double spread = fmax(-0.2, fmin(0.2, hammer->interval_spread * random_normal(random)));
    schedule->next_s += step->blow_interval_s * exp(spread);
    return true;
}

static bool next_shot(struct schedule *schedule, struct emission *out)
{
    const struct scene_airguns *airguns = &schedule->scene->airguns[schedule->source];
    if (schedule->next_s >= airguns->end_s)
        return false;
    recipe_shot(schedule->scene->rate_hz, &out->sound);
    out->level_db = airguns->source_energy_level_db;
    if (airguns->late_burst_energy_level_db > 0 || airguns->reverberation_s > 0) {
        double burst_s = airguns->late_burst_energy_level_db > 0
                             ? units_power_ratio(airguns->late_burst_energy_level_db - out->level_db)
                             : 0;
        recipe_shot_tail(burst_s, airguns->reverberation_s, mix(schedule->identity, out->number), &out->tail);
        sound_limit_band(&out->tail, schedule->scene->rate_hz);
    }
    out->amplitude = 1e-6 * units_amplitude_ratio(out->level_db);
    schedule->next_s = airguns->start_s + (double)out->number * airguns->shot_interval_s;
    return true;
}

/* A machine's interval: no jitter to speak of. */
static bool next_ping(struct schedule *schedule, struct emission *out)
{
    const struct scene_echosounder *sounder = &schedule->scene->echosounders[schedule->source];
    if (schedule->next_s >= sounder->end_s)
        return false;
    recipe_ping(sounder->frequency_hz, sounder->ping_s, &out->sound);
    out->level_db = sounder->source_level_db;
    out->amplitude = 1e-6 * units_amplitude_ratio(out->level_db);
    schedule->next_s = sounder->start_s + (double)out->number * sounder->ping_interval_s;
    return true;
}

static bool next_snap(struct schedule *schedule, struct random *random, struct emission *out)
{
    const struct scene *scene = schedule->scene;
    const struct scene_place *near = &scene->hydrophones[0].place;
    recipe_snap(scene->rate_hz, random, &out->sound);
    double radius_m = scene->shrimp.radius_m * sqrt(random_between(random, 0.01, 1));
    double angle = random_between(random, 0, 6.283185307179586);
    out->track = (struct scene_track){
        .at_start = {near->x_m + radius_m * cos(angle), near->y_m + radius_m * sin(angle), near->z_m + 3}};
    out->level_db = scene->shrimp.source_level_db + 3 * random_normal(random);
    out->amplitude = 1e-6 * units_amplitude_ratio(out->level_db);
    schedule->next_s += (0.1 + 0.9 * random_exponential(random)) / scene->shrimp.snaps_per_s;
    return true;
}

bool schedule_next(struct schedule *schedule, struct emission *out)
{
    struct random random;
    random_reset(&random, mix(schedule->identity, schedule->number + 1));
    out->kind = schedule->kind;
    out->source = schedule->source + 1;
    out->member = schedule->member + 1;
    out->number = schedule->number + 1;
    out->start_s = schedule->next_s;
    out->track = schedule->track;
    out->n_pulses = 0;
    out->reach = REACH_SEA;
    out->tail.length_s = 0;
    bool more = false;
    switch (schedule->kind) {
    case EMISSION_CALL:
    case EMISSION_SOUND:
        more = next_sound(schedule, &random, out);
        break;
    case EMISSION_BLOW:
        more = next_blow(schedule, &random, out);
        break;
    case EMISSION_SHOT:
        more = next_shot(schedule, out);
        break;
    case EMISSION_PING:
        more = next_ping(schedule, out);
        break;
    case EMISSION_SNAP:
        more = next_snap(schedule, &random, out);
        break;
    }
    schedule->number += more;
    return more && out->start_s < schedule->scene->duration_s;
}

double schedule_max_length_s(const struct schedule *schedule)
{
    if (schedule->kind == EMISSION_PING)
        return schedule->scene->echosounders[schedule->source].ping_s;
    if (schedule->kind == EMISSION_SNAP)
        return SNAP_LENGTH_S;
    if (schedule->kind == EMISSION_SHOT)
        return BLOW_LENGTH_S + 1.02 * schedule->scene->airguns[schedule->source].reverberation_s;
    if (schedule->kind != EMISSION_CALL && schedule->kind != EMISSION_SOUND)
        return BLOW_LENGTH_S;
    const struct scene_emitter *animal = emitter_of(schedule);
    double length_s = animal->kind->max_length_s;
    if (animal->kind->length_s)
        return animal->kind->length_s(animal);
    if (animal->pulses > 0 && isfinite(animal->pulse_interval_s))
        length_s = 0.1 + 1.2 * animal->pulses * animal->pulse_interval_s;
    else if (animal->pulses > 0 || isfinite(animal->pulse_interval_s))
        length_s = fmax(length_s, SCENE_MAX_PULSES * 1.2 * fmax(1.0, animal->pulse_interval_s));
    return length_s;
}

double schedule_min_spacing_s(const struct schedule *schedule)
{
    const struct scene *scene = schedule->scene;
    double spacing_s = INFINITY;
    switch (schedule->kind) {
    case EMISSION_CALL:
    case EMISSION_SOUND: {
        const struct scene_emitter *emitter = emitter_of(schedule);
        bool stated = isfinite(emitter->interval_s) && !emitter->kind->lasts;
        return stated ? (emitter->kind->is_machine ? 1 : 0.8) * emitter->interval_s
                      : emitter->kind->min_spacing_s;
    }
    case EMISSION_BLOW: {
        const struct scene_hammer *hammer = &scene->hammers[schedule->source];
        for (uint32_t i = 0; i < hammer->n_steps; i++)
            if (isfinite(hammer->steps[i].source_energy_level_db))
                spacing_s = fmin(spacing_s, 0.8 * hammer->steps[i].blow_interval_s);
        return isfinite(spacing_s) ? spacing_s : 1;
    }
    case EMISSION_SHOT:
        return scene->airguns[schedule->source].shot_interval_s;
    case EMISSION_PING:
        return scene->echosounders[schedule->source].ping_interval_s;
    case EMISSION_SNAP:
        return 0.1 / scene->shrimp.snaps_per_s;
    }
    return spacing_s;
}
