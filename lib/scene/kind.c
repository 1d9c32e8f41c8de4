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
    EACH(kind_porpoise_clicks)                                                                               \
    EACH(kind_porpoise_buzz)                                                                                 \
    EACH(kind_delphinid_burst)                                                                               \
    EACH(kind_varied_whistle)                                                                                \
    EACH(kind_stepped_whistle)                                                                               \
    EACH(kind_killer_whistle)                                                                                \
    EACH(kind_pilot_whistle)                                                                                 \
    EACH(kind_beluga_whistle)                                                                                \
    EACH(kind_killer_call)                                                                                   \
    EACH(kind_sperm_creak)                                                                                   \
    EACH(kind_sperm_slow)                                                                                    \
    EACH(kind_sperm_coda)                                                                                    \
    EACH(kind_blainville_clicks)                                                                             \
    EACH(kind_right_gunshot)                                                                                 \
    EACH(kind_fin_song)                                                                                      \
    EACH(kind_fin_forty)                                                                                     \
    EACH(kind_blue_a)                                                                                        \
    EACH(kind_blue_d)                                                                                        \
    EACH(kind_blue_z)                                                                                        \
    EACH(kind_sei_downsweep)                                                                                 \
    EACH(kind_minke_slow)                                                                                    \
    EACH(kind_minke_fast)                                                                                    \
    EACH(kind_minke_boing)                                                                                   \
    EACH(kind_harbour_seal)                                                                                  \
    EACH(kind_bearded_seal)                                                                                  \
    EACH(kind_naval_sonar)                                                                                   \
    EACH(kind_hopping_modem)                                                                                 \
    EACH(kind_chirp_modem)                                                                                   \
    EACH(kind_janus)                                                                                         \
    EACH(kind_beacon)                                                                                        \
    EACH(kind_pinger)                                                                                        \
    EACH(kind_sweep_pinger)                                                                                  \
    EACH(kind_deterrent)                                                                                     \
    EACH(kind_charge)                                                                                        \
    EACH(kind_cavitation)                                                                                    \
    EACH(kind_rain)                                                                                          \
    EACH(kind_flow)                                                                                          \
    EACH(kind_thruster)                                                                                      \
    EACH(kind_strum)                                                                                         \
    EACH(kind_mains)                                                                                         \
    EACH(kind_supply)                                                                                        \
    EACH(kind_fish_hum)                                                                                      \
    EACH(kind_fish_grunts)                                                                                   \
    EACH(kind_fish_knocks)                                                                                   \
    EACH(kind_ice_cracks)                                                                                    \
    EACH(kind_ice_squeals)

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
