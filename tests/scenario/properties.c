/* Random events against what must always hold of the watch, whatever happens. The expectations are kept from
 * the events alone, by other means than the watch's: the last sure detection of each group, who is on watch,
 * the last release. */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "rule/watch.h"
#include "settings/permit.h"
#include <math.h>
#include <stdlib.h>

static struct permit permits[3];
static const char *const permit_ids[3] = {"uk-piling-2010", "nz-2013-level-1", "demonstration"};

static int load_permits(void **state)
{
    (void)state;
    for (int i = 0; i < 3; i++) {
        struct problems problems = {0};
        char path[128];
        snprintf(path, sizeof path, "config/permits/%s.cfg", permit_ids[i]);
        if (permit_load(path, NULL, &problems, &permits[i]) != STATUS_OK)
            return -1;
    }
    return 0;
}

static struct watch *new_watch(const struct permit *permit)
{
    struct watch *watch = NULL;
    struct watch_setup setup = {.permit = permit,
                                .contact_gap_s = 300,
                                .look_evidence = 4,
                                .act_evidence = 8,
                                .evidence_decay_s = 300,
                                .sighting_log_spread = 0.2,
                                .silence_s = 60};
    assert_int_equal(watch_create(&setup, &watch), STATUS_OK);
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
    unsigned given[ADVICE_WORD_COUNT]; /* to the crew */
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

/* ---- random events */
static const char *const people[] = {"Ann", "Bo", "Cleo", "Dora"};

static void random_note(struct random *random, struct note *note)
{
    static const char *const states[] = {"off",     "soft start", "full power", "hold",       "reduced",
                                         "stopped", "vibro",      "soft start", "full power", "stopped"};
    double dice = random_uniform(random);
    const char *person = people[random_bits(random) % 4];
    if (dice < 0.22) {
        note_reset(note, random_uniform(random) < 0.8 ? NOTE_SIGN_ON : NOTE_SIGN_OFF);
        strcpy(note->watch, random_uniform(random) < 0.5 ? "visual" : "acoustic");
    } else if (dice < 0.36) {
        note_reset(note, NOTE_SIGHTING);
        note->group = (enum group)(random_bits(random) % GROUP_COUNT);
        if (random_uniform(random) < 0.8)
            note->distance_m = round(exp(random_between(random, log(20), log(4000))));
        note->leaving = random_uniform(random) < 0.1;
        note->calf = random_uniform(random) < 0.1;
    } else if (dice < 0.42) {
        note_reset(note, NOTE_DISTANCE);
        note->contact = 1 + (uint32_t)(random_bits(random) % 40);
        note->distance_m = round(exp(random_between(random, log(20), log(4000))));
    } else if (dice < 0.48) {
        static const char *const verdicts[] = {"confirm", "dismiss", "left"};
        note_reset(note, NOTE_VERDICT);
        note->contact = 1 + (uint32_t)(random_bits(random) % 40);
        strcpy(note->verdict, verdicts[random_bits(random) % 3]);
        strcpy(note->text, "reason");
    } else if (dice < 0.64) {
        note_reset(note, NOTE_RELEASE);
    } else if (dice < 0.84) {
        note_reset(note, NOTE_SOURCE);
        strcpy(note->source_state, states[random_bits(random) % 10]);
    } else if (dice < 0.92) {
        note_reset(note, NOTE_JOB);
        strcpy(note->job, "A1");
        strcpy(note->answer, random_uniform(random) < 0.7 ? "open" : "close");
    } else {
        note_reset(note, NOTE_REMARK);
        strcpy(note->text, "remark");
    }
    strcpy(note->person, person);
}

static void random_event(struct random *random, int64_t now_ns, struct event *event)
{
    double dice = random_uniform(random);
    *event = (struct event){.stream = 1, .known_ns = now_ns};
    if (dice < 0.12) {
        event->kind = EVENT_CALL;
        struct call *call = &event->as.call;
        call->group = (enum group)(random_bits(random) % GROUP_COUNT);
        call->evidence = random_uniform(random) < 0.3 ? 10 : random_between(random, -1, 6);
        call->end_ns = now_ns - time_from_s(random_between(random, 0, 3));
        call->start_ns = call->end_ns - TIME_NS_PER_S;
        call->bearing_deg = call->mirror_deg = NAN;
    } else if (dice < 0.3) {
        event->kind = EVENT_IMPULSE;
        event->as.impulse.time_ns = now_ns - TIME_NS_PER_S / 10;
    } else if (dice < 0.38) {
        event->kind = EVENT_UNHEARD;
        int64_t end_ns = now_ns - time_from_s(random_between(random, 0, 2));
        event->as.unheard =
            (struct unheard){.start_ns = end_ns - time_from_s(random_between(random, 0.1, 10)),
                             .end_ns = end_ns,
                             .high_hz = 1000,
                             .cause = (enum unheard_cause)(random_bits(random) % 5)};
    } else if (dice < 0.42)
        event->kind = EVENT_LEVEL;
    else if (dice < 0.43)
        event->kind = EVENT_RUN;
    else {
        event->kind = EVENT_NOTE;
        event->stream = 0;
        random_note(random, &event->as.note);
    }
}

/* ---- what must hold, kept from the events alone */
struct oracle {
    const struct permit *permit;
    bool visual[4], acoustic[4];
    int64_t kept_ns, mark_ns;            /* time for which both were on watch, all in all */
    int64_t held_until_ns[GROUP_COUNT];  /* by a detection that is inside whatever one thinks of distances */
    int64_t heard_until_ns[GROUP_COUNT]; /* by a sure call, while nobody has said where anything is */
    int64_t placed_ns;
    int64_t released_ns; /* by somebody on watch; -1 when the source sounded since */
};

static bool on_watch(const struct oracle *oracle, const char *person)
{
    for (int i = 0; i < 4; i++)
        if (strcmp(people[i], person) == 0)
            return oracle->visual[i] || oracle->acoustic[i];
    return false;
}

static bool kept(const struct oracle *oracle)
{
    bool visual = false, acoustic = false;
    for (int i = 0; i < 4; i++) {
        visual = visual || oracle->visual[i];
        acoustic = acoustic || oracle->acoustic[i];
    }
    return visual && acoustic;
}

static int64_t clearance_ns(const struct permit *permit, enum group group)
{
    for (uint32_t i = 0; i < permit->n_clearances; i++)
        if (permit->clearances[i].groups & PERMIT_GROUP_BIT(group))
            return time_from_s(permit->clearances[i].minutes * 60);
    return 0;
}

static void hold(struct oracle *oracle, enum group group, int64_t when_ns)
{
    int64_t until = when_ns + clearance_ns(oracle->permit, group);
    if (clearance_ns(oracle->permit, group) && until > oracle->held_until_ns[group])
        oracle->held_until_ns[group] = until;
}

static void oracle_note(struct oracle *oracle, const struct note *note, int64_t now_ns)
{
    bool sign = note->kind == NOTE_SIGN_ON || note->kind == NOTE_SIGN_OFF;
    for (int i = 0; sign && i < 4; i++)
        if (strcmp(people[i], note->person) == 0)
            *(strcmp(note->watch, "visual") == 0 ? &oracle->visual[i] : &oracle->acoustic[i]) =
                note->kind == NOTE_SIGN_ON;
    if (note->kind == NOTE_RELEASE && on_watch(oracle, note->person))
        oracle->released_ns = now_ns;
    if (note->kind == NOTE_SOURCE && strcmp(note->source_state, "off") != 0 &&
        strcmp(note->source_state, "stopped") != 0)
        oracle->released_ns = -1;
    /* Seen within 100 m: inside every zone of the three permits with P above 0.99. */
    if (note->kind == NOTE_SIGHTING && note->distance_m <= 100 && !note->leaving)
        hold(oracle, note->group, now_ns);
    /* What may end a hold: then nothing is expected of any group. */
    if (note->kind == NOTE_VERDICT || (note->kind == NOTE_SIGHTING && note->leaving))
        memset(oracle->held_until_ns, 0, sizeof oracle->held_until_ns);
}

static void oracle_event(struct oracle *oracle, const struct event *event)
{
    if (event->kind == EVENT_NOTE) {
        const struct note *note = &event->as.note;
        oracle_note(oracle, note, event->known_ns);
        /* A distance may be one outside, and it is believed for as long as calls belong together. */
        if (note->kind == NOTE_SIGHTING || note->kind == NOTE_DISTANCE || note->kind == NOTE_VERDICT) {
            memset(oracle->heard_until_ns, 0, sizeof oracle->heard_until_ns);
            oracle->placed_ns = event->known_ns;
        }
    }
    if (event->kind != EVENT_CALL || event->as.call.evidence < 10)
        return;
    enum group group = event->as.call.group;
    bool counts = oracle->permit->unknown[group] != UNKNOWN_IGNORE &&
                  event->known_ns > oracle->placed_ns + 600 * TIME_NS_PER_S;
    if (counts && clearance_ns(oracle->permit, group))
        oracle->heard_until_ns[group] = event->as.call.end_ns + clearance_ns(oracle->permit, group);
}

static void must_hold(const struct oracle *oracle, const struct seen *seen, int64_t now_ns)
{
    bool may = seen->words[1] == ADVICE_MAY_START;
    for (unsigned g = 0; g < GROUP_COUNT; g++)
        if ((may || seen->words[1] == ADVICE_RESUME) &&
            (oracle->held_until_ns[g] > now_ns || oracle->heard_until_ns[g] > now_ns))
            fail_msg("'%s' at %.3f s while a %s is inside until %.3f s",
                     advice_text((enum advice_word)seen->words[1]), time_to_s(now_ns),
                     group_text((enum group)g), time_to_s(oracle->held_until_ns[g]));
    if (!may)
        return;
    assert_true(kept(oracle));
    assert_true(oracle->released_ns >= 0);
    assert_true(oracle->kept_ns >= time_from_s(oracle->permit->pre_watches[0].minutes * 60));
}

static bool restrains(int word)
{
    return word == ADVICE_STOP || word == ADVICE_HOLD_POWER || word == ADVICE_REDUCE_POWER ||
           word == ADVICE_DO_NOT_START;
}

/* What is no decision of a person and no passing of time takes no restraint away. */
static void fault_takes_nothing(const struct event *event, int before, int after)
{
    bool fault = event->kind == EVENT_UNHEARD || event->kind == EVENT_LEVEL;
    bool gone = event->kind == EVENT_NOTE && event->as.note.kind == NOTE_SIGN_OFF;
    if ((fault || gone) && restrains(before) && !restrains(after))
        fail_msg("%s turns '%s' into '%s'", flow_event_kind_text(event->kind),
                 advice_text((enum advice_word)before), advice_text((enum advice_word)after));
    if (event->kind == EVENT_RUN && (before == ADVICE_STOP || before == ADVICE_DO_NOT_START) &&
        !restrains(after))
        fail_msg("a restart turns '%s' into '%s'", advice_text((enum advice_word)before),
                 advice_text((enum advice_word)after));
}

/* One sequence of events, with or without calls of watch_advance between them. */
static struct seen run_sequence(const struct permit *permit, uint64_t seed, unsigned steps, bool divide)
{
    struct random random, cuts;
    random_reset(&random, seed);
    random_reset(&cuts, seed + 1000000);
    struct watch *watch = new_watch(permit);
    struct seen seen = nothing_seen();
    struct outcome_sink sink = {see, &seen};
    struct oracle oracle = {.permit = permit, .released_ns = -1};
    uint64_t counters[8] = {0};
    uint32_t run = 1;
    int64_t now_ns = 0;
    double pace_s = permit->pre_watches[0].minutes * 60 / 20;
    for (unsigned i = 0; i < steps; i++) {
        struct event event;
        int64_t from_ns = now_ns;
        now_ns +=
            time_from_s(pace_s * random_exponential(&random) * (random_uniform(&random) < 0.1 ? 10 : 1));
        random_event(&random, now_ns, &event);
        if (event.kind == EVENT_RUN) {
            event.as.run_mark = (struct run_mark){from_ns + (now_ns - from_ns) / 2, now_ns};
            event.stream = 0;
            memset(counters, 0, sizeof counters);
            run++;
        }
        event.run = run;
        event.counter = ++counters[event.kind];
        int64_t live_until_ns = event.kind == EVENT_RUN ? event.as.run_mark.outage_start_ns : now_ns;
        if (divide)
            for (int64_t cut = from_ns; cut < live_until_ns;) {
                assert_int_equal(watch_advance(watch, cut, &sink), STATUS_OK);
                cut += 1 + (int64_t)((double)(live_until_ns - from_ns) * random_uniform(&cuts));
            }
        if (!divide && event.kind != EVENT_RUN) /* the undivided way still stops once, to look */
            assert_int_equal(watch_advance(watch, now_ns, &sink), STATUS_OK);
        if (kept(&oracle))
            oracle.kept_ns += now_ns - oracle.mark_ns;
        oracle.mark_ns = now_ns;
        int before = seen.words[1];
        assert_int_equal(watch_push(watch, &event, &sink), STATUS_OK);
        oracle_event(&oracle, &event);
        must_hold(&oracle, &seen, now_ns);
        if (!divide)
            fault_takes_nothing(&event, before, seen.words[1]);
    }
    watch_destroy(watch);
    return seen;
}

static unsigned steps_for_length(void)
{
    return test_length() == TEST_LONG ? 300000 : test_length() == TEST_SHORT ? 2000 : 20000;
}

static void safety_and_division(void **state)
{
    (void)state;
    unsigned steps = steps_for_length();
    for (int p = 0; p < 3; p++)
        for (uint64_t seed = 1; seed <= 4; seed++) {
            struct seen whole = run_sequence(&permits[p], seed, steps / 4, false);
            struct seen divided = run_sequence(&permits[p], seed, steps / 4, true);
            printf("# figure %s seed %llu: %u events, %llu outcomes, may start %u, stop %u, hold %u times\n",
                   permit_ids[p], (unsigned long long)seed, steps / 4, (unsigned long long)whole.n,
                   whole.given[ADVICE_MAY_START], whole.given[ADVICE_STOP], whole.given[ADVICE_HOLD_POWER]);
            assert_true(whole.given[ADVICE_MAY_START] > 0 && whole.given[ADVICE_STOP] > 0);
            assert_true(whole.n > steps / 4);
            assert_int_equal(whole.n, divided.n);
            assert_true(whole.digest == divided.digest);
        }
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

/* Whatever has happened: source off, people on watch, time, a release, and the start is permitted. */
static void no_phase_is_dead(void **state)
{
    (void)state;
    unsigned visited = 0;
    for (uint64_t seed = 100; seed < (test_length() == TEST_SHORT ? 130 : 400); seed++) {
        const struct permit *permit = &permits[seed % 3];
        struct random random;
        random_reset(&random, seed);
        struct watch *watch = new_watch(permit);
        struct seen seen = nothing_seen();
        struct outcome_sink sink = {see, &seen};
        int64_t now_ns = 0;
        uint64_t counter = 0;
        for (unsigned i = 0; i < 60; i++) {
            struct event event;
            now_ns += time_from_s(permit->pre_watches[0].minutes * 3 * random_exponential(&random));
            do
                random_event(&random, now_ns, &event);
            while (event.kind == EVENT_RUN);
            event.run = 1;
            event.counter = ++counter;
            assert_int_equal(watch_push(watch, &event, &sink), STATUS_OK);
        }
        visited |= 1U << seen.phase;
        push_note(watch, &sink, now_ns, &counter, NOTE_SOURCE, "source_state", "off");
        push_note(watch, &sink, now_ns, &counter, NOTE_SIGN_ON, "watch", "visual");
        push_note(watch, &sink, now_ns, &counter, NOTE_SIGN_ON, "watch", "acoustic");
        now_ns += 3 * 3600 * TIME_NS_PER_S;
        push_note(watch, &sink, now_ns, &counter, NOTE_RELEASE, NULL, NULL);
        if (seen.words[1] != ADVICE_MAY_START)
            fail_msg("seed %llu ends in phase %s", (unsigned long long)seed, phase_text(seen.phase));
        watch_destroy(watch);
    }
    printf("# figure sequences ended in %d different phases\n", __builtin_popcount(visited));
    assert_true(__builtin_popcount(visited) >= 8);
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
        cmocka_unit_test(no_phase_is_dead),
        cmocka_unit_test(a_day_is_quick),
    };
    return cmocka_run_group_tests_name("properties", tests, load_permits, NULL);
}
