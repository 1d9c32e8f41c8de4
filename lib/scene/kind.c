/* The table of kinds; see kind.h. */
#include "scene/kind.h"
#include "base/units.h"
#include <math.h>
#include <string.h>

/* A new sound: its row in a file of its own, its name here. */
#define KINDS(EACH)                                                                                          \
    EACH(kind_tone)                                                                                          \
    EACH(kind_humpback_song)                                                                                 \
    EACH(kind_fin_pulse)                                                                                     \
    EACH(kind_blue_moan)                                                                                     \
    EACH(kind_right_upcall)                                                                                  \
    EACH(kind_delphinid_whistle)                                                                             \
    EACH(kind_delphinid_clicks)                                                                              \
    EACH(kind_sperm_clicks)                                                                                  \
    EACH(kind_beaked_clicks)                                                                                 \
    EACH(kind_porpoise_clicks)

#define DECLARE(kind) extern const struct scene_kind kind;
#define ADDRESS(kind) &kind,

KINDS(DECLARE)

static const struct scene_kind *const kinds[] = {KINDS(ADDRESS)};

const struct scene_kind *scene_kind_at(unsigned n)
{
    return n < sizeof kinds / sizeof kinds[0] ? kinds[n] : NULL;
}

const struct scene_kind *scene_kind_find(const char *name)
{
    for (unsigned n = 0; n < sizeof kinds / sizeof kinds[0]; n++)
        if (strcmp(kinds[n]->name, name) == 0)
            return kinds[n];
    return NULL;
}

void kind_make(const struct kind_order *order, struct random *random, struct emission *out)
{
    const struct scene_kind *kind = order->emitter->kind;
    out->n_pulses = 0;
    out->reach = kind->reach;
    kind->make(order, random, out);
    sound_limit_band(&out->sound, order->rate_hz);
    if (out->tail.length_s > 0)
        sound_limit_band(&out->tail, order->rate_hz);
    out->level_db =
        isfinite(order->emitter->source_level_db) ? order->emitter->source_level_db : kind->source_level_db;
    out->amplitude = 1e-6 * units_amplitude_ratio(out->level_db);
}
