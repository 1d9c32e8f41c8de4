/* Animals' pulses beside an own source with nearly the same rhythm: fin whale pulses each 12 s beside shots
 * each 10 and each 12 s, rendered by lib/scene, through listen with the shipped class of fin whale song. */
#include "support/test.h"

#include "base/random.h"
#include "listen/blocks.h"
#include "listen/listen.h"
#include "scene/render.h"
#include "support/catalogue.h"
#include <math.h>
#include <stdlib.h>

#define RATE 8000
#define SECONDS 300
#define MAX_TRAINS 32

/* The shipped catalogue's class alone. */
static struct call_class fin_class(void)
{
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    assert_true(catalogue && test_load_catalogue(catalogue));
    uint32_t c = 0;
    while (c < catalogue->n_classes && strcmp(catalogue->classes[c].name, "fin whale song") != 0)
        c++;
    assert_true(c < catalogue->n_classes);
    struct call_class class = catalogue->classes[c];
    free(catalogue);
    return class;
}

struct heard {
    struct listen *listen;
    uint32_t n_trains, n_pulses, n_impulses;
    uint64_t n_hidden, n_untied; /* pulses */
    double first_s, last_s, interval_s, masked_s;
};

static void take_event(void *context, const struct event *event)
{
    struct heard *heard = context;
    heard->n_impulses += event->kind == EVENT_IMPULSE;
    if (event->kind == EVENT_UNHEARD && event->as.unheard.cause == UNHEARD_OWN_SOURCE &&
        event->as.unheard.low_hz == 10)
        heard->masked_s += 1e-9 * (double)(event->as.unheard.end_ns - event->as.unheard.start_ns);
    if (event->kind != EVENT_CALL || event->as.call.n_sounds > 0)
        return;
    const struct call *call = &event->as.call;
    printf("# %s from %.1f to %.1f s, %u pulses each %.2f s\n", call->class_name,
           1e-9 * (double)call->start_ns, 1e-9 * (double)call->end_ns, call->n_pulses, call->interval_s);
    heard->n_trains++;
    heard->n_pulses += call->n_pulses;
    heard->interval_s = call->interval_s;
}

static void take_block(void *context, const struct block *block)
{
    struct heard *heard = context;
    assert_int_equal(listen_push(heard->listen, block, &(struct event_sink){take_event, heard}), STATUS_OK);
}

/* fin_start_s below 0: no fin whale; shots_s 0: no shots. */
static struct heard hear(double fin_start_s, double shots_s, double reverberation_s)
{
    struct scene *scene = calloc(1, sizeof *scene);
    struct render *render = NULL;
    struct blocks *blocks = NULL;
    struct heard heard = {0};
    static struct catalogue catalogue;
    catalogue = (struct catalogue){.n_classes = 1, .classes = {fin_class()}};
    float *samples = calloc(SECONDS * RATE, sizeof *samples);
    scene_reset(scene);
    scene->seed = 12;
    scene->rate_hz = RATE;
    scene->duration_s = SECONDS;
    scene->sea.wind_m_s = 5;
    scene->n_hydrophones = 1;
    scene->hydrophones[0] = (struct scene_hydrophone){.place = {0, 0, 12},
                                                      .calibration = {.known = true,
                                                                      .sensitivity_db = -170,
                                                                      .full_scale_v = 10,
                                                                      .expected_peak_db = NAN,
                                                                      .self_noise_db = NAN,
                                                                      .role = ROLE_BOTH}};
    /* One emitter a pulse: intervals of 12 s, 4 % of them chance (0.6 s in 15: Watkins et al. 1987). */
    struct random random;
    random_reset(&random, 12);
    for (double at = fin_start_s; fin_start_s >= 0 && at < SECONDS - 5;
         at += 12 + 0.48 * random_normal(&random)) {
        struct scene_emitter *fin = &scene->animals[scene->n_animals++];
        *fin = scene_emitter_of("fin whale pulse");
        fin->track.at_start = (struct scene_place){3000, 500, 20};
        fin->start_s = at;
        fin->end_s = at + 1;
    }
    if (shots_s > 0)
        scene->airguns[scene->n_airguns++] = (struct scene_airguns){.track = {.at_start = {1000, 0, 6}},
                                                                    .end_s = INFINITY,
                                                                    .shot_interval_s = shots_s,
                                                                    .source_energy_level_db = 222,
                                                                    .reverberation_s = reverberation_s};
    assert_int_equal(render_create(scene, &render), STATUS_OK);
    render_get(render, 0, samples, SECONDS * RATE);
    struct listen_setup setup = {.stream = 1,
                                 .run = 1,
                                 .n_channels = 1,
                                 .rate_hz = RATE,
                                 .map = {.rate_hz = RATE},
                                 .calibration = {scene->hydrophones[0].calibration},
                                 .catalogue = &catalogue};
    assert_int_equal(listen_create(&setup, &heard.listen), STATUS_OK);
    assert_int_equal(blocks_create(1, 1, RATE, &blocks), STATUS_OK);
    blocks_push(blocks, 0, samples, SECONDS * RATE, &(struct block_sink){take_block, &heard});
    blocks_finish(blocks, &(struct block_sink){take_block, &heard});
    listen_finish(heard.listen, &(struct event_sink){take_event, &heard});
    struct class_account accounts[LISTEN_MAX_ACCOUNTS];
    listen_get_accounts(heard.listen, accounts);
    heard.n_hidden = accounts[0].rejected[REJECT_OWN_SOURCE];
    heard.n_untied = accounts[0].rejected[REJECT_NO_RHYTHM];
    printf("# figure fin pulses %s, shots each %.0f s, reverberation %.0f s: %u pulses in trains, %llu in "
           "none, %llu the "
           "own source's; %u impulses, %.1f s of %d masked at 10 to 50 Hz\n",
           fin_start_s < 0 ? "none" : "each 12 s", shots_s, reverberation_s, heard.n_pulses,
           (unsigned long long)heard.n_untied, (unsigned long long)heard.n_hidden, heard.n_impulses,
           heard.masked_s, SECONDS);
    blocks_destroy(blocks);
    listen_destroy(heard.listen);
    render_destroy(render);
    free(samples);
    free(scene);
    return heard;
}

static void shots_never_become_fin_whales(void **state)
{
    (void)state;
    static const double shots_s[] = {10, 12}, reverberations_s[] = {0, 3};
    for (int i = 0; i < 2; i++)
        for (int k = 0; k < 2; k++)
            assert_int_equal(hear(-1, shots_s[i], reverberations_s[k]).n_trains, 0);
}

static void fin_pulses_are_not_gated_away(void **state)
{
    (void)state;
    struct heard alone = hear(5, 0, 0), each_10 = hear(5, 10, 0), each_12 = hear(5, 12, 0);
    assert_true(alone.n_pulses >= 18);
    assert_true(each_12.n_trains >= 1 && fabs(each_12.interval_s - 12) < 1);
    assert_true(each_12.n_pulses >= 0.7 * alone.n_pulses);
    /* Two of five lie within 2 s of a shot each 10 s, in a row: nobody could hear them, and the others are
     * tied across them. */
    assert_true(each_10.n_pulses >= 8 && fabs(each_10.interval_s - 12) < 1);
    assert_true(each_10.n_pulses + each_10.n_untied >= 0.5 * alone.n_pulses);
    assert_true(each_10.n_hidden <= each_10.n_impulses + 2);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(shots_never_become_fin_whales),
        cmocka_unit_test(fin_pulses_are_not_gated_away),
    };
    return cmocka_run_group_tests_name("own source", tests, NULL, NULL);
}
