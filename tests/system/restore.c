/* daemon/restore: the sums of a job, rebuilt from a real ledger file, are those of what the file holds. */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "ledger/ledger.h"
#include "record/entry.h"
#include "record/minute.h"
#include "restore.h"
#include "settings/criteria.h"
#include "settings/permit.h"
#include <math.h>
#include <stdlib.h>
#include <unistd.h>

#define ZERO_NS (INT64_C(1772366400) * TIME_NS_PER_S)
#define MAX_SAID 64
#define BATCH 512

static struct permit permit;
static struct criteria criteria;
static char path[512];

/* What is written to the ledger, and given to a tally as at sea. */
struct sea {
    struct ledger *ledger;
    struct minutes *minutes;
    struct tally *tally; /* borrowed; NULL: none */
    struct watch *watch; /* borrowed; NULL: events go to the tally as they are */
    struct text body;
    uint32_t n_lines;
    struct ledger_line lines[BATCH];
    uint64_t counters[EVENT_NOTE + 1];
    bool killed;            /* nothing reaches the ledger any more */
    bool dies_of_note;      /* killed when the note 'whose' is written, and nothing after it */
    uint64_t last_impulse;  /* its counter */
    uint32_t n_corrections; /* that are written */
};

static void commit(struct sea *sea)
{
    char problem[LEDGER_PROBLEM_SIZE];
    assert_int_equal(ledger_append(sea->ledger, sea->lines, sea->n_lines, problem), STATUS_OK);
    for (uint32_t i = 0; i < sea->n_lines; i++) {
        free((void *)(uintptr_t)sea->lines[i].utc);
        free((void *)(uintptr_t)sea->lines[i].body);
    }
    sea->n_lines = 0;
}

static void write_line(struct sea *sea, int64_t watch_ns, const char *kind, const char *body)
{
    char utc[TIME_UTC_SIZE];
    if (sea->killed)
        return;
    time_format_utc(ZERO_NS + watch_ns, utc);
    sea->lines[sea->n_lines++] = (struct ledger_line){.utc = strdup(utc), .kind = kind, .body = strdup(body)};
    if (sea->n_lines == BATCH)
        commit(sea);
}

static void take_minute(void *context, const struct minute_body *minute)
{
    write_line(context, minute->watch_ns, "level", minute->body);
}

static void drop(void *context, const struct outcome *outcome)
{
    (void)context;
    (void)outcome;
}

/* A conclusion, or an event that the watch has completed, becomes an entry. */
static void write_outcome(struct sea *sea, const struct outcome *outcome)
{
    const char *kind = flow_outcome_kind_text(outcome);
    assert_int_equal(entry_body(outcome, ZERO_NS, &sea->body), STATUS_OK);
    write_line(sea, outcome->watch_ns, kind, sea->body.data);
    sea->n_corrections += outcome->kind == OUTCOME_CORRECTION && !sea->killed;
    if (sea->dies_of_note && outcome->kind == OUTCOME_EVENT && outcome->as.event.kind == EVENT_NOTE &&
        outcome->as.event.as.note.kind == NOTE_WHOSE)
        sea->killed = true;
}

/* Of what the tally says only its findings are needed again. */
static void take_sums(void *context, const struct outcome *outcome)
{
    if (outcome->kind == OUTCOME_FINDING)
        write_outcome(context, outcome);
}

static void take_watched(void *context, const struct outcome *outcome)
{
    struct sea *sea = context;
    write_outcome(sea, outcome);
    tally_take(sea->tally, outcome, &(struct outcome_sink){take_sums, sea});
}

static void happen(struct sea *sea, struct event event)
{
    event.run = 1;
    event.counter = ++sea->counters[event.kind];
    entry_round(&event);
    if (event.kind == EVENT_IMPULSE)
        sea->last_impulse = event.counter;
    if (sea->watch) {
        assert_int_equal(watch_push(sea->watch, &event, &(struct outcome_sink){take_watched, sea}),
                         STATUS_OK);
        return;
    }
    struct outcome outcome = {.kind = OUTCOME_EVENT,
                              .run = 1,
                              .stream = event.stream,
                              .counter = event.counter,
                              .watch_ns = event.known_ns};
    outcome.as.event = event;
    assert_int_equal(minutes_take(sea->minutes, &outcome, &(struct minute_sink){take_minute, sea}),
                     STATUS_OK);
    if (event.kind != EVENT_LEVEL) {
        assert_int_equal(entry_body(&outcome, ZERO_NS, &sea->body), STATUS_OK);
        write_line(sea, event.known_ns, flow_event_kind_text(event.kind), sea->body.data);
    }
    if (sea->tally)
        tally_take(sea->tally, &outcome, &(struct outcome_sink){drop, NULL});
}

static void note(struct sea *sea, int64_t at_ns, enum note_kind kind, const char *job, const char *answer)
{
    struct event event = {.kind = EVENT_NOTE, .known_ns = at_ns};
    note_reset(&event.as.note, kind);
    event.as.note.known_ns = event.as.note.occurred_ns = at_ns;
    snprintf(event.as.note.job, sizeof event.as.note.job, "%s", job);
    snprintf(event.as.note.answer, sizeof event.as.note.answer, "%s", answer);
    happen(sea, event);
}

static void say_source(struct sea *sea, int64_t at_ns, const char *state)
{
    struct event event = {.kind = EVENT_NOTE, .known_ns = at_ns};
    note_reset(&event.as.note, NOTE_SOURCE);
    event.as.note.known_ns = event.as.note.occurred_ns = at_ns;
    snprintf(event.as.note.source_state, sizeof event.as.note.source_state, "%s", state);
    happen(sea, event);
}

/* A second that begins at a time, and becomes known 0.2 s after its end. */
static void second(struct sea *sea, int64_t start_ns, double spl_db, struct random *random)
{
    struct event event = {.kind = EVENT_LEVEL, .stream = 1, .known_ns = start_ns + 6 * TIME_NS_PER_S / 5};
    struct level *level = &event.as.level;
    *level = (struct level){.channel = 1,
                            .start_ns = start_ns,
                            .seconds = 1,
                            .spl_db = spl_db,
                            .peak_db = spl_db + 12,
                            .sel_db = spl_db,
                            .fast_max_db = spl_db + 1,
                            .slow_max_db = spl_db,
                            .high_hz = 24000,
                            .n_bands = 34};
    for (uint32_t b = 0; b < level->n_bands; b++)
        level->band_db[b] = b < 3 ? NAN : spl_db - 15 + random_normal(random);
    happen(sea, event);
}

static void blow(struct sea *sea, int64_t at_ns, double sel_db)
{
    struct event event = {.kind = EVENT_IMPULSE, .stream = 1, .known_ns = at_ns + TIME_NS_PER_S / 2};
    struct impulse *impulse = &event.as.impulse;
    *impulse = (struct impulse){.channel = 1,
                                .time_ns = at_ns,
                                .sel_db = sel_db,
                                .peak_db = sel_db + 20,
                                .peak_to_peak_db = sel_db + 25,
                                .rms90_db = sel_db + 10,
                                .t90_s = 0.1,
                                .background_db = 100,
                                .effective_s = 0.05,
                                .kurtosis = 30,
                                .window_s = 0.3,
                                .positive_impulse_pa_s = 1,
                                .n_bands = 34,
                                .whose = IMPULSE_OURS};
    for (uint32_t b = 0; b < 34; b++)
        impulse->band_sel_db[b] = sel_db - 10 - 0.5 * b;
    snprintf(impulse->job, sizeof impulse->job, "pile 1");
    happen(sea, event);
}

static struct tally *make_tally(enum criterion_sound sound)
{
    struct tally_setup setup = {.criteria = &criteria,
                                .sound = sound,
                                .n_streams = 1,
                                .shape = {.form = SOURCE_LINE},
                                .loss_n_db = 15,
                                .loss_n_spread_db = 1,
                                .level_spread_db = 1,
                                .zone_edge_m = 500};
    struct tally *tally = NULL;
    setup.water = absorption_of(10, 35, 10, 8);
    setup.range_m[0][0] = 750;
    setup.role[0][0] = ROLE_MEASURE;
    assert_int_equal(tally_create(&setup, &tally), STATUS_OK);
    return tally;
}

static void begin(struct sea *sea, struct tally *tally)
{
    char problem[LEDGER_PROBLEM_SIZE];
    *sea = (struct sea){.tally = tally};
    unlink(path);
    assert_int_equal(ledger_open(path, LEDGER_CREATE, &sea->ledger, problem), STATUS_OK);
    assert_int_equal(minutes_create(1, 1, &sea->minutes), STATUS_OK);
    happen(sea, (struct event){.kind = EVENT_RUN});
}

/* The file is closed as it stands; what the minutes still hold is lost, as in a kill. */
static void end(struct sea *sea)
{
    if (sea->n_lines > 0)
        commit(sea);
    ledger_close(sea->ledger);
    minutes_destroy(sea->minutes);
    text_destroy(&sea->body);
}

static struct watch *make_watch(void)
{
    struct watch *watch;
    const struct watch_setup setup = {.permit = &permit,
                                      .contact_gap_s = 60,
                                      .look_evidence = 1,
                                      .act_evidence = 2,
                                      .evidence_decay_s = 60,
                                      .sighting_log_spread = 0.2,
                                      .silence_s = 60,
                                      .range_m[0] = {750}};
    assert_int_equal(watch_create(&setup, &watch), STATUS_OK);
    return watch;
}

static uint32_t n_missing; /* corrections that the last ledger lacked */

static struct tally *restore(enum criterion_sound sound, double *out_s)
{
    char problem[LEDGER_PROBLEM_SIZE];
    struct ledger *ledger;
    struct watch *watch = make_watch();
    struct restored restored;
    struct timespec from, to;
    struct tally *tally = make_tally(sound);
    assert_int_equal(ledger_open(path, LEDGER_WRITE, &ledger, problem), STATUS_OK);
    clock_gettime(CLOCK_MONOTONIC, &from);
    if (restore_watch(ledger, watch, tally, &restored, problem) != STATUS_OK)
        fail_msg("%s", problem);
    clock_gettime(CLOCK_MONOTONIC, &to);
    *out_s = (double)(to.tv_sec - from.tv_sec) + 1e-9 * (double)(to.tv_nsec - from.tv_nsec);
    n_missing = 0;
    for (size_t i = 0; i < restored.n_missing; i++)
        n_missing += strcmp(restored.missing[i].kind, "correction") == 0;
    restored_destroy(&restored);
    ledger_close(ledger);
    watch_destroy(watch);
    return tally;
}

struct said {
    uint32_t n_exposures, n_findings;
    struct exposure_outcome exposures[MAX_SAID];
    struct source_outcome source;
};

static void take(void *context, const struct outcome *outcome)
{
    struct said *said = context;
    if (outcome->kind == OUTCOME_SOURCE)
        said->source = outcome->as.source;
    else if (outcome->kind == OUTCOME_FINDING)
        said->n_findings++;
    else if (said->n_exposures < MAX_SAID)
        said->exposures[said->n_exposures++] = outcome->as.exposure;
}

static struct said say(struct tally *tally, int64_t at_ns)
{
    struct said said = {0};
    tally_set_silent(tally, false);
    assert_int_equal(tally_finish(tally, at_ns, &(struct outcome_sink){take, &said}), STATUS_OK);
    tally_destroy(tally);
    return said;
}

static bool same(double a, double b)
{
    return a == b || (isnan(a) && isnan(b));
}

static void assert_same(const struct said *a, const struct said *b)
{
    assert_true(a->n_exposures > 0);
    assert_int_equal(a->n_exposures, b->n_exposures);
    for (uint32_t i = 0; i < a->n_exposures; i++) {
        const struct exposure_outcome *x = &a->exposures[i], *y = &b->exposures[i];
        assert_string_equal(x->criterion, y->criterion);
        assert_string_equal(x->job, y->job);
        assert_int_equal(x->n, y->n);
        assert_true(same(x->level_db, y->level_db) && same(x->at_750_m_db, y->at_750_m_db));
        assert_true(same(x->distance_m, y->distance_m) && same(x->distance_low_m, y->distance_low_m));
        assert_true(same(x->left, y->left) && x->start_ns == y->start_ns);
    }
}

/* The loudest second of the job, SPL over 1 s. */
static double loudest_db(const struct said *said)
{
    for (uint32_t i = 0; i < said->n_exposures; i++)
        if (strcmp(said->exposures[i].criterion, "behaviour, continuous") == 0)
            return said->exposures[i].level_db;
    fail_msg("no such criterion");
    return NAN;
}

/* Ten hours of drilling with blows heard too. The job opens 17.4 s into a minute, and the second before it is
 * as loud as the second before somebody says that the source sounds and the one after it has stopped: neither
 * is a second of the source in the job. It sounds from 0.5 s into second 399 on but for seconds n/2 + 7 to
 * n/2 + 23. A kill 41 s into the last minute loses that minute and nothing else. */
static void continuous_sums_are_those_of_the_seconds_in_the_ledger(void **state)
{
    (void)state;
    const int n = test_length() == TEST_SHORT ? 3600 : 36000;
    struct random random;
    struct sea *sea = calloc(1, sizeof *sea);
    struct tally *at_sea = make_tally(SOUND_CONTINUOUS), *lost = NULL;
    random_reset(&random, 31);
    tally_set_silent(at_sea, true); /* what is said each minute takes its time and adds nothing */
    begin(sea, at_sea);
    for (int i = 0; i < n + 41; i++) {
        if (i == n)
            sea->tally = lost; /* these seconds reach no entry */
        if (i == 318)
            note(sea, INT64_C(317400000000), NOTE_JOB, "hole 1", "open");
        if (i == 399 || i == n / 2 + 24)
            say_source(sea, (int64_t)i * TIME_NS_PER_S + TIME_NS_PER_S / 2, "vibro");
        if (i == n / 2 + 6)
            say_source(sea, (int64_t)i * TIME_NS_PER_S + TIME_NS_PER_S / 2, "stopped");
        if (i % 5 == 2 && i < n)
            blow(sea, (int64_t)i * TIME_NS_PER_S - 3 * TIME_NS_PER_S / 5, 150);
        second(sea, (int64_t)i * TIME_NS_PER_S,
               i == 317 || i == 398 || i == n / 2 + 7 ? 150 : 120 + 2 * random_normal(&random), &random);
    }
    end(sea);
    double seconds;
    struct tally *rebuilt = restore(SOUND_CONTINUOUS, &seconds);
    int64_t end_ns = (int64_t)(n + 41) * TIME_NS_PER_S;
    struct said was = say(at_sea, end_ns), is = say(rebuilt, end_ns);
    assert_same(&was, &is);
    assert_true(loudest_db(&is) < 140);
    assert_int_equal(is.source.n_seconds, n - 399 - 17);
    assert_true(same(was.source.spl_db, is.source.spl_db) && same(was.source.peak_db, is.source.peak_db));
    assert_int_equal(is.source.n_impulses, 0); /* a blow is in the levels of its seconds already */
    printf("# figure a ledger of %.0f h of continuous sound is restored in %.2f s\n", n / 3600.0, seconds);
    assert_true(seconds < 20);
    free(sea);
}

static void impulses_are_those_in_the_ledger(void **state)
{
    (void)state;
    const int n = test_length() == TEST_SHORT ? 1500 : 15000;
    struct sea *sea = calloc(1, sizeof *sea);
    struct random random;
    random_reset(&random, 32);
    struct tally *at_sea = make_tally(SOUND_IMPULSIVE);
    tally_set_silent(at_sea, true);
    begin(sea, at_sea);
    note(sea, TIME_NS_PER_S, NOTE_JOB, "pile 1", "open");
    struct event event = {.kind = EVENT_NOTE, .known_ns = 2 * TIME_NS_PER_S};
    note_reset(&event.as.note, NOTE_SOURCE);
    snprintf(event.as.note.source_state, sizeof event.as.note.source_state, "full power");
    happen(sea, event);
    for (int i = 0; i < n; i++)
        blow(sea, 3 * TIME_NS_PER_S + (int64_t)i * (12 * TIME_NS_PER_S / 5), 160 + random_normal(&random));
    end(sea);
    double seconds;
    struct tally *rebuilt = restore(SOUND_IMPULSIVE, &seconds);
    int64_t end_ns = 10 * TIME_NS_PER_S + (int64_t)n * (12 * TIME_NS_PER_S / 5);
    struct said was = say(at_sea, end_ns), is = say(rebuilt, end_ns);
    assert_same(&was, &is);
    assert_int_equal(is.source.n_impulses, n);
    assert_true(same(was.source.sel_db, is.source.sel_db) && same(was.source.peak_db, is.source.peak_db));
    printf("# figure a ledger of %.0f h and %d impulses is restored in %.2f s\n", n / 1500.0, n, seconds);
    assert_true(seconds < 20);
    free(sea);
}

/* What has not changed since it was said is not said again: one blow more, and all of it is. */
static void give_last_blow(struct tally *tally)
{
    struct outcome outcome = {
        .kind = OUTCOME_EVENT, .run = 1, .stream = 1, .counter = 1000000, .watch_ns = 906 * TIME_NS_PER_S};
    outcome.as.event = (struct event){.kind = EVENT_IMPULSE, .stream = 1, .counter = 1000000};
    outcome.as.event.as.impulse = (struct impulse){.channel = 1,
                                                   .time_ns = 906 * TIME_NS_PER_S,
                                                   .sel_db = 165,
                                                   .peak_db = 185,
                                                   .peak_to_peak_db = 190,
                                                   .rms90_db = 175,
                                                   .t90_s = 0.1,
                                                   .positive_impulse_pa_s = 1,
                                                   .range_m = 750,
                                                   .whose = IMPULSE_OURS};
    assert_int_equal(tally_take(tally, &outcome, &(struct outcome_sink){drop, NULL}), STATUS_OK);
}

/* Ours every 2 s at 165 dB, another's every 3.1 s at 173 dB from 400 s on, until at 901 s somebody says whose
 * it is. A kill loses nothing of that; one that comes between the note and its corrections has them made
 * again, and the ledger is known to lack them. */
static void corrections_are_made_again(void **state)
{
    (void)state;
    for (int dies = 0; dies <= 1; dies++) {
        struct sea *sea = calloc(1, sizeof *sea);
        struct random random;
        random_reset(&random, 33);
        struct tally *at_sea = make_tally(SOUND_IMPULSIVE);
        begin(sea, at_sea);
        sea->watch = make_watch();
        sea->dies_of_note = dies == 1;
        struct event event = {.kind = EVENT_NOTE, .known_ns = TIME_NS_PER_S};
        note_reset(&event.as.note, NOTE_SIGN_ON);
        snprintf(event.as.note.person, sizeof event.as.note.person, "Ann");
        snprintf(event.as.note.watch, sizeof event.as.note.watch, "acoustic");
        happen(sea, event);
        note(sea, TIME_NS_PER_S, NOTE_JOB, "pile 1", "open");
        say_source(sea, 2 * TIME_NS_PER_S, "full power");
        double ours_s = 10, others_s = 400;
        uint64_t named = 0;
        uint32_t n_others = 0;
        while (ours_s < 900 || others_s < 900) {
            bool is_ours = ours_s <= others_s;
            double *at_s = is_ours ? &ours_s : &others_s;
            blow(sea, time_from_s(*at_s), (is_ours ? 165 : 173) + 0.5 * random_normal(&random));
            *at_s += (is_ours ? 2 : 3.1) * exp(0.02 * random_normal(&random));
            named = is_ours ? named : sea->last_impulse;
            n_others += !is_ours;
        }
        struct event whose = {.kind = EVENT_NOTE, .known_ns = 905 * TIME_NS_PER_S};
        note_reset(&whose.as.note, NOTE_WHOSE);
        snprintf(whose.as.note.person, sizeof whose.as.note.person, "Ann");
        snprintf(whose.as.note.answer, sizeof whose.as.note.answer, "other");
        flow_id(1, 1, "impulse", named, whose.as.note.impulse);
        happen(sea, whose);
        end(sea);
        assert_true(sea->n_corrections > 0 || dies);
        double seconds;
        struct tally *rebuilt = restore(SOUND_IMPULSIVE, &seconds);
        if (dies)
            assert_true(n_missing > 0 && sea->n_corrections == 0);
        else
            assert_int_equal(n_missing, 0);
        give_last_blow(at_sea);
        give_last_blow(rebuilt);
        struct said was = say(at_sea, 907 * TIME_NS_PER_S), is = say(rebuilt, 907 * TIME_NS_PER_S);
        assert_same(&was, &is);
        assert_int_equal(was.source.n_impulses, is.source.n_impulses);
        assert_int_equal(was.source.n_other, is.source.n_other);
        assert_near(is.source.n_other, n_others, 0.05 * n_others);
        assert_near(is.source.sel_db, 165, 0.2);
        assert_int_equal(was.n_findings, is.n_findings);
        watch_destroy(sea->watch);
        free(sea);
    }
}

int main(void)
{
    struct problems problems = {0};
    snprintf(path, sizeof path, "%s/restore.%d.ledger", test_build(), (int)getpid());
    if (permit_load("config/permits/demonstration.cfg", NULL, &problems, &permit) != STATUS_OK ||
        criteria_load("config/criteria/nmfs-2024.cfg", &problems, NULL, &criteria) != STATUS_OK ||
        criteria_load("config/criteria/behaviour-us.cfg", &problems, NULL, &criteria) != STATUS_OK) {
        fputs(problems.lines.data ? problems.lines.data : "", stderr);
        return 1;
    }
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(continuous_sums_are_those_of_the_seconds_in_the_ledger),
        cmocka_unit_test(impulses_are_those_in_the_ledger),
        cmocka_unit_test(corrections_are_made_again),
    };
    int failed = cmocka_run_group_tests_name("restore", tests, NULL, NULL);
    unlink(path);
    return failed;
}
