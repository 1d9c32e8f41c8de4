/* Another permit in mid-watch: what was done stays, what is asked for is the new permit's, and nothing is
 * loosened by the change alone while the source sounds. */
#include "support/test.h"

#include "base/time.h"
#include "rule/watch.h"
#include "settings/permit.h"
#include <stdlib.h>

static struct permit demonstration, uk;

struct told {
    enum advice_word crew;
    char reason[FLOW_TEXT_SIZE];
    enum phase phase;
    uint32_t n_contacts;
};

static void take(void *context, const struct outcome *outcome)
{
    struct told *told = context;
    if (outcome->kind == OUTCOME_ADVICE && strcmp(outcome->as.advice.station, "crew") == 0) {
        told->crew = outcome->as.advice.advice;
        memcpy(told->reason, outcome->as.advice.reason, sizeof told->reason);
    }
    if (outcome->kind == OUTCOME_PHASE)
        told->phase = outcome->as.phase.phase;
}

static struct watch_setup setup_of(const struct permit *permit)
{
    return (struct watch_setup){.permit = permit,
                                .contact_gap_s = 300,
                                .look_evidence = 1,
                                .act_evidence = 3,
                                .evidence_decay_s = 180,
                                .sighting_log_spread = 0.15,
                                .silence_s = 120};
}

static void push(struct watch *watch, struct told *told, struct event event, double at_s)
{
    static uint64_t counter;
    event.known_ns = time_from_s(at_s);
    event.run = event.kind == EVENT_RUN ? 2 : 1;
    event.counter = ++counter;
    assert_int_equal(watch_push(watch, &event, &(struct outcome_sink){take, told}), STATUS_OK);
}

static struct event note(enum note_kind kind, const char *key, const char *value)
{
    struct event event = {.kind = EVENT_NOTE};
    note_reset(&event.as.note, kind);
    snprintf(event.as.note.person, sizeof event.as.note.person, "Ann");
    if (key)
        assert_int_equal(note_set(&event.as.note, key, value, NULL), STATUS_OK);
    return event;
}

static struct watch *begin(struct told *told)
{
    struct watch *watch;
    const struct watch_setup setup = setup_of(&demonstration);
    assert_int_equal(watch_create(&setup, &watch), STATUS_OK);
    push(watch, told, note(NOTE_SIGN_ON, "watch", "visual"), 1);
    push(watch, told, note(NOTE_SIGN_ON, "watch", "acoustic"), 1);
    struct event job = note(NOTE_JOB, "job", "pile 1");
    snprintf(job.as.note.answer, sizeof job.as.note.answer, "open");
    push(watch, told, job, 2);
    return watch;
}

static void change(struct watch *watch, struct told *told, const struct permit *permit, double at_s)
{
    const struct watch_setup setup = setup_of(permit);
    struct event run = {.kind = EVENT_RUN};
    run.as.run_mark = (struct run_mark){time_from_s(at_s), time_from_s(at_s)};
    assert_int_equal(watch_change(watch, &setup), STATUS_OK);
    push(watch, told, run, at_s);
}

/* Half of the demonstration's minute was kept: of the 30 minutes that the UK protocol asks for, half a minute
 * too. */
static void the_watch_that_was_kept_counts(void **state)
{
    (void)state;
    struct told told = {0};
    struct watch *watch = begin(&told);
    struct watch_view *view = calloc(1, sizeof *view);
    assert_non_null(view);
    change(watch, &told, &uk, 31);
    watch_get_view(watch, view);
    assert_string_equal(view->timers[0].name, "pre-watch");
    assert_int_equal(view->timers[0].elapsed_ns, 30 * TIME_NS_PER_S);
    assert_int_equal(view->timers[0].needed_ns, 1800 * TIME_NS_PER_S);
    assert_int_equal(view->n_people, 2);
    assert_string_equal(view->job, "pile 1");
    assert_int_equal(told.phase, PHASE_PRE_WATCH);
    change(watch, &told, &demonstration, 70); /* and back: now it is complete */
    assert_int_equal(told.phase, PHASE_READY);
    free(view);
    watch_destroy(watch);
}

/* The UK protocol asks for nothing at full power; the stop that was given stays until the source stops. */
static void a_stop_is_not_withdrawn(void **state)
{
    (void)state;
    struct told told = {0};
    struct watch *watch = begin(&told);
    push(watch, &told, note(NOTE_RELEASE, NULL, NULL), 70);
    push(watch, &told, note(NOTE_SOURCE, "source_state", "soft start"), 75);
    push(watch, &told, note(NOTE_SOURCE, "source_state", "full power"), 140);
    assert_int_equal(told.crew, ADVICE_CARRY_ON);
    struct event sighting = note(NOTE_SIGHTING, "group", "porpoise");
    sighting.as.note.distance_m = 50;
    push(watch, &told, sighting, 150);
    assert_int_equal(told.crew, ADVICE_STOP);
    change(watch, &told, &uk, 160);
    if (told.crew != ADVICE_STOP)
        fail_msg("the crew is told: %s, because %s", advice_text(told.crew), told.reason);
    push(watch, &told, note(NOTE_SOURCE, "source_state", "stopped"), 170);
    assert_true(told.crew != ADVICE_STOP || told.phase == PHASE_SHUTDOWN);
    watch_destroy(watch);
}

static void a_bad_setup_changes_nothing(void **state)
{
    (void)state;
    struct told told = {0};
    struct watch *watch = begin(&told);
    struct watch_setup bad = setup_of(&uk), kept;
    bad.silence_s = 0;
    assert_int_equal(watch_change(watch, &bad), STATUS_BAD_ARGUMENT);
    watch_get_setup(watch, &kept);
    assert_ptr_equal(kept.permit, &demonstration);
    watch_destroy(watch);
}

int main(void)
{
    struct problems problems = {0};
    if (permit_load("config/permits/demonstration.cfg", NULL, &problems, &demonstration) != STATUS_OK ||
        permit_load("config/permits/uk-piling-2010.cfg", NULL, &problems, &uk) != STATUS_OK) {
        fputs(problems.lines.data ? problems.lines.data : "", stderr);
        return 1;
    }
    const struct CMUnitTest tests[] = {cmocka_unit_test(the_watch_that_was_kept_counts),
                                       cmocka_unit_test(a_stop_is_not_withdrawn),
                                       cmocka_unit_test(a_bad_setup_changes_nothing)};
    return cmocka_run_group_tests_name("watch change", tests, NULL, NULL);
}
