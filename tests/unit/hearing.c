/* daemon/hearing: the curve of our impulses after a person has said that some are another's, against the
 * greatest of each step by the plainest of loops; and which channels are named as refused. */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "channels.h"
#include "hearing.h"
#include <math.h>
#include <stdlib.h>

#define MOST 16000

struct blow {
    double time_s, sel_db, peak_db;
    uint32_t stream;
    bool ours;
};

static struct blow blows[MOST]; /* the counter of each is its place + 1, whatever its stream */

static void hear(struct hearing_view *hearing, uint32_t i)
{
    const struct blow *blow = &blows[i];
    struct outcome outcome = {.kind = OUTCOME_EVENT, .run = 1, .stream = blow->stream, .counter = i + 1};
    outcome.as.event = (struct event){.kind = EVENT_IMPULSE, .stream = blow->stream};
    outcome.as.event.as.impulse = (struct impulse){.channel = 1,
                                                   .time_ns = time_from_s(blow->time_s),
                                                   .sel_db = blow->sel_db,
                                                   .peak_db = blow->peak_db,
                                                   .whose = blow->ours ? IMPULSE_OURS : IMPULSE_OTHERS};
    hearing_take(hearing, &outcome);
}

/* Says of the blows of a stream from one to another, each `each`-th, whose they are; as the watch does it. */
static void correct(struct hearing_view *hearing, uint32_t stream, uint32_t from, uint32_t to, uint32_t each,
                    bool ours)
{
    struct outcome outcome = {.kind = OUTCOME_CORRECTION, .run = 1};
    struct correction_outcome *correction = &outcome.as.correction;
    *correction = (struct correction_outcome){
        .run = 1, .stream = stream, .channel = 1, .whose = ours ? IMPULSE_OURS : IMPULSE_OTHERS};
    for (uint32_t i = from; i <= to; i++) {
        bool corrects = i < to && blows[i].stream == stream && i % each == 0;
        if (corrects) {
            blows[i].ours = ours;
            correction->counters[correction->n++] = i + 1;
        }
        if (correction->n == FLOW_MAX_CORRECTED || i == to) {
            correction->n_following = i < to;
            hearing_take(hearing, &outcome);
            correction->n = 0;
        }
    }
}

/* The greatest of ours in each step; of the steps before `kept`, of what was ours when it was heard. */
static void assert_curve(const struct hearing_view *hearing, uint32_t n, int64_t kept, const bool *were_ours)
{
    uint32_t shown = 0;
    int64_t last = (int64_t)blows[n - 1].time_s / BOARD_CURVE_STEP_S + 2;
    for (int64_t step = last - BOARD_CURVE_STEPS - 2; step <= last; step++) {
        double sel_db = -INFINITY, peak_db = -INFINITY;
        for (uint32_t i = 0; i < n; i++)
            if ((int64_t)floor(blows[i].time_s / BOARD_CURVE_STEP_S) == step &&
                (step < kept ? were_ours[i] : blows[i].ours)) {
                sel_db = fmax(sel_db, blows[i].sel_db);
                peak_db = fmax(peak_db, blows[i].peak_db);
            }
        uint32_t at = 0;
        while (at < hearing->n_curve && hearing->curve_step[at] != step)
            at++;
        if (at == hearing->n_curve) {
            assert_true(isinf(sel_db) || step < hearing->curve_step[0]);
            continue;
        }
        assert_near(hearing->curve_sel_db[at], sel_db, 1e-4);
        assert_near(hearing->curve_peak_db[at], peak_db, 1e-4);
        assert_true(at == 0 || hearing->curve_step[at - 1] < step);
        shown++;
    }
    assert_int_equal(shown, hearing->n_curve);
}

static void the_curve_drops_what_is_anothers(void **state)
{
    (void)state;
    struct random random;
    struct hearing_view *hearing = calloc(1, sizeof *hearing);
    bool *were_ours = calloc(MOST, sizeof *were_ours);
    assert_true(hearing && were_ours);
    random_reset(&random, 41);
    double at_s = 5;
    uint32_t n = 3000;
    for (uint32_t i = 0; i < n; i++) {
        at_s += 0.2 + random_uniform(&random);
        blows[i] = (struct blow){.time_s = at_s + (i % 3 == 0 ? 0.4 : 0), /* one stream is known later */
                                 .sel_db = 150 + 5 * random_normal(&random),
                                 .peak_db = 175 + 5 * random_normal(&random),
                                 .stream = 1 + (i % 3 == 0),
                                 .ours = random_uniform(&random) < 0.9};
        were_ours[i] = blows[i].ours;
        hear(hearing, i);
    }
    assert_curve(hearing, n, 0, were_ours);
    correct(hearing, 1, 0, n, 2, false);
    assert_curve(hearing, n, 0, were_ours);
    correct(hearing, 2, 1000, 1200, 1, false);
    correct(hearing, 1, 1000, 1200, 1, false); /* whole steps are empty */
    assert_curve(hearing, n, 0, were_ours);
    assert_true(hearing->n_curve < BOARD_CURVE_STEPS && n * 0.7 / 10 - hearing->n_curve > 8);
    correct(hearing, 1, 0, n, 2, true);
    assert_curve(hearing, n, 0, were_ours);
    free(were_ours);
    free(hearing);
}

/* Of the steps of which not everything is kept any more the curve stays as it was. */
static void what_is_no_longer_kept_stays(void **state)
{
    (void)state;
    struct random random;
    struct hearing_view *hearing = calloc(1, sizeof *hearing);
    bool *were_ours = calloc(MOST, sizeof *were_ours);
    assert_true(hearing && were_ours);
    random_reset(&random, 42);
    for (uint32_t i = 0; i < MOST; i++) {
        blows[i] = (struct blow){.time_s = 1 + i / 3.0,
                                 .sel_db = 150 + 5 * random_normal(&random),
                                 .peak_db = 175 + 5 * random_normal(&random),
                                 .stream = 1,
                                 .ours = true};
        were_ours[i] = true;
        hear(hearing, i);
    }
    assert_int_equal(hearing->n_curve, BOARD_CURVE_STEPS);
    correct(hearing, 1, 0, MOST, 2, false);
    int64_t kept = (int64_t)(blows[MOST - BOARD_MAX_HEARD].time_s / BOARD_CURVE_STEP_S) + 1;
    assert_true(kept > hearing->curve_step[0] + 50);
    assert_curve(hearing, MOST, kept, were_ours);
    free(were_ours);
    free(hearing);
}

/* A clip level of 180 dB (sensitivity -180 dB re 1 V/uPa, full scale 1 V) has room for a peak of 174 dB. */
static void refused_channels_are_named(void **state)
{
    (void)state;
    struct stream_settings *stream = calloc(1, sizeof *stream);
    char numbers[64] = "as it was";
    assert_non_null(stream);
    for (uint32_t c = 0; c < FLOW_MAX_CHANNELS; c++)
        stream->channels[c].calibration = (struct calibration){.known = true,
                                                               .sensitivity_db = -180,
                                                               .full_scale_v = 1,
                                                               .expected_peak_db = 174,
                                                               .role = ROLE_BOTH};
    assert_false(channels_refused(stream, FLOW_MAX_CHANNELS, numbers, sizeof numbers));
    assert_string_equal(numbers, "as it was");
    stream->channels[0].calibration.expected_peak_db = 174.1;
    stream->channels[2].calibration.expected_peak_db = 190;
    stream->channels[2].calibration.role = ROLE_MEASURE;
    stream->channels[4].calibration.expected_peak_db = 190; /* it listens: it measures no impulses */
    stream->channels[4].calibration.role = ROLE_LISTEN;
    stream->channels[11].calibration.expected_peak_db = 190;
    assert_true(channels_refused(stream, 4, numbers, sizeof numbers));
    assert_string_equal(numbers, "1, 3");
    assert_true(channels_refused(stream, FLOW_MAX_CHANNELS, numbers, sizeof numbers));
    assert_string_equal(numbers, "1, 3, 12");
    free(stream);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_curve_drops_what_is_anothers),
        cmocka_unit_test(what_is_no_longer_kept_stays),
        cmocka_unit_test(refused_channels_are_named),
    };
    return cmocka_run_group_tests_name("hearing", tests, NULL, NULL);
}
