/* lib/rule/tally_fit through lib/rule/tally, and lib/rule/blows in the watch's own words: blows of a known N
 * heard at several ranges. What is right follows from the law that makes the levels, L = S - N lg r - a r. */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "record/entry.h"
#include "rule/blows.h"
#include "rule/tally.h"
#include "rule/tally_fit.h"
#include "settings/criteria.h"
#include <math.h>
#include <stdlib.h>

#define SPEED_M_S 1490.0
#define SEED 1406
#define MAX_EARS 8

static struct criteria criteria;

/* One hydrophone: the first of a stream counts. */
struct ear {
    uint32_t stream, channel;
    double range_m;
};

struct site {
    uint32_t n;
    struct ear ears[MAX_EARS];
};

struct said {
    uint32_t n_sources, n_findings;
    struct source_outcome sources[MAX_EARS]; /* the last of each ear */
    struct exposure_outcome cumulative;      /* LF injury of NMFS 2024, of stream 1 */
    const struct site *site;
};

static void take(void *context, const struct outcome *outcome)
{
    struct said *said = context;
    said->n_findings += outcome->kind == OUTCOME_FINDING;
    if (outcome->kind == OUTCOME_EXPOSURE && outcome->as.exposure.stream == 1 &&
        strcmp(outcome->as.exposure.criterion, "LF injury, impulsive, SEL") == 0)
        said->cumulative = outcome->as.exposure;
    for (uint32_t i = 0; outcome->kind == OUTCOME_SOURCE && i < said->site->n; i++)
        if (outcome->as.source.stream == said->site->ears[i].stream &&
            outcome->as.source.channel == said->site->ears[i].channel) {
            said->sources[i] = outcome->as.source;
            said->n_sources++;
        }
}

static struct tally *make_tally(const struct site *site)
{
    static struct tally_setup setup;
    struct tally *tally = NULL;
    setup = (struct tally_setup){.criteria = &criteria,
                                 .sound = SOUND_IMPULSIVE,
                                 .n_streams = 1,
                                 .shape = {.form = SOURCE_LINE},
                                 .loss_n_db = 15,
                                 .loss_n_spread_db = 2.5,
                                 .level_spread_db = 1,
                                 .scatter_db = 1.5,
                                 .sound_speed_m_s = SPEED_M_S,
                                 .water = absorption_of(10, 35, 10, 8),
                                 .zone_edge_m = NAN};
    for (uint32_t i = 0; i < site->n; i++) {
        const struct ear *ear = &site->ears[i];
        setup.n_streams = ear->stream > setup.n_streams ? ear->stream : setup.n_streams;
        setup.range_m[ear->stream - 1][ear->channel - 1] = ear->range_m;
        setup.role[ear->stream - 1][ear->channel - 1] = ROLE_MEASURE;
    }
    assert_int_equal(tally_create(&setup, &tally), STATUS_OK);
    return tally;
}

/* Events in the order of the moments at which they are known, some as the ledger holds them. */
struct story {
    uint32_t n;
    struct event events[8192];
};
static struct story story;

static void add_job(int64_t at_ns, const char *job)
{
    struct event *event = &story.events[story.n++];
    *event = (struct event){.kind = EVENT_NOTE, .run = 1, .counter = story.n, .known_ns = at_ns};
    note_reset(&event->as.note, NOTE_JOB);
    snprintf(event->as.note.job, sizeof event->as.note.job, "%s", job);
    snprintf(event->as.note.answer, sizeof event->as.note.answer, "open");
}

/* Energy in the decidecades of 100, 125 and 160 Hz. */
static void add_impulse(const struct ear *ear, bool beside, int64_t at_ns, double sel_db)
{
    struct event *event = &story.events[story.n++];
    assert_true(story.n < 8192);
    *event = (struct event){
        .kind = EVENT_IMPULSE, .stream = ear->stream, .run = 1, .counter = story.n, .known_ns = at_ns};
    event->as.impulse = (struct impulse){.channel = ear->channel,
                                         .time_ns = at_ns - TIME_NS_PER_S,
                                         .sel_db = sel_db,
                                         .peak_db = sel_db + 20,
                                         .peak_to_peak_db = sel_db + 25,
                                         .rms90_db = sel_db + 10,
                                         .t90_s = 0.1,
                                         .background_db = 90,
                                         .effective_s = 0.05,
                                         .kurtosis = 50,
                                         .window_s = 1,
                                         .positive_impulse_pa_s = 1,
                                         .n_bands = 34,
                                         .beside = beside,
                                         .whose = IMPULSE_OURS};
    for (uint32_t b = 0; b < 34; b++)
        event->as.impulse.band_sel_db[b] = b >= 10 && b <= 12 ? sel_db - 4.771 : NAN;
    entry_round(event);
}

static int by_time(const void *a, const void *b)
{
    const struct event *x = a, *y = b;
    return x->known_ns != y->known_ns ? (x->known_ns > y->known_ns) - (x->known_ns < y->known_ns)
                                      : (x->counter > y->counter) - (x->counter < y->counter);
}

/* A soft start of n blows from t_s on, one each step_s with a jitter of 1 %: the source grows by 20 dB, each
 * ear hears it N lg r weaker, within 0.25 dB (one standard deviation 0.13). */
static void add_blows(const struct site *site, struct random *random, double t_s, uint32_t n, double step_s,
                      double n_db)
{
    uint32_t first = story.n;
    for (uint32_t i = 0; i < n; i++) {
        double source_db = 200 + 20.0 * i / n + 0.5 * random_normal(random);
        double struck_s = t_s + step_s * (i + 0.01 * random_normal(random));
        for (uint32_t e = 0; e < site->n; e++) {
            const struct ear *ear = &site->ears[e];
            bool beside = e > 0 && site->ears[e - 1].stream == ear->stream;
            add_impulse(ear, beside, time_from_s(struck_s + ear->range_m / SPEED_M_S + 1),
                        source_db - n_db * log10(ear->range_m) + 0.13 * random_normal(random));
        }
    }
    qsort(story.events + first, story.n - first, sizeof story.events[0], by_time);
}

static void play(struct tally *tally, struct said *said, uint32_t from, uint32_t to)
{
    const struct outcome_sink sink = {take, said};
    for (uint32_t i = from; i < to; i++) {
        const struct event *event = &story.events[i];
        struct outcome outcome = {.kind = OUTCOME_EVENT,
                                  .run = event->run,
                                  .stream = event->stream,
                                  .counter = event->counter,
                                  .watch_ns = event->known_ns};
        outcome.as.event = *event;
        assert_int_equal(tally_take(tally, &outcome, &sink), STATUS_OK);
    }
}

static struct said hear(const struct site *site)
{
    struct said said = {.site = site};
    const struct outcome_sink sink = {take, &said};
    struct tally *tally = make_tally(site);
    play(tally, &said, 0, story.n);
    tally_finish(tally, story.events[story.n - 1].known_ns, &sink);
    tally_destroy(tally);
    return said;
}

/* Two channels of one stream, then the same with a stream each: a hammer of 120 blows a minute, whose sound
 * takes longer between the hydrophones than the next blow takes to come. */
static void n_of_the_job_is_found_and_each_blow_counts_once(void **state)
{
    (void)state;
    static const struct site sites[] = {{2, {{1, 1, 400}, {1, 2, 1700}}},
                                        {2, {{1, 1, 750}, {2, 1, 3000}}},
                                        {3, {{1, 1, 750}, {1, 2, 1500}, {1, 3, 6000}}}};
    struct random random;
    random_reset(&random, SEED);
    for (int s = 0; s < 3; s++) {
        double n_db = 14.2 + s;
        story.n = 0;
        add_job(TIME_NS_PER_S, "pile 1");
        add_blows(&sites[s], &random, 10, 600, 0.5, n_db);
        struct said said = hear(&sites[s]);
        assert_int_equal(said.cumulative.n, 600); /* not one more for the other hydrophones */
        for (uint32_t e = 0; e < sites[s].n; e++) {
            const struct source_outcome *source = &said.sources[e];
            /* the median blow at 750 m: 210 dB less the law */
            double there = 210 - n_db * log10(750);
            printf("# figure N %.1f, heard at %.0f m, seed %d: N %.2f (%.2f to %.2f), at 750 m %.2f (%.2f to "
                   "%.2f) for %.2f dB\n",
                   n_db, sites[s].ears[e].range_m, SEED, source->n_db, source->n_low_db, source->n_high_db,
                   source->at_750_m_db, source->at_750_m_low_db, source->at_750_m_high_db, there);
            assert_int_equal(source->n_impulses, 600);
            assert_true(source->fitted);
            assert_near(source->n_db, n_db, 0.3);
            assert_true(source->n_low_db <= n_db && source->n_high_db >= n_db);
            assert_near(source->range_low_m, sites[s].ears[0].range_m, 1);
            assert_near(source->range_high_m, sites[s].ears[sites[s].n - 1].range_m, 1);
            assert_true(source->at_750_m_low_db <= there && source->at_750_m_high_db >= there);
            assert_near(source->at_750_m_db, there, 0.3);
        }
    }
}

/* Ranges in a ratio of 3, and one hydrophone alone: the N that was set, and as unsure as it was set:
 * 15 +- 1.6449 x 2.5. */
static void without_range_there_is_no_fit(void **state)
{
    (void)state;
    static const struct site sites[] = {{2, {{1, 1, 750}, {1, 2, 2250}}}, {1, {{1, 1, 750}}}};
    struct random random;
    random_reset(&random, SEED + 1);
    for (int s = 0; s < 2; s++) {
        story.n = 0;
        add_job(TIME_NS_PER_S, "pile 1");
        add_blows(&sites[s], &random, 10, 200, 1.5, 18);
        struct said said = hear(&sites[s]);
        assert_false(said.sources[0].fitted);
        assert_near(said.sources[0].n_db, 15, 1e-9);
        assert_near(said.sources[0].n_low_db, 15 - 4.112, 0.001);
        assert_near(said.sources[0].n_high_db, 15 + 4.112, 0.001);
        assert_true(isnan(said.sources[0].range_low_m) && isnan(said.sources[0].range_high_m));
    }
}

/* A fit of 100 to 160 Hz moves no click: 20 kHz go by the N that was set, in exposures too (VHF of NMFS 2024
 * hears little else); a new job has no law before its own blows. */
static void a_fit_serves_its_own_band_and_job(void **state)
{
    (void)state;
    const struct absorption water = absorption_of(10, 35, 10, 8);
    const struct site site = {2, {{1, 1, 750}, {1, 2, 3000}}};
    struct tally_fit *fit;
    struct random random;
    random_reset(&random, SEED + 2);
    assert_int_equal(tally_fit_create(&water, SPEED_M_S, &fit), STATUS_OK);
    assert_null(tally_fit_get(fit));
    story.n = 0;
    add_blows(&site, &random, 10, 100, 2, 16);
    for (uint32_t i = 0; i < story.n; i++)
        tally_fit_push(fit, 1, site.ears[story.events[i].as.impulse.channel - 1].range_m,
                       &story.events[i].as.impulse);
    assert_true(tally_fit_update(fit));
    assert_false(tally_fit_update(fit)); /* nothing new */
    const struct source_law *law = tally_fit_get(fit);
    assert_non_null(law);
    assert_near(law->low_hz, 89.1, 0.1); /* edges of the decidecades of 100 and 160 Hz, IEC 61260-1:2014 */
    assert_near(law->high_hz, 177.8, 0.1);
    assert_true(source_law_covers(law, 100, 160));
    assert_false(source_law_covers(law, 1e4, 2e4));
    assert_false(source_law_covers(law, 100, 1e3));
    struct source_sea sea = {.n_laws = 1, .n_db = 15, .laws = {*law}};
    double db, spread_db;
    source_sea_between(&sea, 2e4, 750, 3000, &db, &spread_db);
    assert_near(db, 15 * log10(4), 1e-9);
    assert_near(spread_db, 2.5 * log10(4), 1e-9);
    tally_fit_begin_job(fit);
    assert_null(tally_fit_get(fit));
    tally_fit_destroy(fit);
}

/* Taken again from the ledger's own text, silently, what is said afterwards is the same to the last digit. */
static void a_rebuilt_tally_has_the_same_law(void **state)
{
    (void)state;
    const struct site site = {2, {{1, 1, 750}, {1, 2, 3000}}};
    struct random random;
    random_reset(&random, SEED + 3);
    story.n = 0;
    add_job(TIME_NS_PER_S, "pile 1");
    add_blows(&site, &random, 10, 300, 1.2, 17);
    uint32_t half = story.n / 2;
    struct said said = {.site = &site}, again = {.site = &site};
    struct tally *tally = make_tally(&site), *rebuilt = make_tally(&site);
    play(tally, &said, 0, half);
    struct text body = {0};
    for (uint32_t i = 0; i < half; i++) {
        struct outcome outcome = {.kind = OUTCOME_EVENT,
                                  .run = 1,
                                  .stream = story.events[i].stream,
                                  .counter = story.events[i].counter};
        outcome.as.event = story.events[i];
        assert_int_equal(entry_body(&outcome, 0, &body), STATUS_OK);
        int64_t known_ns = story.events[i].known_ns;
        assert_int_equal(entry_event(flow_outcome_kind_text(&outcome), body.data, known_ns, &story.events[i]),
                         STATUS_OK);
    }
    text_destroy(&body);
    tally_set_silent(rebuilt, true);
    play(rebuilt, &again, 0, half);
    assert_int_equal(again.n_sources, 0);
    tally_set_silent(rebuilt, false);
    play(tally, &said, half, story.n);
    play(rebuilt, &again, half, story.n);
    const struct outcome_sink sink = {take, &said}, sink_again = {take, &again};
    tally_finish(tally, story.events[story.n - 1].known_ns, &sink);
    tally_finish(rebuilt, story.events[story.n - 1].known_ns, &sink_again);
    for (uint32_t e = 0; e < 2; e++) {
        const struct source_outcome *a = &said.sources[e], *b = &again.sources[e];
        assert_true(a->fitted && b->fitted);
        assert_true(a->n_db == b->n_db && a->n_low_db == b->n_low_db && a->n_high_db == b->n_high_db);
        assert_true(a->at_750_m_db == b->at_750_m_db && a->at_750_m_low_db == b->at_750_m_low_db);
        assert_int_equal(a->n_impulses, b->n_impulses);
    }
    assert_true(said.cumulative.level_db == again.cumulative.level_db);
    assert_true(said.cumulative.distance_m == again.cumulative.distance_m);
    assert_true(said.cumulative.at_750_m_db == again.cumulative.at_750_m_db);
    tally_destroy(tally);
    tally_destroy(rebuilt);
}

/* Struck 2 s after each other and heard 1.51 s apart: one blow each; without ranges they are two. */
static void blows_are_tied_by_when_they_were_struck(void **state)
{
    (void)state;
    struct blows blows = {0}, blind = {0};
    enum impulse_whose whose;
    int n = 0, n_blind = 0;
    for (int i = 0; i < 100; i++)
        for (int far = 0; far < 2; far++) {
            double range_m = far ? 3000 : 750;
            int64_t heard_ns = time_from_s(2.0 * i + range_m / SPEED_M_S + 0.05 * far);
            n += blows_add(&blows, blow_struck_ns(heard_ns, range_m, SPEED_M_S), IMPULSE_OURS);
            n_blind += blows_add(&blind, blow_struck_ns(heard_ns, NAN, SPEED_M_S), IMPULSE_OURS);
        }
    assert_int_equal(n, 100);
    assert_int_equal(n_blind, 200);
    assert_true(blows_find(&blows, time_from_s(198.1), &whose));
    assert_int_equal(whose, IMPULSE_OURS);
    assert_false(blows_find(&blows, time_from_s(197), &whose));
    assert_int_equal(blow_struck_ns(5, -1, SPEED_M_S), 5);
    assert_int_equal(blow_struck_ns(5, 750, 0), 5);
}

int main(void)
{
    struct problems problems = {0};
    if (criteria_load("config/criteria/nmfs-2024.cfg", &problems, NULL, &criteria) != STATUS_OK) {
        fputs(problems.lines.data ? problems.lines.data : "", stderr);
        return 1;
    }
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(n_of_the_job_is_found_and_each_blow_counts_once),
        cmocka_unit_test(without_range_there_is_no_fit),
        cmocka_unit_test(a_fit_serves_its_own_band_and_job),
        cmocka_unit_test(a_rebuilt_tally_has_the_same_law),
        cmocka_unit_test(blows_are_tied_by_when_they_were_struck),
    };
    return cmocka_run_group_tests_name("tally fit", tests, NULL, NULL);
}
