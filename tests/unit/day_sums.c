/* What is bound in 24 h stays bound when it comes in hundreds of pieces: outages and watch hours are never
 * summed too short (New Zealand, level 1: 240 min and 12 h), good watch never too long (Australia: 120 min).
 */
#include "support/test.h"

#include "base/time.h"
#include "rule/watch.h"
#include "support/permits.h"

#define MINUTE (60 * TIME_NS_PER_S)
#define MORNING_NS INT64_C(1781474400000000000) /* 2026-06-14 22:00 UTC: six in the morning at 120 E */

static struct permit permit;
static struct watch *watch;
static uint64_t counter;

static struct {
    enum advice_word crew;
    char reason[FLOW_TEXT_SIZE];
    unsigned n_hours;
    int64_t first_hours_ns;
} told;

static void take(void *context, const struct outcome *outcome)
{
    (void)context;
    if (outcome->kind == OUTCOME_ADVICE && strcmp(outcome->as.advice.station, "crew") == 0) {
        told.crew = outcome->as.advice.advice;
        memcpy(told.reason, outcome->as.advice.reason, sizeof told.reason);
    }
    if (outcome->kind == OUTCOME_FINDING && strcmp(outcome->as.finding.code, "watch hours passed") == 0 &&
        strstr(outcome->as.finding.detail, "in 24 h") && told.n_hours++ == 0)
        told.first_hours_ns = outcome->watch_ns;
}
static const struct outcome_sink sink = {take, NULL};

static void begin(const char *id)
{
    assert_true(test_load_permit(id, &permit));
    struct watch_setup setup = {.permit = &permit,
                                .contact_gap_s = 300,
                                .look_evidence = 4,
                                .act_evidence = 8,
                                .evidence_decay_s = 300,
                                .sighting_log_spread = 0.2,
                                .silence_s = 60,
                                .sound_speed_m_s = 1500};
    assert_int_equal(watch_create(&setup, &watch), STATUS_OK);
    watch_set_clock(watch, MORNING_NS);
    counter = 0;
    memset(&told, 0, sizeof told);
}

static void push_note(int64_t known_ns, enum note_kind kind, const char *const fields[][2])
{
    struct event event = {.kind = EVENT_NOTE, .run = 1, .known_ns = known_ns, .counter = ++counter};
    note_reset(&event.as.note, kind);
    for (; (*fields)[0]; fields++)
        assert_int_equal(note_set(&event.as.note, (*fields)[0], (*fields)[1], NULL), STATUS_OK);
    assert_int_equal(watch_push(watch, &event, &sink), STATUS_OK);
}
#define NOTE(at, kind, ...) push_note(at, kind, (const char *const[][2]){__VA_ARGS__, {NULL, NULL}})

/* Two minutes in every four nobody listens while the source sounds: after 240 min, in 120 pieces, stop. */
static void outages_in_pieces(void **state)
{
    (void)state;
    begin("nz-2013-level-1");
    NOTE(0, NOTE_SIGN_ON, {"person", "Ann"}, {"watch", "visual"});
    NOTE(0, NOTE_SIGN_ON, {"person", "Bo"}, {"watch", "acoustic"});
    NOTE(31 * MINUTE, NOTE_RELEASE, {"person", "Ann"});
    NOTE(32 * MINUTE, NOTE_SOURCE, {"person", "Cleo"}, {"source_state", "soft start"});
    NOTE(60 * MINUTE, NOTE_SOURCE, {"person", "Cleo"}, {"source_state", "full power"});
    int64_t now_ns = 61 * MINUTE;
    for (unsigned piece = 1; piece <= 120; piece++, now_ns += 4 * MINUTE) {
        NOTE(now_ns, NOTE_SIGN_OFF, {"person", "Bo"}, {"watch", "acoustic"});
        NOTE(now_ns + 2 * MINUTE, NOTE_SIGN_ON, {"person", "Bo"}, {"watch", "acoustic"});
        assert_true(told.crew != ADVICE_STOP);
    }
    NOTE(now_ns, NOTE_SIGN_OFF, {"person", "Bo"}, {"watch", "acoustic"});
    assert_int_equal(watch_advance(watch, now_ns + 1000 * TIME_NS_PER_US, &sink), STATUS_OK);
    assert_int_equal(told.crew, ADVICE_STOP);
    assert_non_null(strstr(told.reason, "240 min in 24 h"));
    watch_destroy(watch);
}

/* Four minutes in every six: twelve hours are full after 180 pieces, in the eighteenth hour. */
static void watch_hours_in_pieces(void **state)
{
    (void)state;
    begin("nz-2013-level-1");
    for (int64_t piece = 0; piece < 230; piece++) {
        NOTE(piece * 6 * MINUTE, NOTE_SIGN_ON, {"person", "Ann"}, {"watch", "visual"});
        NOTE((piece * 6 + 4) * MINUTE, NOTE_SIGN_OFF, {"person", "Ann"}, {"watch", "visual"});
    }
    assert_true(told.n_hours > 0);
    printf("# figure 12 h of watch in pieces of 4 min were full after %.3f h\n",
           time_to_s(told.first_hours_ns) / 3600);
    assert_true(told.first_hours_ns > (179 * 6 + 4) * MINUTE &&
                told.first_hours_ns <= 180 * 6 * MINUTE + TIME_NS_PER_US);
    watch_destroy(watch);
}

/* Half a minute in every minute and a half: two hours of good watch in 240 pieces, and not before. */
static void good_watch_in_pieces(void **state)
{
    (void)state;
    begin("australia-2008");
    NOTE(0, NOTE_POSITION, {"latitude_deg", "-20"}, {"longitude_deg", "120"});
    NOTE(0, NOTE_WEATHER, {"visibility_m", "500"});
    NOTE(0, NOTE_SIGN_ON, {"person", "Ann"}, {"watch", "visual"});
    struct watch_view view;
    int64_t now_ns = 90 * MINUTE; /* by then it is day */
    for (unsigned piece = 1; piece <= 241; piece++, now_ns += 3 * MINUTE / 2) {
        NOTE(now_ns, NOTE_WEATHER, {"visibility_m", "5000"});
        NOTE(now_ns + MINUTE / 2, NOTE_WEATHER, {"visibility_m", "500"});
        watch_get_view(watch, &view);
        assert_int_equal(view.release_possible, piece >= 240);
    }
    watch_destroy(watch);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(outages_in_pieces),
        cmocka_unit_test(watch_hours_in_pieces),
        cmocka_unit_test(good_watch_in_pieces),
    };
    return cmocka_run_group_tests_name("sums of a day", tests, NULL, NULL);
}
