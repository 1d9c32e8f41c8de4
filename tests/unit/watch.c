/* lib/rule: the table of contacts, and the watch at its edges. What the watch does is told in tests/scenario.
 */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "rule/contact.h"
#include "rule/watch.h"
#include "settings/permit.h"
#include <math.h>

#define SECOND TIME_NS_PER_S

/* ---- contacts */
static void open_contacts_are_never_forgotten(void **state)
{
    (void)state;
    static struct contacts contacts;
    memset(&contacts, 0, sizeof contacts);
    for (uint32_t i = 1; i <= WATCH_MAX_CONTACTS; i++)
        assert_int_equal(contacts_add(&contacts, GROUP_PORPOISE, 0)->number, i);
    assert_null(contacts_add(&contacts, GROUP_PORPOISE, 0));
    contacts_find(&contacts, 7)->state = CONTACT_CLEARED;
    contacts_find(&contacts, 5)->state = CONTACT_CLEARED;
    contacts_find(&contacts, 5)->holding = true; /* a closed one that still holds something back stays */
    struct contact *added = contacts_add(&contacts, GROUP_DELPHINID, 3);
    assert_int_equal(added->number, WATCH_MAX_CONTACTS + 1);
    assert_null(contacts_find(&contacts, 7));
    assert_non_null(contacts_find(&contacts, 5));
    assert_null(contacts_add(&contacts, GROUP_DELPHINID, 4));
    assert_ptr_equal(contacts_near(&contacts, GROUP_DELPHINID, 103, 100), added);
    assert_null(contacts_near(&contacts, GROUP_DELPHINID, 104, 100));
    added->state = CONTACT_DISMISSED;
    assert_null(contacts_near(&contacts, GROUP_DELPHINID, 4, 100));
}

/* Log-odds fade as exp(-t / tau): after one tau 1/e is left. */
static void evidence_fades(void **state)
{
    (void)state;
    struct contact contact = {.evidence = 10, .evidence_ns = 5 * SECOND};
    assert_near(contact_evidence(&contact, 305 * SECOND, 300), 3.6787944117, 1e-9);
    assert_near(contact_evidence(&contact, 5 * SECOND, 300), 10, 1e-12);
}

/* ---- the watch */
struct kept {
    unsigned n;
    struct outcome all[64];
};
static struct kept kept;
static struct permit permit;
static struct watch *watch;
static struct watch_view view;
static uint64_t counter;

static void take(void *context, const struct outcome *outcome)
{
    (void)context;
    if (kept.n < 64)
        kept.all[kept.n++] = *outcome;
}
static const struct outcome_sink sink = {take, NULL};

static struct watch_setup good_setup(void)
{
    return (struct watch_setup){.permit = &permit,
                                .contact_gap_s = 300,
                                .look_evidence = 4,
                                .act_evidence = 8,
                                .evidence_decay_s = 300,
                                .sighting_log_spread = 0.2,
                                .silence_s = 60,
                                .range_m = {[1] = {1500, 0, 3300}}, /* of stream 2 */
                                .sound_speed_m_s = 1500};
}

static int begin(void **state)
{
    (void)state;
    struct problems problems = {0};
    if (permit_load("config/permits/demonstration.cfg", NULL, &problems, &permit) != STATUS_OK)
        return -1;
    struct watch_setup setup = good_setup();
    kept.n = 0;
    counter = 0;
    return watch_create(&setup, &watch) == STATUS_OK ? 0 : -1;
}

static int end(void **state)
{
    (void)state;
    watch_destroy(watch);
    watch = NULL;
    return 0;
}

static void push(struct event event, int64_t known_ns)
{
    event.run = event.run ? event.run : 1;
    event.known_ns = known_ns;
    event.counter = ++counter;
    assert_int_equal(watch_push(watch, &event, &sink), STATUS_OK);
}

static void push_note(int64_t known_ns, enum note_kind kind, const char *const fields[][2])
{
    struct event event = {.kind = EVENT_NOTE};
    note_reset(&event.as.note, kind);
    for (; (*fields)[0]; fields++)
        assert_int_equal(note_set(&event.as.note, (*fields)[0], (*fields)[1], NULL), STATUS_OK);
    push(event, known_ns);
}
#define NOTE(at, kind, ...) push_note(at, kind, (const char *const[][2]){__VA_ARGS__, {NULL, NULL}})

static void bad_setups_and_times_are_refused(void **state)
{
    (void)state;
    struct watch *other = watch;
    struct watch_setup setup = good_setup();
    setup.contact_gap_s = 0;
    assert_int_equal(watch_create(&setup, &other), STATUS_BAD_ARGUMENT);
    setup = good_setup();
    setup.act_evidence = 3;
    assert_int_equal(watch_create(&setup, &other), STATUS_BAD_ARGUMENT);
    setup = good_setup();
    setup.permit = NULL;
    assert_int_equal(watch_create(&setup, &other), STATUS_BAD_ARGUMENT);
    static struct permit bad;
    bad = permit;
    bad.n_zones = 0;
    setup.permit = &bad;
    assert_int_equal(watch_create(&setup, &other), STATUS_BAD_ARGUMENT);
    assert_ptr_equal(other, watch);
    watch_destroy(NULL);
    assert_int_equal(watch_advance(watch, 10 * SECOND, &sink), STATUS_OK);
    assert_int_equal(watch_advance(watch, 9 * SECOND, &sink), STATUS_BAD_ARGUMENT);
    struct event event = {.kind = EVENT_LEVEL, .known_ns = 9 * SECOND};
    assert_int_equal(watch_push(watch, &event, &sink), STATUS_BAD_ARGUMENT);
    event = (struct event){.kind = EVENT_CALL, .known_ns = 11 * SECOND, .as.call.group = (enum group)77};
    assert_int_equal(watch_push(watch, &event, &sink), STATUS_BAD_ARGUMENT);
    assert_int_equal(kept.n, 0);
}

static void events_go_out_first_and_completed(void **state)
{
    (void)state;
    NOTE(3 * SECOND, NOTE_REMARK, {"text", "x"}, {"person", "Ann"});
    assert_int_equal(kept.all[0].kind, OUTCOME_EVENT);
    assert_int_equal(kept.all[0].as.event.as.note.known_ns, 3 * SECOND);
    assert_int_equal(kept.all[0].as.event.as.note.occurred_ns, 3 * SECOND);
    NOTE(4 * SECOND, NOTE_REMARK, {"text", "x"}, {"person", "Ann"}, {"occurred_ns", "1000000000"});
    assert_int_equal(kept.all[1].as.event.as.note.occurred_ns, SECOND);
    struct event impulse = {.kind = EVENT_IMPULSE, .stream = 1};
    impulse.as.impulse.time_ns = 5 * SECOND;
    push(impulse, 5 * SECOND);
    assert_int_equal(kept.all[2].as.event.as.impulse.whose, IMPULSE_UNKNOWN);
    assert_string_equal(kept.all[2].as.event.as.impulse.job, "");
    NOTE(6 * SECOND, NOTE_JOB, {"job", "A1"}, {"answer", "open"});
    NOTE(6 * SECOND, NOTE_SOURCE, {"source_state", "soft start"});
    kept.n = 0;
    impulse.as.impulse.time_ns = 7 * SECOND;
    push(impulse, 7 * SECOND);
    impulse.as.impulse.channel = 2; /* the same blow on another channel */
    impulse.as.impulse.time_ns += SECOND / 100;
    push(impulse, 7 * SECOND + SECOND / 100);
    assert_int_equal(kept.all[0].as.event.as.impulse.whose, IMPULSE_OURS);
    assert_string_equal(kept.all[0].as.event.as.impulse.job, "A1");
    watch_get_view(watch, &view);
    assert_int_equal(view.n_impulses, 1);
    assert_true(view.source_heard && view.source_said == PHASE_SOFT_START);
    assert_string_equal(view.job, "A1");
}

static struct event impulse_of(uint32_t stream, uint32_t channel, int64_t time_ns)
{
    struct event event = {.kind = EVENT_IMPULSE, .stream = stream};
    event.as.impulse =
        (struct impulse){.channel = channel, .time_ns = time_ns, .sel_db = 170, .peak_db = 190};
    return event;
}

/* Two streams, the second 1,500 m from the source: what it hears a second later is the same blow, though the
 * next one has been struck by then. */
static void a_blow_on_two_streams_is_one(void **state)
{
    (void)state;
    NOTE(SECOND, NOTE_JOB, {"job", "A1"}, {"answer", "open"});
    NOTE(2 * SECOND, NOTE_SOURCE, {"source_state", "soft start"});
    for (int i = 0; i < 20; i++) {
        int64_t struck_ns = (10 + i) * SECOND + SECOND / 2;
        if (i > 0)
            push(impulse_of(2, 1, struck_ns + SECOND / 50), struck_ns + SECOND / 4); /* the one before */
        push(impulse_of(1, 1, struck_ns), struck_ns + SECOND / 3);
    }
    watch_get_view(watch, &view);
    assert_int_equal(view.n_impulses, 20);
}

/* A channel beside the reference starts nothing and counts for nothing; whose it is the reference says. */
static void what_is_heard_beside_counts_for_nothing(void **state)
{
    (void)state;
    struct event beside = impulse_of(2, 3, 0);
    beside.as.impulse.beside = true;
    NOTE(SECOND, NOTE_JOB, {"job", "A1"}, {"answer", "open"});
    kept.n = 0;
    for (int i = 0; i < 10; i++) {
        beside.as.impulse.time_ns = (10 + i) * SECOND;
        push(beside, (11 + i) * SECOND);
    }
    assert_int_equal(kept.n, 10); /* the events themselves: no finding, phase or advice */
    watch_get_view(watch, &view);
    assert_false(view.source_heard);
    NOTE(30 * SECOND, NOTE_SOURCE, {"source_state", "soft start"});
    push(impulse_of(2, 1, 41 * SECOND), 42 * SECOND); /* struck at 40 s */
    kept.n = 0;
    beside.as.impulse.time_ns = 42 * SECOND + SECOND / 4; /* 1,800 m farther, 50 ms late */
    push(beside, 43 * SECOND);
    assert_int_equal(kept.all[0].as.event.as.impulse.whose, IMPULSE_OURS);
    kept.n = 0;
    beside.as.impulse.time_ns = 43 * SECOND; /* nothing was struck then */
    push(beside, 44 * SECOND);
    assert_int_equal(kept.all[0].as.event.as.impulse.whose, IMPULSE_UNKNOWN);
    watch_get_view(watch, &view);
    assert_int_equal(view.n_impulses, 1);
}

/* One bang, heard on two channels, is no source; a second one is. */
static void one_bang_is_no_source(void **state)
{
    (void)state;
    NOTE(0, NOTE_JOB, {"job", "A1"}, {"answer", "open"});
    struct event impulse = {.kind = EVENT_IMPULSE, .stream = 1};
    for (int i = 0; i < 2; i++) {
        impulse.as.impulse.channel = (uint32_t)(i + 1);
        impulse.as.impulse.time_ns = 10 * SECOND + i;
        push(impulse, 11 * SECOND);
    }
    watch_get_view(watch, &view);
    assert_int_equal(view.phase, PHASE_OFF);
    impulse.as.impulse.time_ns = 12 * SECOND;
    push(impulse, 12 * SECOND);
    watch_get_view(watch, &view);
    assert_int_equal(view.phase, PHASE_SOFT_START);
    assert_int_equal(kept.all[kept.n - 1].kind, OUTCOME_ADVICE);
    assert_int_equal(kept.all[kept.n - 1].as.advice.advice, ADVICE_STOP);
}

static void counters_begin_anew_with_each_run(void **state)
{
    (void)state;
    NOTE(0, NOTE_SIGN_ON, {"person", "Ann"}, {"watch", "visual"});
    NOTE(0, NOTE_SIGN_ON, {"person", "Bo"}, {"watch", "acoustic"});
    NOTE(5 * SECOND, NOTE_SIGHTING, {"person", "Ann"}, {"group", "porpoise"}, {"distance_m", "50"});
    struct event run = {.kind = EVENT_RUN, .run = 2};
    run.as.run_mark = (struct run_mark){10 * SECOND, 20 * SECOND};
    kept.n = 0;
    push(run, 20 * SECOND);
    assert_int_equal(kept.all[0].kind, OUTCOME_EVENT); /* the run is the first entry of its run */
    assert_int_equal(kept.all[0].run, 2);
    kept.n = 0;
    assert_int_equal(watch_advance(watch, 200 * SECOND, &sink), STATUS_OK);
    assert_true(kept.n >= 2);
    bool seen[5] = {false};
    for (unsigned i = 0; i < kept.n; i++) {
        assert_int_equal(kept.all[i].run, 2);
        assert_true(seen[kept.all[i].kind] || kept.all[i].counter == 1);
        seen[kept.all[i].kind] = true;
    }
    assert_true(seen[OUTCOME_CONTACT] && seen[OUTCOME_PHASE]);
}

static void each_station_answers_for_itself(void **state)
{
    (void)state;
    NOTE(0, NOTE_SIGN_ON, {"person", "Ann"}, {"watch", "visual"});
    NOTE(0, NOTE_SIGN_ON, {"person", "Bo"}, {"watch", "acoustic"});
    watch_get_view(watch, &view);
    char id[FLOW_ID_SIZE];
    unsigned crew = strcmp(view.advice[0].advice.station, "crew") == 0 ? 0 : 1;
    strcpy(id, view.advice[crew].id);
    assert_true(view.advice[crew].in_force && !view.advice[crew].acknowledged);
    NOTE(SECOND, NOTE_ACKNOWLEDGEMENT, {"person", "Cy"}, {"station", "bridge"}, {"advice", id},
         {"answer", "seen"});
    NOTE(2 * SECOND, NOTE_ACKNOWLEDGEMENT, {"person", "Di"}, {"station", "hammer cab"}, {"advice", id},
         {"answer", "passed"});
    NOTE(3 * SECOND, NOTE_ACKNOWLEDGEMENT, {"person", "Cy"}, {"station", "bridge"}, {"advice", id},
         {"answer", "stopped"});
    NOTE(4 * SECOND, NOTE_ACKNOWLEDGEMENT, {"person", "Bo"}, {"station", "bridge"}, {"advice", id},
         {"answer", "passed"}); /* by the observer's voice: beside the station's own answer */
    watch_get_view(watch, &view);
    const struct watch_advice *advice = &view.advice[crew];
    assert_true(advice->acknowledged);
    assert_string_equal(advice->acknowledged_by, "Bo");
    assert_int_equal(advice->n_acknowledgements, 3);
    assert_string_equal(advice->acknowledgements[0].station, "bridge");
    assert_string_equal(advice->acknowledgements[0].answer, "stopped");
    assert_int_equal(advice->acknowledgements[0].known_ns, 3 * SECOND);
    assert_string_equal(advice->acknowledgements[1].person, "Di");
    assert_string_equal(advice->acknowledgements[2].answer, "passed");
}

/* An advice in force is kept while 100 others for the other station come and go. */
static void advice_in_force_is_never_forgotten(void **state)
{
    (void)state;
    NOTE(0, NOTE_SIGN_ON, {"person", "Ann"}, {"watch", "visual"});
    NOTE(0, NOTE_SIGN_ON, {"person", "Bo"}, {"watch", "acoustic"});
    for (int i = 0; i < 100; i++) {
        int64_t at = (i + 1) * SECOND / 10;
        char number[16];
        snprintf(number, sizeof number, "%d", i + 1);
        struct event call = {.kind = EVENT_CALL, .stream = 1};
        call.as.call.group = GROUP_PORPOISE;
        call.as.call.start_ns = call.as.call.end_ns = at;
        call.as.call.evidence = 20;
        push(call, at);
        NOTE(at, NOTE_VERDICT, {"person", "Bo"}, {"contact", number}, {"verdict", "dismiss"},
             {"text", "noise"});
    }
    watch_get_view(watch, &view);
    assert_int_equal(view.n_advice, WATCH_MAX_ADVICE);
    unsigned in_force[2] = {0, 0};
    for (uint32_t i = 0; i < view.n_advice; i++)
        if (view.advice[i].in_force) {
            bool crew = strcmp(view.advice[i].advice.station, "crew") == 0;
            in_force[crew]++;
            assert_int_equal(view.advice[i].advice.advice, ADVICE_DO_NOT_START);
            assert_true(!crew || view.advice[i].since_ns == 0);
        }
    assert_int_equal(in_force[0], 1);
    assert_int_equal(in_force[1], 1);
    assert_int_equal(view.n_contacts, WATCH_MAX_CONTACTS); /* the newest, dismissed as they are */
    assert_int_equal(view.contacts[0].contact.contact, 100);
}

/* ---- a sound of no animal takes back what was taken for one */
static void push_call(int64_t at, double evidence)
{
    struct event call = {.kind = EVENT_CALL, .stream = 1};
    call.as.call = (struct call){.group = GROUP_DELPHINID, .start_ns = at - SECOND, .end_ns = at};
    call.as.call.evidence = evidence;
    snprintf(call.as.call.class_name, CALL_CLASS_SIZE, "whistle");
    push(call, at);
}

/* `against`: how many events before this one its call was. */
static void push_sound(int64_t at, double evidence, uint64_t against)
{
    struct event sound = {.kind = EVENT_CALL, .stream = 1};
    sound.as.call = (struct call){.start_ns = at - SECOND, .end_ns = at, .evidence = evidence, .n_sounds = 1};
    snprintf(sound.as.call.class_name, CALL_CLASS_SIZE, "sonar ping");
    sound.as.call.n_against = against > 0;
    sound.as.call.against[0] = counter + 1 - against;
    push(sound, at);
}

/* By hand: 6 and 6 that fade as exp(-t / 300 s); the sound takes the second one, or all. */
static void a_sound_takes_back_what_it_covers(void **state)
{
    (void)state;
    NOTE(0, NOTE_SIGN_ON, {"person", "Ann"}, {"watch", "visual"});
    NOTE(0, NOTE_SIGN_ON, {"person", "Bo"}, {"watch", "acoustic"});
    push_sound(SECOND, -10, 0);
    watch_get_view(watch, &view);
    assert_int_equal(view.n_contacts, 0); /* it is part of no contact */
    push_call(10 * SECOND, 6);
    push_call(20 * SECOND, 6);
    watch_get_view(watch, &view);
    assert_int_equal(view.contacts[0].contact.grade, GRADE_ACT);
    assert_true(view.contacts[0].countdown_ends_ns > 0);
    push_sound(25 * SECOND, -10, 1);
    watch_get_view(watch, &view);
    const struct watch_contact *contact = &view.contacts[0];
    assert_near(contact->evidence, 6 * exp(-15.0 / 300), 1e-9);
    assert_int_equal(contact->contact.n_calls, 1);
    assert_int_equal(contact->contact.n_taken_back, 1);
    assert_near(contact->contact.against, 6, 1e-12);
    assert_int_equal(contact->contact.grade, GRADE_LOOK);
    assert_int_equal(contact->countdown_ends_ns, -1); /* nobody is asked about it any more */
    push_sound(30 * SECOND, -2, 3);                   /* part of the first */
    watch_get_view(watch, &view);
    assert_near(view.contacts[0].evidence, 4 * exp(-20.0 / 300), 1e-9);
    push_sound(31 * SECOND, -10, 4);
    watch_get_view(watch, &view);
    assert_int_equal(view.contacts[0].contact.state, CONTACT_CLEARED);
    assert_int_equal(view.contacts[0].contact.n_calls, 0);
    assert_near(view.contacts[0].contact.against, 12, 1e-12);
}

/* Once it has gone to the crew, or an observer vouches for it, only people loosen it. */
static void a_sound_ends_no_instruction(void **state)
{
    (void)state;
    NOTE(0, NOTE_SIGN_ON, {"person", "Ann"}, {"watch", "visual"});
    NOTE(0, NOTE_SIGN_ON, {"person", "Bo"}, {"watch", "acoustic"});
    push_call(10 * SECOND, 12);
    uint64_t of_call = counter;
    assert_int_equal(watch_advance(watch, 60 * SECOND, &sink), STATUS_OK); /* unanswered: to the crew */
    push_sound(61 * SECOND, -20, counter + 1 - of_call);
    watch_get_view(watch, &view);
    assert_int_equal(view.contacts[0].contact.grade, GRADE_ACT);
    assert_int_equal(view.contacts[0].contact.state, CONTACT_OPEN);
    assert_true(view.contacts[0].clears_at_ns > 0);
    assert_near(view.contacts[0].contact.against, 12, 1e-12);
}

static void no_room_for_another_person_is_said(void **state)
{
    (void)state;
    for (int i = 0; i <= WATCH_MAX_PEOPLE; i++) {
        char name[16];
        snprintf(name, sizeof name, "P%d", i);
        NOTE(0, NOTE_SIGN_ON, {"person", name}, {"watch", "crew"}, {"station", "bridge"});
    }
    watch_get_view(watch, &view);
    assert_int_equal(view.n_people, WATCH_MAX_PEOPLE);
    assert_int_equal(kept.all[kept.n - 1].kind, OUTCOME_FINDING);
    assert_string_equal(kept.all[kept.n - 1].as.finding.code, "note without effect");
    assert_int_equal(view.phase, PHASE_OFF);
}

/* ---- positions */

static const struct impulse *last_impulse(void)
{
    for (unsigned i = kept.n; i > 0; i--)
        if (kept.all[i - 1].kind == OUTCOME_EVENT && kept.all[i - 1].as.event.kind == EVENT_IMPULSE)
            return &kept.all[i - 1].as.event.as.impulse;
    fail_msg("no impulse came out");
    return NULL;
}

/* A vessel steams north from a pile with a hydrophone 40 m down under its antenna: each impulse carries its
 * range. One degree of latitude is 111.13 km at 45 degrees (111132.9 m: any table of the ellipsoid). */
static void impulses_carry_their_range(void **state)
{
    (void)state;
    struct watch_setup setup = good_setup();
    setup.ranges = (struct ranges_setup){.moves = RANGES_ARRAY, .oldest_s = 60, .n_streams = 1};
    setup.ranges.streams[0].place_m[0][2] = 40;
    watch_destroy(watch);
    assert_int_equal(watch_create(&setup, &watch), STATUS_OK);
    struct event blow = {.kind = EVENT_IMPULSE, .stream = 1};
    blow.as.impulse = (struct impulse){.channel = 1, .time_ns = SECOND, .sel_db = 160, .peak_db = 180};
    push(blow, SECOND);
    assert_true(isnan(last_impulse()->range_m));
    assert_int_equal(last_impulse()->range_from, RANGE_NO_SOURCE);
    NOTE(2 * SECOND, NOTE_POSITION, {"latitude_deg", "44.995"}, {"longitude_deg", "-3.5"});
    struct event here = {.kind = EVENT_POSITION};
    here.as.position = (struct position){.of = POSITION_OF_VESSEL,
                                         .latitude_deg = 45.005,
                                         .longitude_deg = -3.5,
                                         .heading_deg = NAN,
                                         .course_deg = NAN,
                                         .speed_m_s = NAN,
                                         .accuracy_m = NAN,
                                         .occurred_ns = 3 * SECOND};
    assert_true(watch_wants_position(watch, &here.as.position));
    push(here, 3 * SECOND);
    here.as.position.occurred_ns = 4 * SECOND;
    assert_false(watch_wants_position(watch, &here.as.position));
    push(blow, 5 * SECOND);
    assert_near(last_impulse()->range_m, sqrt(1111.329 * 1111.329 + 1600), 0.06);
    blow.as.impulse.range_m = 333; /* as from a ledger: it stays what it was */
    blow.as.impulse.range_from = RANGE_POSITIONS;
    push(blow, 6 * SECOND);
    assert_true(last_impulse()->range_m == 333);
    blow.as.impulse.range_from = RANGE_UNSET;
    push(blow, 64 * SECOND);
    assert_int_equal(last_impulse()->range_from, RANGE_TOO_OLD);
    NOTE(65 * SECOND, NOTE_JOB, {"job", "pile 1"}, {"answer", "open"});
    NOTE(66 * SECOND, NOTE_JOB, {"job", "pile 1"}, {"answer", "close"});
    here.as.position.occurred_ns = 66 * SECOND;
    push(here, 66 * SECOND);
    push(blow, 67 * SECOND); /* where the next pile is nobody has said */
    assert_int_equal(last_impulse()->range_from, RANGE_NO_SOURCE);
    here.as.position.latitude_deg = 91;
    here.known_ns = 68 * SECOND;
    assert_int_equal(watch_push(watch, &here, &sink), STATUS_BAD_ARGUMENT);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(open_contacts_are_never_forgotten),
        cmocka_unit_test(evidence_fades),
        cmocka_unit_test_setup_teardown(bad_setups_and_times_are_refused, begin, end),
        cmocka_unit_test_setup_teardown(events_go_out_first_and_completed, begin, end),
        cmocka_unit_test_setup_teardown(one_bang_is_no_source, begin, end),
        cmocka_unit_test_setup_teardown(a_blow_on_two_streams_is_one, begin, end),
        cmocka_unit_test_setup_teardown(what_is_heard_beside_counts_for_nothing, begin, end),
        cmocka_unit_test_setup_teardown(counters_begin_anew_with_each_run, begin, end),
        cmocka_unit_test_setup_teardown(each_station_answers_for_itself, begin, end),
        cmocka_unit_test_setup_teardown(advice_in_force_is_never_forgotten, begin, end),
        cmocka_unit_test_setup_teardown(impulses_carry_their_range, begin, end),
        cmocka_unit_test_setup_teardown(a_sound_takes_back_what_it_covers, begin, end),
        cmocka_unit_test_setup_teardown(a_sound_ends_no_instruction, begin, end),
        cmocka_unit_test_setup_teardown(no_room_for_another_person_is_said, begin, end),
    };
    return cmocka_run_group_tests_name("watch", tests, NULL, NULL);
}
