/* The peak of an explosion against its published law, and the order that the watch judges a charge by. */
#include "support/test.h"

#include "base/time.h"
#include "level/charge.h"
#include "rule/watch.h"
#include "support/permits.h"
#include <math.h>

/* 52.4 MPa of 1 kg at 1 m is 274.4 dB re 1 uPa; a decade of range takes 22.6 dB; charges of 8 times the
 * weight sound alike at twice the range (similitude: Cole, Underwater Explosions, 1948; the constants: Arons,
 * J. Acoust. Soc. Am. 26, 343, 1954). */
static void peaks_follow_the_law(void **state)
{
    (void)state;
    assert_true(fabs(charge_peak_db(1, 1) - 274.387) < 0.001); /* 20 lg(5.24e13) */
    assert_true(fabs(charge_peak_db(1, 100) - charge_peak_db(1, 1000) - 22.6) < 1e-9);
    assert_true(fabs(charge_peak_db(8, 600) - charge_peak_db(1, 300)) < 1e-9);
    assert_true(isnan(charge_peak_db(0, 10)) && isnan(charge_peak_db(1, NAN)) &&
                isnan(charge_peak_db(NAN, 1)));
}

static void orders_are_told_apart(void **state)
{
    (void)state;
    double high = charge_peak_db(250.25, 1000), low = charge_peak_db(0.25, 1000), apart = high - low;
    assert_true(apart > 22 && apart < 23); /* 22.6 lg(1001) / 3 */
    assert_int_equal(charge_judge(high - 3, false, 1000, 250, 0.25).order, CHARGE_HIGH_ORDER);
    assert_int_equal(charge_judge(low + 3, false, 1000, 250, 0.25).order, CHARGE_LOW_ORDER);
    assert_int_equal(charge_judge((high + low) / 2, false, 1000, 250, 0.25).order, CHARGE_UNTOLD);
    assert_int_equal(charge_judge(low, true, 1000, 250, 0.25).order, CHARGE_UNTOLD); /* at least so loud */
    assert_int_equal(charge_judge(high, true, 1000, 250, 0.25).order, CHARGE_HIGH_ORDER);
    assert_int_equal(charge_judge(high, false, 1000, 2, 1).order, CHARGE_UNTOLD); /* 3.6 dB apart */
    assert_int_equal(charge_judge(high, false, NAN, 250, 0.25).order, CHARGE_UNTOLD);
    assert_int_equal(charge_judge(high - 20, false, 1000, 250.25, NAN).order, CHARGE_LOW_ORDER);
    assert_int_equal(charge_judge(high, false, 1000, 250.25, NAN).order, CHARGE_HIGH_ORDER);
}

static char found[FLOW_TEXT_SIZE];
static unsigned n_found, n_causes;
static int64_t found_ns;

static void take(void *context, const struct outcome *outcome)
{
    (void)context;
    if (outcome->kind != OUTCOME_FINDING || strcmp(outcome->as.finding.code, "order of the charge") != 0)
        return;
    n_found++;
    n_causes = outcome->as.finding.n_causes;
    found_ns = outcome->watch_ns;
    assert_string_equal(outcome->as.finding.job, "mine 7");
    assert_string_equal(outcome->as.finding.grade, "indicative");
    memcpy(found, outcome->as.finding.detail, sizeof found);
}
static const struct outcome_sink sink = {take, NULL};

/* A mine of 250 kg with a donor of 0.25 kg, heard at 1,000 m. */
static void fire(double peak_db, bool relative, double range_m, int64_t judged_s)
{
    static struct permit permit;
    struct watch *watch;
    assert_true(test_load_permit("uk-explosives-2010", &permit));
    struct watch_setup setup = {.permit = &permit,
                                .contact_gap_s = 300,
                                .look_evidence = 4,
                                .act_evidence = 8,
                                .evidence_decay_s = 300,
                                .sighting_log_spread = 0.2,
                                .silence_s = 60,
                                .sound_speed_m_s = 1500,
                                .range_m[0] = {range_m}};
    assert_int_equal(watch_create(&setup, &watch), STATUS_OK);
    n_found = 0;
    struct event job = {.kind = EVENT_NOTE, .run = 1, .known_ns = TIME_NS_PER_S, .counter = 1};
    note_reset(&job.as.note, NOTE_JOB);
    static const char *const fields[][2] = {{"job", "mine 7"},
                                            {"answer", "open"},
                                            {"job_kind", "charge"},
                                            {"charge_kg", "250"},
                                            {"donor_kg", "0.25"}};
    for (size_t i = 0; i < sizeof fields / sizeof fields[0]; i++)
        assert_int_equal(note_set(&job.as.note, fields[i][0], fields[i][1], NULL), STATUS_OK);
    assert_int_equal(watch_push(watch, &job, &sink), STATUS_OK);
    struct event said = {.kind = EVENT_NOTE, .run = 1, .known_ns = 5 * TIME_NS_PER_S, .counter = 2};
    note_reset(&said.as.note, NOTE_SOURCE);
    assert_int_equal(note_set(&said.as.note, "source_state", "full power", NULL), STATUS_OK);
    assert_int_equal(watch_push(watch, &said, &sink), STATUS_OK);
    for (int i = 0; i < 3; i++) { /* the shock, and weaker echoes */
        struct event blow = {.kind = EVENT_IMPULSE, .stream = 1, .run = 1, .counter = (uint64_t)i + 1};
        blow.known_ns = 10 * TIME_NS_PER_S + i * TIME_NS_PER_S / 2;
        blow.as.impulse = (struct impulse){.channel = 1,
                                           .time_ns = blow.known_ns,
                                           .sel_db = peak_db - 25 - i,
                                           .peak_db = peak_db - 2 * i,
                                           .relative = relative};
        assert_int_equal(watch_push(watch, &blow, &sink), STATUS_OK);
    }
    assert_int_equal(watch_advance(watch, 60 * TIME_NS_PER_S, &sink), STATUS_OK);
    watch_destroy(watch);
    assert_int_equal(n_found, 1);
    assert_int_equal(found_ns, judged_s * TIME_NS_PER_S);
    assert_int_equal(n_causes, 2); /* the blow and the job's note */
}

static void a_charge_is_judged_once(void **state)
{
    (void)state;
    fire(charge_peak_db(250.25, 1000) - 4, false, 1000, 12);
    assert_true(strncmp(found, "high order: ", 12) == 0 && strstr(found, "at 1000 m"));
    fire(charge_peak_db(0.25, 1000) + 1, false, 1000, 12);
    assert_true(strncmp(found, "low order: ", 11) == 0);
    fire(charge_peak_db(0.25, 1000) + 1, false, NAN, 12);
    assert_non_null(strstr(found, "the range is unknown"));
    fire(-20, true, 1000, 12);
    assert_non_null(strstr(found, "no peak in uPa"));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(peaks_follow_the_law),
        cmocka_unit_test(orders_are_told_apart),
        cmocka_unit_test(a_charge_is_judged_once),
    };
    return cmocka_run_group_tests_name("charge", tests, NULL, NULL);
}
