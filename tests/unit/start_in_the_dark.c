/* What a permit asks of a start in poor visibility: Australia (EPBC Act Policy Statement 2.1) needs no ears,
 * but two hours of good watch in the last 24 and fewer than three stops; New Zealand's level 1 needs ears. */
#include "support/test.h"

#include "base/time.h"
#include "rule/watch.h"
#include "support/permits.h"

#define MINUTE (60 * TIME_NS_PER_S)
#define NOON_NS INT64_C(1781496000000000000) /* 2026-06-15 04:00 UTC: noon at 120 E */

static struct permit permit;
static struct watch *watch;
static struct watch_view view;
static uint64_t counter;

static void take(void *context, const struct outcome *outcome)
{
    (void)context;
    (void)outcome;
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
    watch_set_clock(watch, NOON_NS);
    counter = 0;
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

static bool may_start_at(int64_t now_ns)
{
    assert_int_equal(watch_advance(watch, now_ns, &sink), STATUS_OK);
    watch_get_view(watch, &view);
    return view.release_possible;
}

static void australia_needs_two_good_hours(void **state)
{
    (void)state;
    begin("australia-2008");
    NOTE(0, NOTE_POSITION, {"latitude_deg", "-20"}, {"longitude_deg", "120"});
    NOTE(0, NOTE_SIGN_ON, {"person", "Ann"}, {"watch", "visual"});
    assert_false(may_start_at(29 * MINUTE)); /* the pre-watch */
    assert_true(may_start_at(31 * MINUTE));
    NOTE(40 * MINUTE, NOTE_WEATHER, {"visibility_m", "2900"}); /* less than 3 km */
    assert_false(may_start_at(41 * MINUTE));
    NOTE(50 * MINUTE, NOTE_WEATHER, {"visibility_m", "3000"});
    assert_true(may_start_at(51 * MINUTE));
    NOTE(129 * MINUTE, NOTE_WEATHER, {"visibility_m", "500"}); /* 40 + 79 min of good watch */
    assert_false(may_start_at(130 * MINUTE));
    NOTE(130 * MINUTE, NOTE_WEATHER, {"visibility_m", "5000"});
    NOTE(132 * MINUTE, NOTE_WEATHER, {"visibility_m", "500"}); /* 121 */
    assert_true(may_start_at(133 * MINUTE));
    watch_destroy(watch);
}

static void new_zealand_needs_ears(void **state)
{
    (void)state;
    begin("nz-2013-level-1");
    NOTE(0, NOTE_POSITION, {"latitude_deg", "-20"}, {"longitude_deg", "120"});
    NOTE(0, NOTE_SIGN_ON, {"person", "Ann"}, {"watch", "visual"});
    NOTE(0, NOTE_SIGN_ON, {"person", "Bo"}, {"watch", "acoustic"});
    NOTE(40 * MINUTE, NOTE_WEATHER, {"visibility_m", "1400"});
    assert_true(may_start_at(41 * MINUTE));
    watch_destroy(watch);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(australia_needs_two_good_hours),
        cmocka_unit_test(new_zealand_needs_ears),
    };
    return cmocka_run_group_tests_name("start in the dark", tests, NULL, NULL);
}
