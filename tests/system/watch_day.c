/* What a busy day costs the watch alone: 15,000 impulses and 200 contacts in 24 h, the tally and the ledger
 * apart. CPU time; but a neighbour on
 * the same core doubles that too, so it is tried again until one day is undisturbed. 50 ms is the project's
 * own goal. */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "rule/watch.h"
#include "settings/permit.h"
#include <stdlib.h>

#define N_IMPULSES 15000
#define N_CONTACTS 200
#define N_CALLS 5 /* of each */
#define MAX_EVENTS (N_IMPULSES + N_CONTACTS * N_CALLS + 256)
#define DAY_S 86400.0
#define GOAL_MS 50.0

struct day {
    uint32_t n;
    struct event events[MAX_EVENTS];
    uint32_t n_outcomes, n_contacts, n_advice;
};

static struct event *add(struct day *day, enum event_kind kind, double at_s)
{
    struct event *event = &day->events[day->n++];
    *event = (struct event){.kind = kind, .run = 1, .known_ns = time_from_s(at_s)};
    return event;
}

static struct note *add_note(struct day *day, enum note_kind kind, double at_s)
{
    struct note *note = &add(day, EVENT_NOTE, at_s)->as.note;
    note_reset(note, kind);
    snprintf(note->person, sizeof note->person, "Ann");
    return note;
}

static void say_source(struct day *day, double at_s, const char *state)
{
    snprintf(add_note(day, NOTE_SOURCE, at_s)->source_state, NOTE_NAME_SIZE, "%s", state);
}

/* Twelve piles of two hours: 75 min of pre-watch and waiting, then 45 min of blows every 2.16 s. */
static void add_piles(struct day *day)
{
    for (int pile = 0; pile < 12; pile++) {
        double from_s = 7200.0 * pile;
        struct note *job = add_note(day, NOTE_JOB, from_s + 10);
        snprintf(job->job, sizeof job->job, "pile %d", pile + 1);
        snprintf(job->answer, sizeof job->answer, "open");
        add_note(day, NOTE_RELEASE, from_s + 4400);
        say_source(day, from_s + 4490, "soft start");
        for (int i = 0; i < N_IMPULSES / 12; i++) {
            struct event *event = add(day, EVENT_IMPULSE, from_s + 4500 + 2.16 * i);
            event->stream = 1;
            event->as.impulse = (struct impulse){.channel = 1,
                                                 .time_ns = event->known_ns - TIME_NS_PER_S / 2,
                                                 .sel_db = 165,
                                                 .peak_db = 185,
                                                 .range_m = 750};
            if (i == 600)
                say_source(day, from_s + 4500 + 2.16 * i, "full power");
        }
        say_source(day, from_s + 7195, "stopped");
        struct note *end = add_note(day, NOTE_JOB, from_s + 7198);
        snprintf(end->job, sizeof end->job, "pile %d", pile + 1);
        snprintf(end->answer, sizeof end->answer, "closed");
    }
}

static void add_contacts(struct day *day)
{
    static const enum group groups[] = {GROUP_PORPOISE, GROUP_DELPHINID, GROUP_BALEEN_WHALE};
    for (int contact = 0; contact < N_CONTACTS; contact++)
        for (int i = 0; i < N_CALLS; i++) {
            struct event *event = add(day, EVENT_CALL, 60 + (DAY_S - 400) / N_CONTACTS * contact + 7.0 * i);
            event->stream = 1;
            event->as.call = (struct call){.channel = 1,
                                           .group = groups[contact % 3],
                                           .form = CALL_TONE,
                                           .start_ns = event->known_ns - TIME_NS_PER_S,
                                           .end_ns = event->known_ns,
                                           .evidence = 2};
        }
}

static int by_time(const void *a, const void *b)
{
    const struct event *x = a, *y = b;
    return (x->known_ns > y->known_ns) - (x->known_ns < y->known_ns);
}

static void number(struct day *day)
{
    uint64_t counters[EVENT_POSITION + 1] = {0};
    qsort(day->events, day->n, sizeof day->events[0], by_time);
    for (uint32_t i = 0; i < day->n; i++)
        day->events[i].counter = ++counters[day->events[i].kind];
}

static void take(void *context, const struct outcome *outcome)
{
    struct day *day = context;
    day->n_outcomes++;
    day->n_advice += outcome->kind == OUTCOME_ADVICE;
    if (outcome->kind == OUTCOME_CONTACT && outcome->as.contact.contact > day->n_contacts)
        day->n_contacts = outcome->as.contact.contact;
}

static double run_ms(struct day *day, const struct permit *permit)
{
    const struct watch_setup setup = {.permit = permit,
                                      .contact_gap_s = 300,
                                      .look_evidence = 1,
                                      .act_evidence = 3,
                                      .evidence_decay_s = 180,
                                      .sighting_log_spread = 0.15,
                                      .silence_s = 120};
    const struct outcome_sink sink = {take, day};
    struct watch *watch;
    struct timespec from, to;
    day->n_outcomes = day->n_contacts = day->n_advice = 0;
    assert_int_equal(watch_create(&setup, &watch), STATUS_OK);
    clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &from);
    for (uint32_t i = 0; i < day->n; i++)
        assert_int_equal(watch_push(watch, &day->events[i], &sink), STATUS_OK);
    assert_int_equal(watch_advance(watch, time_from_s(DAY_S), &sink), STATUS_OK);
    clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &to);
    watch_destroy(watch);
    return 1e3 * (double)(to.tv_sec - from.tv_sec) + 1e-6 * (double)(to.tv_nsec - from.tv_nsec);
}

static void a_day_takes_little(void **state)
{
    (void)state;
    static const char *const files[] = {"config/permits/demonstration.cfg",
                                        "config/permits/uk-piling-2010.cfg"};
    struct day *day = calloc(1, sizeof *day);
    struct permit *permit = calloc(1, sizeof *permit);
    assert_true(day && permit);
    snprintf(add_note(day, NOTE_SIGN_ON, 1)->watch, NOTE_NAME_SIZE, "visual");
    snprintf(add_note(day, NOTE_SIGN_ON, 2)->watch, NOTE_NAME_SIZE, "acoustic");
    add_piles(day);
    add_contacts(day);
    number(day);
    for (size_t f = 0; f < sizeof files / sizeof files[0]; f++) {
        struct problems problems = {0};
        double best_ms = 1e9;
        if (permit_load(files[f], NULL, &problems, permit) != STATUS_OK)
            fail_msg("%s", problems.lines.data);
        for (int i = 0; i < 60 && best_ms >= GOAL_MS; i++) {
            double ms = run_ms(day, permit);
            best_ms = ms < best_ms ? ms : best_ms;
        }
        printf("# figure %s: %u events, %u contacts, %u advice in %.1f ms of CPU time\n", permit->id, day->n,
               day->n_contacts, day->n_advice, best_ms);
        assert_true(day->n_contacts >= N_CONTACTS);
        assert_true(best_ms < GOAL_MS);
        problems_destroy(&problems);
    }
    free(permit);
    free(day);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(a_day_takes_little)};
    return cmocka_run_group_tests_name("watch day", tests, NULL, NULL);
}
