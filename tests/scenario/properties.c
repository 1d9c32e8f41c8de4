/* Random days under every permit, against what must always hold of the watch (support/promises.h): faults, a
 * lost link, restarts that derive the watch from what was written, and a full disk that writes nothing for a
 * while are among the steps. After each day a start is made possible again, whatever has happened. */
#include "support/test.h"

#include "base/time.h"
#include "rule/watch.h"
#include "settings/permit.h"
#include "support/permits.h"
#include "support/promises.h"
#include "support/random_day.h"
#include <math.h>
#include <stdlib.h>

static struct permit *permits;
static unsigned n_permits;

static int load_permits(void **state)
{
    (void)state;
    static char ids[TEST_MAX_PERMITS][PERMIT_NAME_SIZE];
    unsigned n = test_list_permits(ids);
    snprintf(ids[n++], PERMIT_NAME_SIZE, "demonstration");
    permits = calloc(n, sizeof *permits);
    for (n_permits = 0; permits && n_permits < n; n_permits++) {
        if (!test_load_permit(ids[n_permits], &permits[n_permits]))
            return -1;
        permit_set_edge(&permits[n_permits], 10);
    }
    return permits ? 0 : -1;
}

static int free_permits(void **state)
{
    (void)state;
    free(permits);
    return 0;
}

#define ZERO_UNIX_NS INT64_C(1782000000000000000) /* 2026-06-21 00:00 UTC */

static struct watch *new_watch(const struct permit *permit)
{
    struct watch *watch = NULL;
    struct watch_setup setup = {.permit = permit,
                                .contact_gap_s = 300,
                                .look_evidence = 4,
                                .act_evidence = 8,
                                .evidence_decay_s = 300,
                                .sighting_log_spread = 0.2,
                                .silence_s = 60,
                                .ranges = {.has_source = true, .latitude_deg = 54, .longitude_deg = 7}};
    assert_int_equal(watch_create(&setup, &watch), STATUS_OK);
    watch_set_clock(watch, ZERO_UNIX_NS);
    return watch;
}

/* ---- what is seen of the outcomes */
struct seen {
    uint64_t digest; /* FNV-1a of every outcome's text */
    uint64_t n;
    int64_t last_ns;
    uint32_t run;
    uint64_t counters[5];
    int words[2]; /* advice in force, -1 for none: observer, crew */
    enum phase phase;
    int64_t phase_since_ns;
    unsigned given[ADVICE_WORD_COUNT]; /* to the crew */
    unsigned visited;                  /* bit of each phase */
};

static void digest(struct seen *seen, const void *data, size_t size)
{
    const unsigned char *bytes = data;
    for (size_t i = 0; i < size; i++)
        seen->digest = (seen->digest ^ bytes[i]) * UINT64_C(1099511628211);
}

static void digest_texts(struct seen *seen, const char *reason, const char *clause, uint32_t n,
                         const char (*causes)[FLOW_ID_SIZE])
{
    digest(seen, reason, strlen(reason) + 1);
    digest(seen, clause, strlen(clause) + 1);
    for (uint32_t i = 0; i < n; i++)
        digest(seen, causes[i], strlen(causes[i]) + 1);
}

static void see(void *context, const struct outcome *outcome)
{
    struct seen *seen = context;
    char text[512];
    snprintf(text, sizeof text, "%d %u %u %llu %lld", (int)outcome->kind, outcome->run, outcome->stream,
             (unsigned long long)outcome->counter, (long long)outcome->watch_ns);
    digest(seen, text, strlen(text));
    assert_true(outcome->watch_ns >= seen->last_ns);
    seen->last_ns = outcome->watch_ns;
    seen->n++;
    if (outcome->run != seen->run) {
        seen->run = outcome->run;
        memset(seen->counters, 0, sizeof seen->counters);
    }
    if (outcome->kind != OUTCOME_EVENT)
        assert_int_equal(outcome->counter, ++seen->counters[outcome->kind]);
    if (outcome->kind == OUTCOME_PHASE) {
        const struct phase_outcome *phase = &outcome->as.phase;
        seen->phase = phase->phase;
        seen->phase_since_ns = outcome->watch_ns;
        seen->visited |= 1U << phase->phase;
        assert_true(*phase->reason && *phase->clause && phase->n_causes > 0);
        digest_texts(seen, phase->reason, phase->clause, phase->n_causes, phase->causes);
    } else if (outcome->kind == OUTCOME_ADVICE) {
        const struct advice_outcome *advice = &outcome->as.advice;
        bool crew = strcmp(advice->station, "crew") == 0;
        seen->words[crew] = (int)advice->advice;
        seen->given[advice->advice] += crew;
        assert_true(*advice->reason && *advice->clause && advice->n_causes > 0);
        digest(seen, &advice->until_ns, sizeof advice->until_ns);
        digest_texts(seen, advice->reason, advice->clause, advice->n_causes, advice->causes);
    } else if (outcome->kind == OUTCOME_FINDING)
        digest_texts(seen, outcome->as.finding.detail, outcome->as.finding.code, outcome->as.finding.n_causes,
                     outcome->as.finding.causes);
    else if (outcome->kind == OUTCOME_CONTACT) {
        snprintf(text, sizeof text, "%u %d %d %u %.9g", outcome->as.contact.contact,
                 (int)outcome->as.contact.state, (int)outcome->as.contact.grade, outcome->as.contact.n_calls,
                 outcome->as.contact.p_inside);
        digest(seen, text, strlen(text));
    }
}

static struct seen nothing_seen(void)
{
    return (struct seen){.digest = UINT64_C(14695981039346656037), .run = 1, .words = {-1, -1}};
}

/* ---- a day */
struct day {
    struct random_day events;
    struct random cuts;
    bool divide; /* with calls of watch_advance between the events */
    struct watch *watch;
    int64_t at_ns; /* the watch's time */
    struct seen seen;
    struct promises promises;
    struct event *written; /* what the ledger holds, and behind it what waits for room */
    unsigned n_written, n_waiting, room;
    bool disk_full;
    struct promises promises_at_full; /* when the last that was written came */
    int word_at_full;
    unsigned n_restarts, n_lossy, left; /* left: bit of each phase from which a start was made possible */
};

static bool sounds(enum phase phase)
{
    return phase >= PHASE_SOFT_START && phase <= PHASE_TEST;
}

static void let_time_pass(struct day *day, const struct event *event)
{
    struct outcome_sink sink = {see, &day->seen};
    int64_t from_ns = day->at_ns;
    int64_t until_ns = event->kind == EVENT_RUN ? event->as.run_mark.outage_start_ns : event->known_ns;
    for (int64_t cut = from_ns; day->divide && cut < until_ns;) {
        assert_int_equal(watch_advance(day->watch, cut, &sink), STATUS_OK);
        cut += 1 + (int64_t)((double)(until_ns - from_ns) * random_uniform(&day->cuts));
    }
    if (!day->divide && event->kind != EVENT_RUN) /* the undivided way still stops once, to look */
        assert_int_equal(watch_advance(day->watch, event->known_ns, &sink), STATUS_OK);
}

/* What is no decision of a person and no passing of time takes no restraint away, and no stop while the
 * source sounds. */
static void must_not_loosen(const struct event *event, enum phase from, enum phase to, int before, int after)
{
    bool run = event->kind == EVENT_RUN;
    bool loosens = promises_restrains(before) && !promises_restrains(after);
    bool stop_gone = before == ADVICE_STOP && sounds(from) && sounds(to) && after != ADVICE_STOP;
    if (run && before != ADVICE_STOP && before != ADVICE_DO_NOT_START)
        return; /* a hold or a reduction may end by time in the outage */
    if ((run || promises_is_fault(event)) && (loosens || stop_gone))
        fail_msg("%s turns '%s' into '%s'", flow_event_kind_text(event->kind),
                 advice_text((enum advice_word)before), advice_text((enum advice_word)after));
}

static void push(struct day *day, const struct event *event)
{
    struct outcome_sink sink = {see, &day->seen};
    char problem[256];
    let_time_pass(day, event);
    int before = day->seen.words[1];
    enum phase from = day->seen.phase;
    assert_int_equal(watch_push(day->watch, event, &sink), STATUS_OK);
    day->at_ns = event->known_ns;
    promises_take(&day->promises, event);
    if (!promises_kept(&day->promises, day->seen.phase, day->seen.phase_since_ns, day->seen.words[1],
                       day->at_ns, problem))
        fail_msg("%s: %s", day->promises.permit->id, problem);
    if (!day->divide)
        must_not_loosen(event, from, day->seen.phase, before, day->seen.words[1]);
    unsigned n = day->n_written + day->n_waiting;
    if (n == day->room) {
        day->room = day->room ? 2 * day->room : 4096;
        day->written = realloc(day->written, day->room * sizeof *day->written);
        assert_non_null(day->written);
    }
    day->written[n] = *event;
    *(day->disk_full ? &day->n_waiting : &day->n_written) += 1;
}

/* The disk is full, or has room again: what waited is written then. */
static void turn_disk(struct day *day)
{
    day->disk_full = !day->disk_full;
    if (day->disk_full) {
        day->promises_at_full = day->promises;
        day->word_at_full = day->seen.words[1];
        return;
    }
    day->n_written += day->n_waiting;
    day->n_waiting = 0;
}

/* The program is killed and begins again from what was written. Where that is all it is the same watch; what
 * a full disk did not take is lost, and nothing else. */
static void restart(struct day *day, struct event *run)
{
    struct seen again = nothing_seen();
    struct outcome_sink sink = {see, &again};
    watch_destroy(day->watch);
    day->watch = new_watch(day->promises.permit);
    for (unsigned i = 0; i < day->n_written; i++)
        assert_int_equal(watch_push(day->watch, &day->written[i], &sink), STATUS_OK);
    day->at_ns = day->n_written ? day->written[day->n_written - 1].known_ns : 0;
    day->n_restarts++;
    day->n_lossy += day->n_waiting > 0;
    if (day->n_waiting > 0) {
        run->as.run_mark.outage_start_ns = day->at_ns;
        day->promises = day->promises_at_full;
        assert_int_equal(again.words[1], day->word_at_full);
    } else {
        assert_int_equal(again.words[0], day->seen.words[0]);
        assert_int_equal(again.words[1], day->seen.words[1]);
        assert_int_equal(again.phase, day->seen.phase);
    }
    memcpy(day->seen.words, again.words, sizeof again.words);
    day->seen.phase = again.phase;
    day->seen.phase_since_ns = again.phase_since_ns;
    day->seen.last_ns = again.last_ns;
    day->n_waiting = 0;
    day->disk_full = false;
}

static void step(struct day *day)
{
    struct event event;
    random_day_next(&day->events, &event);
    double dice = random_uniform(&day->events.random);
    if (dice < (day->disk_full ? 0.05 : 0.004))
        turn_disk(day);
    if (event.kind == EVENT_RUN && dice > 0.6)
        restart(day, &event);
    push(day, &event);
}

static void enter(struct day *day, enum note_kind kind, const char *person, const char *field,
                  const char *value)
{
    struct event event = {.kind = EVENT_NOTE, .known_ns = day->events.now_ns};
    note_reset(&event.as.note, kind);
    snprintf(event.as.note.person, sizeof event.as.note.person, "%s", person);
    if (field)
        assert_int_equal(note_set(&event.as.note, field, value, NULL), STATUS_OK);
    if (kind == NOTE_WEATHER) {
        event.as.note.visibility_m = 20000;
        event.as.note.sea_state = 1;
        event.as.note.depth_m = 50;
    }
    random_day_number(&day->events, &event);
    push(day, &event);
}

#define HOUR_NS (3600 * TIME_NS_PER_S)

/* Whatever has happened: the source off, people on watch, good weather, time, what the permit wants at work,
 * a release, and the start is permitted. So no phase is dead, and every advice that was given has ended. */
static void make_a_start_possible(struct day *day)
{
    const struct permit *permit = day->promises.permit;
    day->left |= 1U << day->seen.phase;
    day->events.lost_link = 0;
    if (day->disk_full)
        turn_disk(day);
    enter(day, NOTE_SOURCE, "Ann", "source_state", "off");
    enter(day, NOTE_DETERRENT, "Ann", "answer", "off");
    enter(day, NOTE_QUIETING, "Ann", "answer", "on");
    enter(day, NOTE_WEATHER, "Ann", NULL, NULL);
    for (int i = 0; i < RANDOM_PEOPLE; i++)
        enter(day, NOTE_SIGN_ON, random_people[i], "watch", i < 3 ? "visual" : "acoustic");
    int64_t noon_ns =
        (day->events.now_ns + 5 * HOUR_NS + 12 * HOUR_NS) / (24 * HOUR_NS) * 24 * HOUR_NS + 12 * HOUR_NS;
    day->events.now_ns =
        noon_ns - time_from_minutes(permit->deterrent.stated ? permit->deterrent.least_minutes : 0);
    enter(day, NOTE_DETERRENT, "Ann", "answer", "on");
    day->events.now_ns = noon_ns;
    enter(day, NOTE_RELEASE, "Ann", NULL, NULL);
    if (day->seen.words[1] != ADVICE_MAY_START)
        fail_msg("%s: in phase %s the crew is told '%s', and a start is not made possible", permit->id,
                 phase_text(day->seen.phase), advice_text((enum advice_word)day->seen.words[1]));
    if (random_uniform(&day->events.random) < 0.3)
        return;
    enter(day, NOTE_SOURCE, "Cleo", "source_state", "soft start");
    if (day->seen.words[1] != ADVICE_CARRY_ON)
        fail_msg("%s: a start that was permitted is followed by '%s'", permit->id,
                 advice_text((enum advice_word)day->seen.words[1]));
}

/* A year of such days, each of 200 steps. */
static struct day run_days(const struct permit *permit, uint64_t seed, unsigned steps, bool divide)
{
    struct day day = {.divide = divide, .seen = nothing_seen(), .watch = new_watch(permit)};
    random_day_reset(&day.events, permit, seed);
    random_reset(&day.cuts, seed + 1000000);
    promises_reset(&day.promises, permit);
    for (unsigned i = 1; i <= steps; i++) {
        step(&day);
        if (i % 200 == 0)
            make_a_start_possible(&day);
    }
    watch_destroy(day.watch);
    free(day.written);
    return day;
}

static void safety_and_division(void **state)
{
    (void)state;
    unsigned seeds = test_length() == TEST_LONG ? 20 : 1, steps = test_length() == TEST_SHORT ? 400 : 2000;
    unsigned visited = 0, left = 0, stops = 0, restarts = 0, lossy = 0;
    for (unsigned p = 0; p < n_permits; p++) {
        unsigned given[ADVICE_WORD_COUNT] = {0};
        for (uint64_t seed = 1; seed <= seeds; seed++) {
            struct day whole = run_days(&permits[p], 1000 * p + seed, steps, false);
            struct day divided = run_days(&permits[p], 1000 * p + seed, steps, true);
            assert_int_equal(whole.seen.n, divided.seen.n);
            assert_true(whole.seen.digest == divided.seen.digest);
            for (int w = 0; w < ADVICE_WORD_COUNT; w++)
                given[w] += whole.seen.given[w];
            visited |= whole.seen.visited;
            left |= whole.left;
            restarts += whole.n_restarts;
            lossy += whole.n_lossy;
        }
        printf("# figure %s: %u steps, may start %u, stop %u, hold %u, reduce %u, prepare %u times\n",
               permits[p].id, seeds * steps, given[ADVICE_MAY_START], given[ADVICE_STOP],
               given[ADVICE_HOLD_POWER], given[ADVICE_REDUCE_POWER], given[ADVICE_PREPARE_TO_STOP]);
        assert_true(given[ADVICE_MAY_START] >= seeds * steps / 200);
        stops += given[ADVICE_STOP];
    }
    printf(
        "# figure %u steps, %u restarts, %u of them lost what a full disk did not take; %d of %d phases were "
        "visited, a start was made possible from %d\n",
        n_permits * seeds * steps, restarts, lossy, __builtin_popcount(visited), PHASE_COUNT,
        __builtin_popcount(left));
    assert_true(stops > n_permits && restarts > 0);
    assert_true(__builtin_popcount(visited) >= PHASE_COUNT - 1 && __builtin_popcount(left) >= 10);
}

static void push_note(struct watch *watch, struct outcome_sink *sink, int64_t at_ns, uint64_t *counter,
                      enum note_kind kind, const char *field, const char *value)
{
    struct event event = {.kind = EVENT_NOTE, .run = 1, .known_ns = at_ns, .counter = ++*counter};
    note_reset(&event.as.note, kind);
    strcpy(event.as.note.person, "Ann");
    if (field)
        assert_int_equal(note_set(&event.as.note, field, value, NULL), STATUS_OK);
    assert_int_equal(watch_push(watch, &event, sink), STATUS_OK);
}

/* A day with 15,000 impulses and 200 contacts. */
static void a_day_is_quick(void **state)
{
    (void)state;
    struct watch *watch = new_watch(&permits[0]);
    struct seen seen = nothing_seen();
    struct outcome_sink sink = {see, &seen};
    uint64_t counter = 0;
    clock_t start = clock();
    push_note(watch, &sink, 0, &counter, NOTE_SIGN_ON, "watch", "visual");
    push_note(watch, &sink, 0, &counter, NOTE_SIGN_ON, "watch", "acoustic");
    for (int i = 1; i <= 15200; i++) {
        int64_t now_ns = i * 86400 / 15200 * TIME_NS_PER_S;
        struct event event = {.stream = 1, .run = 1, .known_ns = now_ns, .counter = (uint64_t)i};
        event.kind = i % 76 ? EVENT_IMPULSE : EVENT_CALL;
        if (event.kind == EVENT_CALL) {
            event.as.call.group = (enum group)(1 + i / 76 % 6);
            event.as.call.start_ns = event.as.call.end_ns = now_ns;
            event.as.call.evidence = 9;
        } else
            event.as.impulse.time_ns = now_ns;
        assert_int_equal(watch_push(watch, &event, &sink), STATUS_OK);
    }
    double seconds = (double)(clock() - start) / CLOCKS_PER_SEC;
    printf("# figure a day of 15,000 impulses and 200 calls: %.0f ms, %llu outcomes\n", seconds * 1000,
           (unsigned long long)seen.n);
    assert_true(seconds < 1);
    watch_destroy(watch);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(safety_and_division),
        cmocka_unit_test(a_day_is_quick),
    };
    return cmocka_run_group_tests_name("properties", tests, load_permits, free_permits);
}
