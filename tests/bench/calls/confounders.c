/* One sound that is no animal's by itself, through listen and watch: every call it makes is false, and so is
 * every contact. Each stretch of at most 20 min is a sea of its own, with ranges and rhythms drawn anew.
 * Levels and rhythms are of the order that is common practice (no source), those of shrimp as in scene. */
#include "base/random.h"
#include "bench/calls/match.h"
#include "bench/calls/present.h"
#include "scene/kind.h"
#include "scene/render.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#define PIECE 4096

/* At a drawn distance and direction; the hydrophone is at the origin. */
static struct scene_track somewhere(struct random *random, double near_m, double far_m, double depth_m,
                                    double speed_m_s)
{
    double range_m = near_m * pow(far_m / near_m, random_uniform(random));
    double angle = random_between(random, 0, 2 * M_PI);
    return (struct scene_track){.at_start = {range_m * cos(angle), range_m * sin(angle), depth_m},
                                .course_deg = random_between(random, 0, 360),
                                .speed_m_s = speed_m_s};
}

static void fill_nothing(struct scene *scene, struct random *random)
{
    scene->sea.wind_m_s = random_between(random, 2, 12);
    scene->sea.shipping = random_between(random, 0, 1);
}

static void fill_hammer(struct scene *scene, struct random *random)
{
    struct scene_hammer *hammer = &scene->hammers[scene->n_hammers++];
    *hammer = scene_hammer_of();
    hammer->track = somewhere(random, 300, 5000, 10, 0);
    hammer->n_steps = 1;
    hammer->steps[0] = (struct scene_step){.duration_s = scene->duration_s,
                                           .blow_interval_s = random_between(random, 1, 3),
                                           .source_energy_level_db = random_between(random, 190, 210)};
}

static void fill_airguns(struct scene *scene, struct random *random)
{
    scene->airguns[scene->n_airguns++] =
        (struct scene_airguns){.track = somewhere(random, 300, 10000, 6, 0),
                               .end_s = INFINITY,
                               .shot_interval_s = random_between(random, 6, 20),
                               .source_energy_level_db = random_between(random, 215, 230)};
}

static void add_echosounder(struct scene *scene, struct random *random, double frequency_hz)
{
    scene->echosounders[scene->n_echosounders++] =
        (struct scene_echosounder){.track = somewhere(random, 100, 3000, 3, 0),
                                   .end_s = INFINITY,
                                   .frequency_hz = frequency_hz,
                                   .ping_s = 1e-3 * pow(8, random_uniform(random)),
                                   .ping_interval_s = 0.1 * pow(20, random_uniform(random)),
                                   .source_level_db = random_between(random, 180, 205)};
}

static void fill_echosounder_low(struct scene *scene, struct random *random)
{
    add_echosounder(scene, random, random_uniform(random) < 0.5 ? 12000 : 18000);
}

static void fill_echosounder_middle(struct scene *scene, struct random *random)
{
    add_echosounder(scene, random, random_uniform(random) < 0.5 ? 38000 : 50000);
}

static void fill_echosounder_high(struct scene *scene, struct random *random)
{
    add_echosounder(scene, random, 120000);
}

static void fill_ship(struct scene *scene, struct random *random)
{
    struct scene_ship *ship = &scene->ships[scene->n_ships++];
    *ship = (struct scene_ship){.track = somewhere(random, 200, 3000, 4, random_between(random, 2, 9)),
                                .n_lines = 12,
                                .source_level_db = random_between(random, 130, 160)};
    double blade_hz = random_between(random, 6, 20);
    for (uint32_t k = 0; k < 6; k++)
        ship->line_hz[k] = blade_hz * (k + 1);
    for (uint32_t k = 6; k < 12; k++)
        ship->line_hz[k] = random_between(random, 50, 3000);
    scene->sea.shipping = random_between(random, 0.5, 1);
}

static void fill_shrimp(struct scene *scene, struct random *random)
{
    scene->shrimp.snaps_per_s = random_between(random, 2, 25);
    scene->shrimp.source_level_db = random_between(random, 165, 190);
}

/* The lowest rate that carries the sound and the calls that it could be taken for. What is heard alike on all
 * hydrophones, or on none but one, is told by a second one. */
static const struct confounder {
    const char *name;
    double rate_hz;
    const char *heard_as; /* class or classes; "impulse"; NULL: none has it yet */
    void (*fill)(struct scene *scene, struct random *random);
    double near_m, far_m; /* of an emitter of that kind */
    uint32_t n_channels;  /* 0: 1 */
} confounders[] = {
    {"the sea alone", 48000, NULL, fill_nothing, 0, 0, 0},
    {"hammer", 48000, "impulse", fill_hammer, 0, 0, 0},
    {"airguns", 48000, "impulse", fill_airguns, 0, 0, 0},
    {"ship's lines", 16000, "ship line", fill_ship, 0, 0, 0},
    {"echosounder 12 or 18 kHz", 48000, "echosounder or beacon", fill_echosounder_low, 0, 0, 0},
    {"echosounder 38 or 50 kHz", 128000, "echosounder ping", fill_echosounder_middle, 0, 0, 0},
    {"echosounder 120 kHz", 384000, "echosounder ping", fill_echosounder_high, 0, 0, 0},
    {"snapping shrimp", 384000, "snapping shrimp", fill_shrimp, 0, 0, 0},
    {"naval sonar", 48000, "sonar ping", NULL, 2000, 20000, 0},
    {"hopping modem", 48000, "acoustic modem", NULL, 200, 4000, 0},
    {"chirp modem", 48000, "acoustic modem", NULL, 200, 4000, 0},
    {"janus modem", 48000, "acoustic modem", NULL, 200, 4000, 0},
    {"beacon", 96000, "beacon", NULL, 100, 2000, 0},
    {"net pinger", 48000, "net pinger", NULL, 50, 1000, 0},
    {"sweeping net pinger", 384000, "net pinger", NULL, 50, 1000, 0},
    {"deterrent", 384000, "deterrent device", NULL, 100, 2000, 0},
    {"charge", 48000, "charge", NULL, 500, 8000, 0},
    {"ship cavitation", 48000, "ship cavitation", NULL, 200, 3000, 0},
    {"rain", 96000, "rain", NULL, 0, 0, 0},
    {"flow noise", 8000, "flow noise", NULL, 0, 0, 2},
    {"thruster", 48000, "ship line", NULL, 100, 2000, 0},
    {"strum", 8000, "ship line", NULL, 0, 0, 0},
    {"mains pick-up", 8000, "electrical pick-up", NULL, 0, 0, 2},
    {"supply pick-up", 384000, "electrical pick-up", NULL, 0, 0, 2},
    {"fish hum", 8000, "fish hum", NULL, 3, 100, 0},
    {"fish grunts", 48000, "fish grunt", NULL, 3, 100, 0},
    {"fish knocks", 48000, NULL, NULL, 3, 100, 0},
    {"ice cracks", 48000, NULL, NULL, 200, 5000, 0},
    {"ice squeals", 16000, NULL, NULL, 200, 5000, 0}};

/* Levels within 6 dB of the usual, and frequencies of what lasts (of its first setting) within a third of an
 * octave: no two seas alike. */
void calls_confounder_fill(uint32_t number, struct scene *scene, struct random *random)
{
    const struct confounder *confounder = &confounders[number];
    if (confounder->fill) {
        confounder->fill(scene, random);
        return;
    }
    struct scene_emitter *emitter = &scene->emitters[scene->n_emitters++];
    *emitter = scene_emitter_of(confounder->name);
    const struct scene_kind *kind = emitter->kind;
    emitter->track = somewhere(random, fmax(1, confounder->near_m), fmax(1.1, confounder->far_m), 8, 0);
    emitter->source_level_db = kind->source_level_db + random_between(random, -6, 6);
    double factor = pow(2, random_between(random, -1.0 / 3, 1.0 / 3));
    if (kind->lasts && kind->settings[0].key)
        emitter->settings[0] =
            fmin(kind->settings[0].high, fmax(kind->settings[0].low, factor * emitter->settings[0]));
}

uint32_t calls_confounders_count(void)
{
    return sizeof confounders / sizeof confounders[0];
}

double calls_confounder_rate(uint32_t number)
{
    return confounders[number].rate_hz;
}

const char *calls_confounder_name(uint32_t number)
{
    return confounders[number].name;
}

struct counts {
    uint32_t n_look, n_act;
    uint32_t by_class[CATALOGUE_MAX_CLASSES];
    struct present_count recognised;
    bool lasts;
    json_t *false_calls, *judged;
    double render_s, listen_s; /* of processor time */
};

static double processor_s(void)
{
    struct timespec now;
    clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &now);
    return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

static void describe(const struct confounder *confounder, uint64_t seed, double seconds, struct scene *out)
{
    struct random random;
    random_reset(&random, seed);
    scene_reset(out);
    out->seed = seed & 0x7fffffff;
    out->rate_hz = confounder->rate_hz;
    out->duration_s = seconds;
    out->n_hydrophones = confounder->n_channels > 0 ? confounder->n_channels : 1;
    for (uint32_t i = 0; i < out->n_hydrophones; i++)
        out->hydrophones[i] = chain_hydrophone(i);
    calls_confounder_fill((uint32_t)(confounder - confounders), out, &random);
}

/* Since the last impulse that began before the call did; NAN: none. */
static double since_impulse_s(const struct chain *chain, double start_s)
{
    double since_s = NAN;
    for (uint32_t i = 0; i < chain->n_impulses; i++)
        if (chain->impulses_s[i] <= start_s)
            since_s = fmin(isnan(since_s) ? INFINITY : since_s, start_s - chain->impulses_s[i]);
    return since_s;
}

/* Every call that is taken for an animal's: which sea, and where in it. */
static void list_false(const struct chain *chain, uint64_t seed, json_t *out)
{
    for (uint32_t i = 0; i < chain->n_calls; i++) {
        const struct chain_call *call = &chain->calls[i];
        if (call->n_sounds == 0)
            json_array_append_new(out, json_pack("[I, s, o, o, o, o, o, o]", (json_int_t)seed,
                                                 chain->catalogue->classes[call->class_index].name,
                                                 calls_number(call->start_s), calls_number(call->end_s),
                                                 calls_number(call->low_hz), calls_number(call->high_hz),
                                                 calls_number(call->snr_db),
                                                 calls_number(since_impulse_s(chain, call->start_s))));
    }
}

static bool count(const struct confounder *confounder, const struct scene *scene, const struct chain *chain,
                  struct counts *counts)
{
    struct present present;
    counts->n_look += chain_count_contacts(chain, GRADE_LOOK);
    counts->n_act += chain_count_contacts(chain, GRADE_ACT);
    for (uint32_t i = 0; i < chain->n_calls; i++)
        counts->by_class[chain->calls[i].class_index]++;
    if (!confounder->heard_as)
        return true;
    bool good = present_list(scene, &present);
    if (good) {
        struct present_count more = present_compare(&present, chain, confounder->heard_as);
        counts->recognised.present += more.present;
        counts->recognised.recognised += more.recognised;
        counts->lasts = present.lasts;
    }
    present_free(&present);
    return good;
}

static bool run_stretch(const struct catalogue *catalogue, const struct confounder *confounder, uint64_t seed,
                        double seconds, struct counts *counts)
{
    static struct scene scene;
    static struct chain chain;
    static float frames[2 * PIECE];
    struct render *render;
    describe(confounder, seed, seconds, &scene);
    if (!chain_create(&chain, catalogue, scene.rate_hz, scene.n_hydrophones, false) ||
        render_create(&scene, &render) != STATUS_OK)
        return false;
    for (uint64_t at = 0; (double)at < seconds * scene.rate_hz; at += PIECE) {
        double start_s = processor_s();
        render_get(render, at, frames, PIECE);
        double made_s = processor_s();
        chain_push(&chain, frames, PIECE);
        counts->render_s += made_s - start_s;
        counts->listen_s += processor_s() - made_s;
    }
    chain_finish(&chain);
    bool good = count(confounder, &scene, &chain, counts);
    list_false(&chain, seed, counts->false_calls);
    json_t *more = match_judged(&chain, NULL);
    json_array_extend(counts->judged, more);
    json_decref(more);
    render_destroy(render);
    chain_destroy(&chain);
    return good;
}

json_t *calls_confounder(const struct calls_setup *setup, uint32_t number, double hours)
{
    const struct confounder *confounder = &confounders[number];
    const struct catalogue *catalogue = setup->catalogue;
    struct counts counts = {0};
    json_t *calls = json_object();
    counts.false_calls =
        json_array(); /* seed of the sea, class, start, end, band, SNR, seconds since an impulse */
    counts.judged = json_array();
    double done_s = 0;
    for (uint32_t i = 0; done_s < hours * 3600 - 1; i++) {
        double seconds = fmin(CALLS_STRETCH_S, hours * 3600 - done_s);
        if (!run_stretch(catalogue, confounder, calls_seed(setup, 7 + number, i), seconds, &counts))
            return NULL;
        done_s += seconds;
    }
    for (uint32_t c = 0; c < catalogue->n_classes; c++)
        if (counts.by_class[c] > 0)
            json_object_set_new(calls, catalogue->classes[c].name, json_integer(counts.by_class[c]));
    json_t *row =
        json_pack("{s:s, s:f, s:f, s:i, s:i, s:f, s:f, s:o, s:o, s:o}", "sound", confounder->name, "rate_hz",
                  confounder->rate_hz, "hours", done_s / 3600, "looks", (int)counts.n_look, "acts",
                  (int)counts.n_act, "render_s", counts.render_s, "listen_s", counts.listen_s, "calls", calls,
                  "false", counts.false_calls, "judged", counts.judged);
    if (row && confounder->heard_as)
        json_object_set_new(row, "recognised",
                            json_pack("{s:s, s:b, s:f, s:f}", "as", confounder->heard_as, "lasts",
                                      counts.lasts, "present", counts.recognised.present, "recognised",
                                      counts.recognised.recognised));
    return row;
}
