/* What is truly there; see present.h. */
#include "bench/calls/present.h"
#include "base/units.h"
#include "scene/kind.h"
#include "scene/noise.h"
#include "scene/path.h"
#include "scene/schedule.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define CHUNK 4096
#define NEAR_S 0.1

static double exposure_of(const struct path_sea *sea, const struct emission *emission, double start_s,
                          double end_s)
{
    float chunk[CHUNK];
    double sum = 0, rate_hz = sea->scene->rate_hz;
    for (double at = fmax(0, floor(start_s * rate_hz)); at < end_s * rate_hz; at += CHUNK) {
        memset(chunk, 0, sizeof chunk);
        path_add(sea, emission, 0, (uint64_t)at, CHUNK, chunk);
        for (int i = 0; i < CHUNK; i++)
            sum += (double)chunk[i] * (double)chunk[i];
    }
    return sum / rate_hz;
}

static bool is_plain(const struct path_sea *sea, const struct emission *emission, double start_s,
                     double end_s)
{
    double low_hz, high_hz;
    sound_band(&emission->sound, &low_hz, &high_hz);
    double noise_db =
        noise_level_db(sqrt(fmax(1, low_hz) * high_hz), sea->scene->sea.wind_m_s, sea->scene->sea.shipping);
    return units_sel_db(exposure_of(sea, emission, start_s, end_s)) - noise_db >= PRESENT_PLAIN_DB;
}

static struct present_sound *add_sound(struct present *present)
{
    if (present->n == present->room) {
        uint32_t room = 2 * present->room + 64;
        void *larger = realloc(present->sounds, room * sizeof *present->sounds);
        if (!larger)
            return NULL;
        present->sounds = larger;
        present->room = room;
    }
    return &present->sounds[present->n++];
}

/* A source stays as loud as its first sound is; that one alone is measured. */
static bool list_source(const struct path_sea *sea, struct schedule *schedule, struct emission *emission,
                        struct present *out)
{
    bool plain = false, first = true;
    while (schedule_next(schedule, emission)) {
        struct present_sound *sound = add_sound(out);
        if (!sound)
            return false;
        path_heard(sea, emission, 0, &sound->start_s, &sound->end_s);
        if (first)
            plain = is_plain(sea, emission, sound->start_s, sound->end_s);
        first = false;
        sound->plain = plain;
        sound->recognised = false;
    }
    return true;
}

static void add_for_all_time(const struct scene *scene, struct present *out)
{
    struct present_sound *sound = add_sound(out);
    if (sound)
        *sound = (struct present_sound){.end_s = scene->duration_s, .plain = true};
    out->lasts = true;
}

bool present_list(const struct scene *scene, struct present *out)
{
    uint32_t n = schedule_count(scene);
    struct schedule *schedules = calloc(n ? n : 1, sizeof *schedules);
    struct emission *emission = calloc(1, sizeof *emission);
    const struct path_sea sea = path_sea_of(scene);
    *out = (struct present){.lasts = scene->n_emitters > 0 && scene->emitters[0].kind->lasts};
    bool good = schedules && emission;
    if (good)
        schedule_list(scene, schedules);
    if (good && (scene->n_ships > 0 || scene->shrimp.snaps_per_s > 0))
        add_for_all_time(scene, out);
    for (uint32_t i = 0; good && i < n; i++)
        if (schedules[i].kind != EMISSION_SNAP)
            good = list_source(&sea, &schedules[i], emission, out);
    free(schedules);
    free(emission);
    return good;
}

void present_free(struct present *present)
{
    free(present->sounds);
    *present = (struct present){0};
}

static void account_for(struct present *present, double start_s, double end_s, uint32_t n)
{
    for (uint32_t i = 0; i < present->n && n > 0; i++) {
        struct present_sound *sound = &present->sounds[i];
        if (sound->recognised || sound->start_s > end_s + NEAR_S || sound->end_s < start_s - NEAR_S)
            continue;
        sound->recognised = true;
        n--;
    }
}

static bool is_of(const struct chain *chain, const struct chain_call *call, const char *class_names)
{
    return strstr(class_names, chain->catalogue->classes[call->class_index].name) != NULL;
}

/* Seconds, in steps of one. */
static struct present_count compare_lasting(const struct present *present, const struct chain *chain,
                                            const char *class_names)
{
    struct present_count count = {0, 0};
    double last_s = 0;
    for (uint32_t i = 0; i < present->n; i++)
        last_s = present->sounds[i].plain ? fmax(last_s, present->sounds[i].end_s) : last_s;
    for (double t = 0.5; t < last_s; t++) {
        bool covered = false;
        for (uint32_t i = 0; i < chain->n_calls && !covered; i++)
            covered = chain->calls[i].start_s <= t && chain->calls[i].end_s >= t &&
                      is_of(chain, &chain->calls[i], class_names);
        count.present++;
        count.recognised += covered;
    }
    return count;
}

struct present_count present_compare(struct present *present, const struct chain *chain,
                                     const char *class_names)
{
    struct present_count count = {0, 0};
    if (present->lasts)
        return compare_lasting(present, chain, class_names);
    for (uint32_t i = 0; i < chain->n_calls; i++) {
        const struct chain_call *call = &chain->calls[i];
        uint32_t n = call->n_sounds > call->n_pulses ? call->n_sounds : call->n_pulses;
        if (is_of(chain, call, class_names))
            account_for(present, call->start_s, call->end_s, n > 0 ? n : 1);
    }
    for (uint32_t i = 0; strcmp(class_names, "impulse") == 0 && i < chain->n_impulses; i++)
        account_for(present, chain->impulses_s[i], chain->impulses_s[i], 1);
    for (uint32_t i = 0; i < present->n; i++) {
        count.present += present->sounds[i].plain;
        count.recognised += present->sounds[i].plain && present->sounds[i].recognised;
    }
    return count;
}
