/* Seas that are drawn: every kind of call, weak and strong, beside none to two sounds that are no animal's.
 * On them the certainty of calls is fitted (tests/bench/certainty_fit.py), and on others it is judged. */
#include "bench/calls/sea.h"
#include "scene/render.h"
#include <math.h>
#include <stdlib.h>

#define VOICES 3
#define MINUTES 3.0
#define SPREAD_DB 15.0 /* the SNR is drawn from a voice's own to so much more */

static const struct voice voices[] = {{"delphinid whistle", 4, 3, 0.6, 0, 0.0107, 0, 0},
                                      {"varied delphinid whistle", 4, 3, 0.6, 0, 0.0107, 0, 0},
                                      {"stepped whistle", 4, 3, 0.6, 0, 0.0107, 0, 0},
                                      {"killer whale whistle", 4, 3, 0.6, 0, 0.0107, 0, 0},
                                      {"pilot whale whistle", 4, 3, 0.6, 0, 0.0107, 0, 0},
                                      {"beluga whistle", 4, 3, 0.6, 0, 0.0107, 0, 0},
                                      {"killer whale call", 8, 4, 1, 0, 0.0213, 0, 0},
                                      {"humpback song", 4, 4, 1.5, 0, 0.04, 0, 0},
                                      {"right whale upcall", 4, 8, 3, 0, 0.128, 0, 0},
                                      {"minke boing", 6, 12, 4, 0, 0.128, 0, 0},
                                      {"fin whale 40 Hz call", 6, 9, 4, 0, 0.256, 0, 0},
                                      {"blue whale D call", 6, 9, 4, 0, 0.256, 0, 0},
                                      {"blue whale moan", 4, 20, 10, 0, 2.0, 0, 0},
                                      {"blue whale A call", 6, 20, 10, 0, 2.0, 0, 0},
                                      {"blue whale Z call", 6, 20, 10, 0, 2.0, 0, 0},
                                      {"bearded seal trill", 6, 15, 8, 0, 0.032, 0, 0},
                                      {"sperm whale clicks", 10, 8, 6, 16, 0, 5000, 20000},
                                      {"sperm whale creak", 10, 6, 3, 60, 0, 5000, 20000},
                                      {"sperm whale coda", 10, 6, 3, 0, 0, 5000, 20000},
                                      {"minke slow-down train", 8, 15, 8, 0, 0, 100, 400},
                                      {"beaked whale clicks", 10, 5, 4, 16, 0, 25000, 60000},
                                      {"blainville clicks", 10, 5, 4, 16, 0, 25000, 60000},
                                      {"delphinid clicks", 12, 3, 1.5, 20, 0, 25000, 45000},
                                      {"delphinid burst pulse", 12, 3, 1.5, 60, 0, 25000, 45000},
                                      {"porpoise clicks", 10, 3, 1.5, 16, 0, 110000, 150000},
                                      {"porpoise buzz", 10, 3, 1.5, 40, 0, 110000, 150000}};

static bool carries(const struct voice *voice, double rate_hz, double stretch_s)
{
    const struct scene_kind *kind = scene_kind_find(voice->kind);
    bool steep = voice->low_hz > 0 && 100 * voice->low_hz < rate_hz; /* no filter of so few Hz holds there */
    return kind && kind->min_rate_hz <= rate_hz && !steep && 2.2 * voice->high_hz < rate_hz &&
           (stretch_s > 60 || voice->mean_gap_s < 15);
}

static void fill_drawn(struct scene *scene)
{
    struct random random;
    random_reset(&random, scene->seed);
    scene->sea.wind_m_s = random_between(&random, 2, 12);
    for (uint64_t n = random_bits(&random) % 3; n > 0; n--) {
        uint32_t c = (uint32_t)(random_bits(&random) % calls_confounders_count());
        if (calls_confounder_rate(c) <= scene->rate_hz)
            calls_confounder_fill(c, scene, &random);
    }
}

json_t *calls_mixed(const struct calls_setup *setup, uint32_t number)
{
    static const struct {
        double rate_hz, stretch_s;
    } rates[] = {{48000, 90}, {8000, 90}, {48000, 90}, {192000, 30}, {48000, 90}, {384000, 20}};
    struct sea sea = {.name = "mixed", .minutes = MINUTES, .fill = fill_drawn};
    struct random random;
    random_reset(&random, calls_seed(setup, 200, number));
    sea.rate_hz = rates[number % 6].rate_hz;
    sea.stretch_s = rates[number % 6].stretch_s;
    for (uint32_t v = 0; v < VOICES;) {
        const struct voice *voice = &voices[random_bits(&random) % (sizeof voices / sizeof voices[0])];
        if (!carries(voice, sea.rate_hz, sea.stretch_s))
            continue;
        sea.voices[v] = *voice;
        sea.voices[v++].snr_db += random_between(&random, 0, SPREAD_DB);
    }
    struct calls_setup one = *setup;
    one.scale = 1;
    return sea_sail(&one, &sea, 1000 + number);
}
