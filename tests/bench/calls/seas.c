/* Simulated seas: noise and all confounders that the rate carries, rendered by lib/scene, with calls of known
 * time, kind and signal-to-noise ratio added, through listen and watch. */
#include "bench/calls/match.h"
#include "bench/calls/sea.h"
#include "scene/render.h"
#include "support/ideal.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define QUIET_S 12.0 /* before the first call */

static void add_ship(struct scene *scene)
{
    scene->ships[scene->n_ships++] =
        (struct scene_ship){.track = {.at_start = {1500, -800, 4}, .course_deg = 160, .speed_m_s = 1},
                            .n_lines = 5,
                            .line_hz = {24, 50, 150, 410, 1230},
                            .source_level_db = 140};
}

static void add_hammer(struct scene *scene)
{
    struct scene_hammer *hammer = &scene->hammers[scene->n_hammers++];
    *hammer = scene_hammer_of();
    hammer->track.at_start = (struct scene_place){1200, 1600, 10};
    hammer->n_steps = 2;
    hammer->steps[0] = (struct scene_step){0.3 * scene->duration_s, 2, NAN};
    hammer->steps[1] = (struct scene_step){0.3 * scene->duration_s, 2, 200};
}

static void add_echosounder(struct scene *scene, double x_m, double hz, double ping_s, double interval_s,
                            double level_db)
{
    scene->echosounders[scene->n_echosounders++] =
        (struct scene_echosounder){.track = {.at_start = {x_m, 300, 3}},
                                   .end_s = INFINITY,
                                   .frequency_hz = hz,
                                   .ping_s = ping_s,
                                   .ping_interval_s = interval_s,
                                   .source_level_db = level_db};
}

static void add_shrimp(struct scene *scene, double snaps_per_s)
{
    scene->shrimp.snaps_per_s = snaps_per_s;
    scene->shrimp.source_level_db = 170;
}

static void add_emitter(struct scene *scene, const char *kind, double x_m, double y_m)
{
    struct scene_emitter *emitter = &scene->emitters[scene->n_emitters++];
    *emitter = scene_emitter_of(kind);
    emitter->track.at_start = (struct scene_place){x_m, y_m, 8};
}

static void fill_coast(struct scene *scene)
{
    add_emitter(scene, "naval sonar", 6000, 7000);
    add_emitter(scene, "janus modem", 1500, -2500);
    add_emitter(scene, "beacon", -900, 1200);
    scene_emitter_set(&scene->emitters[scene->n_emitters - 1], "frequency_hz", 9500);
    add_emitter(scene, "net pinger", 300, -700);
    add_emitter(scene, "ship cavitation", 1500, -800);
    add_emitter(scene, "fish grunts", 20, 30);
    add_ship(scene);
    add_hammer(scene);
    add_shrimp(scene, 5);
    add_echosounder(scene, 900, 12000, 0.004, 1.3, 185);
    add_echosounder(scene, 1400, 18000, 0.002, 0.7, 185);
}

static void fill_ultrasonic(struct scene *scene)
{
    fill_coast(scene);
    add_echosounder(scene, 700, 38000, 0.001, 0.5, 185);
    add_echosounder(scene, 800, 50000, 0.001, 0.37, 185);
}

static void fill_high(struct scene *scene)
{
    fill_ultrasonic(scene);
    add_echosounder(scene, 300, 120000, 0.0005, 0.25, 185);
}

static void fill_survey(struct scene *scene)
{
    add_ship(scene);
    scene->airguns[scene->n_airguns++] = (struct scene_airguns){.track = {.at_start = {1000, 0, 6}},
                                                                .end_s = INFINITY,
                                                                .shot_interval_s = 10,
                                                                .source_energy_level_db = 222};
    add_echosounder(scene, 900, 12000, 0.004, 1.3, 185);
}

static void fill_low(struct scene *scene)
{
    add_ship(scene);
    add_hammer(scene);
}

#define WHISTLES                                                                                             \
    {                                                                                                        \
        "delphinid whistle", 10, 2, 0.6, 0, 0.0107, 0, 0                                                     \
    }
#define SPERM                                                                                                \
    {                                                                                                        \
        "sperm whale clicks", 15, 8, 6, 24, 0, 5000, 20000                                                   \
    }
#define HUMPBACK                                                                                             \
    {                                                                                                        \
        "humpback song", 10, 4, 1.5, 0, 0.04, 0, 0                                                           \
    }
#define UPCALLS                                                                                              \
    {                                                                                                        \
        "right whale upcall", 10, 8, 3, 0, 0.128, 0, 0                                                       \
    }
#define DELPHINID                                                                                            \
    {                                                                                                        \
        "delphinid clicks", 20, 3, 1.5, 30, 0, 25000, 45000                                                  \
    }

static const struct sea seas[] = {
    {"coast, 48 kHz", 48000, 60, 60, fill_coast, {WHISTLES, SPERM, HUMPBACK, UPCALLS}},
    {"airguns firing, 48 kHz", 48000, 30, 60, fill_survey, {WHISTLES, SPERM, HUMPBACK, UPCALLS}},
    {"deep, 192 kHz",
     192000,
     20,
     40,
     fill_ultrasonic,
     {{"beaked whale clicks", 15, 5, 4, 24, 0, 25000, 60000}, DELPHINID, WHISTLES}},
    {"shallow, 384 kHz",
     384000,
     15,
     20,
     fill_high,
     {{"porpoise clicks", 15, 3, 1.5, 20, 0, 110000, 150000}, DELPHINID, WHISTLES}},
    {"low, 8 kHz",
     8000,
     60,
     240,
     fill_low,
     {{"fin whale pulse", 15, 60, 30, 8, 0, 15, 28},
      {"blue whale moan", 10, 20, 10, 0, 2.0, 0, 0},
      UPCALLS,
      HUMPBACK}},
};

uint32_t calls_seas_count(void)
{
    return sizeof seas / sizeof seas[0];
}

struct sailing {
    const struct sea *sea;
    struct scene scene;
    struct chain chain;
    struct render *render;
    struct random random;
    struct stretch stretch;
    uint32_t n_voices, n_truths, room;
    struct truth_call *truths;
    double next_s[SEA_MAX_VOICES];
    struct emission next[SEA_MAX_VOICES];
};

static bool sailing_create(struct sailing *sailing, const struct calls_setup *setup, const struct sea *sea,
                           uint64_t number)
{
    struct scene *scene = &sailing->scene;
    sailing->sea = sea;
    scene_reset(scene);
    scene->seed = calls_seed(setup, 100, number) & 0x7fffffff;
    scene->rate_hz = sea->rate_hz;
    scene->duration_s = sea->stretch_s * fmax(1, round(setup->scale * 60 * sea->minutes / sea->stretch_s));
    scene->sea.wind_m_s = 6;
    scene->n_hydrophones = 1;
    scene->hydrophones[0] = chain_hydrophone(0);
    sea->fill(scene);
    random_reset(&sailing->random, calls_seed(setup, 101, number));
    sailing->stretch.rate_hz = sea->rate_hz;
    sailing->stretch.n = (uint32_t)(sea->stretch_s * sea->rate_hz);
    sailing->stretch.samples = calloc(sailing->stretch.n, sizeof(float));
    while (sailing->n_voices < SEA_MAX_VOICES && sea->voices[sailing->n_voices].mean_gap_s > 0)
        sailing->n_voices++;
    for (uint32_t v = 0; v < sailing->n_voices; v++) {
        sailing->next_s[v] = QUIET_S + random_between(&sailing->random, 0, 5);
        voice_draw(&sea->voices[v], sea->rate_hz, &sailing->random, &sailing->next[v]);
    }
    return sailing->stretch.samples &&
           chain_create(&sailing->chain, setup->catalogue, sea->rate_hz, 1, true) &&
           render_create(scene, &sailing->render) == STATUS_OK;
}

static void sailing_destroy(struct sailing *sailing)
{
    chain_destroy(&sailing->chain);
    render_destroy(sailing->render);
    free(sailing->stretch.samples);
    free(sailing->truths);
    free(sailing);
}

static struct truth_call *add_truth(struct sailing *sailing)
{
    if (sailing->n_truths == sailing->room) {
        uint32_t room = sailing->room > 0 ? 2 * sailing->room : 256;
        struct truth_call *truths = realloc(sailing->truths, room * sizeof *truths);
        if (!truths)
            return NULL;
        sailing->truths = truths;
        sailing->room = room;
    }
    struct truth_call *truth = &sailing->truths[sailing->n_truths++];
    memset(truth, 0, sizeof *truth);
    return truth;
}

/* The calls of one voice that fit into the stretch; one that does not waits for the next. */
static bool add_calls(struct sailing *sailing, uint32_t v, const float *medians, double deviation)
{
    const struct voice *voice = &sailing->sea->voices[v];
    struct stretch *stretch = &sailing->stretch;
    double end_s = stretch->start_s + sailing->sea->stretch_s;
    for (;;) {
        struct emission *emission = &sailing->next[v];
        double length_s = emission_length_s(emission), at_s = fmax(sailing->next_s[v], stretch->start_s);
        if (at_s + length_s > end_s)
            return true;
        double gain = voice_gain(voice, emission, stretch, medians, deviation);
        struct truth_call *truth = add_truth(sailing);
        if (!truth || !(gain > 0))
            return false;
        truth->voice = v;
        truth->group = scene_kind_find(voice->kind)->group;
        truth->form = emission->n_pulses > 0 ? CALL_TRAIN : CALL_TONE;
        voice_add(emission, gain, at_s - stretch->start_s, stretch, truth);
        sailing->next_s[v] = at_s + length_s + voice->least_gap_s +
                             (voice->mean_gap_s - voice->least_gap_s) * random_exponential(&sailing->random);
        voice_draw(voice, stretch->rate_hz, &sailing->random, emission);
    }
}

/* What the sea holds is measured before any call is added. */
static bool fill_stretch(struct sailing *sailing)
{
    float *medians[SEA_MAX_VOICES] = {NULL};
    double deviations[SEA_MAX_VOICES];
    struct stretch *stretch = &sailing->stretch;
    bool good = true;
    render_get(sailing->render, (uint64_t)(stretch->start_s * stretch->rate_hz), stretch->samples,
               stretch->n);
    for (uint32_t v = 0; v < sailing->n_voices; v++) {
        const struct voice *voice = &sailing->sea->voices[v];
        if (voice->window_s > 0)
            medians[v] =
                stretch_medians(stretch, 2 * (uint32_t)lround(voice->window_s * stretch->rate_hz / 2));
        else
            deviations[v] = stretch_deviation(stretch, voice->low_hz, voice->high_hz);
        good = good && (voice->window_s == 0 || medians[v]);
    }
    for (uint32_t v = 0; v < sailing->n_voices; v++) {
        good = good &&
               add_calls(sailing, v, medians[v], sailing->sea->voices[v].window_s > 0 ? 0 : deviations[v]);
        free(medians[v]);
    }
    return good;
}

/* How many sounds that are no animal's one could have taken for a pulse. */
static double count_others(const struct scene *scene)
{
    double n = scene->shrimp.snaps_per_s * scene->duration_s;
    for (uint32_t i = 0; i < scene->n_echosounders; i++)
        n += scene->duration_s / scene->echosounders[i].ping_interval_s;
    return n;
}

/* d' of telling the first voice's pulses from every other pulse in the sea: those given to its group's trains
 * that are none of its own, over all there were. Shares are kept from 0 and 1 by half a count. */
static json_t *discriminability(const struct sailing *sailing, const struct match *match)
{
    enum group group = scene_kind_find(sailing->sea->voices[0].kind)->group;
    double own = 0, own_given = 0, others = count_others(&sailing->scene), others_given = 0;
    for (uint32_t t = 0; t < sailing->n_truths; t++) {
        const struct truth_call *truth = &sailing->truths[t];
        if (truth->voice == 0) {
            own += truth->n_pulses;
            own_given += truth->n_given;
        } else
            others += truth->n_pulses;
    }
    for (uint32_t c = 0; c < sailing->chain.n_calls; c++)
        if (sailing->chain.calls[c].group == group && sailing->chain.calls[c].form == CALL_TRAIN)
            others_given += sailing->chain.calls[c].n_pulses - match->n_right_pulses[c];
    double hit = (own_given + 0.5) / (own + 1), false_share = (others_given + 0.5) / (others + 1);
    return json_pack("{s:f, s:f, s:f, s:f, s:f}", "own", own, "own_given", own_given, "others", others,
                     "others_given", others_given, "d",
                     ideal_normal_quantile(hit) - ideal_normal_quantile(false_share));
}

static int compare_truths(const void *a, const void *b)
{
    double x = ((const struct truth_call *)a)->start_s, y = ((const struct truth_call *)b)->start_s;
    return (x > y) - (x < y);
}

/* Why the sounds that each class looked at were not calls. */
static json_t *rejections(const struct chain *chain)
{
    static struct class_account accounts[LISTEN_MAX_ACCOUNTS];
    uint32_t n = listen_get_accounts(chain->listen, accounts);
    json_t *out = json_object();
    for (uint32_t c = 0; c < n; c++) {
        json_t *row = json_object();
        for (int r = 0; accounts[c].hearable && r < REJECT_COUNT; r++)
            if (accounts[c].rejected[r] > 0)
                json_object_set_new(row, rejection_text((enum rejection)r),
                                    json_integer((json_int_t)accounts[c].rejected[r]));
        if (accounts[c].hearable)
            json_object_set_new(out, accounts[c].name, row);
        else
            json_decref(row);
    }
    return out;
}

static json_t *judge(struct sailing *sailing)
{
    qsort(sailing->truths, sailing->n_truths, sizeof *sailing->truths, compare_truths);
    struct match match = {.voices = sailing->sea->voices,
                          .n_voices = sailing->n_voices,
                          .n_truths = sailing->n_truths,
                          .truths = sailing->truths,
                          .chain = &sailing->chain};
    json_t *out = NULL;
    if (match_make(&match)) {
        json_t *first =
            sailing->sea->voices[0].window_s > 0 ? json_null() : discriminability(sailing, &match);
        out = json_pack("{s:s, s:f, s:f, s:o, s:o, s:o, s:o, s:o, s:o}", "sea", sailing->sea->name, "rate_hz",
                        sailing->scene.rate_hz, "minutes", sailing->scene.duration_s / 60, "voices",
                        match_rows(&match), "confusion", match_confusion(&match), "delays",
                        match_delays(&match), "first_voice", first, "rejections", rejections(&sailing->chain),
                        "judged", match_judged(&sailing->chain, match.of_group));
    }
    match_free(&match);
    return out;
}

json_t *sea_sail(const struct calls_setup *setup, const struct sea *sea, uint64_t number)
{
    struct sailing *sailing = calloc(1, sizeof *sailing);
    if (!sailing)
        return NULL;
    bool good = sailing_create(sailing, setup, sea, number);
    for (double at_s = 0; good && at_s < sailing->scene.duration_s; at_s += sailing->sea->stretch_s) {
        sailing->stretch.start_s = at_s;
        good = fill_stretch(sailing);
        if (good)
            chain_push(&sailing->chain, sailing->stretch.samples, sailing->stretch.n);
    }
    json_t *out = NULL;
    if (good) {
        chain_finish(&sailing->chain);
        out = judge(sailing);
    }
    sailing_destroy(sailing);
    return out;
}

json_t *calls_sea(const struct calls_setup *setup, uint32_t number)
{
    return sea_sail(setup, &seas[number], number);
}
