/* daemon/http: the board that pages read, the strips of sound, notes from JSON. The JSON reader is jansson, a
 * program of its own beside our writer. */
#include "support/test.h"

#include "base/time.h"
#include "http/board.h"
#include "http/note_json.h"
#include "http/sound.h"
#include <jansson.h>
#include <math.h>
#include <pthread.h>
#include <sodium.h>
#include <stdatomic.h>
#include <stdlib.h>

static struct permit permit = {.id = "test",
                               .title = "A \"test\" <permit>",
                               .n_zones = 1,
                               .zones = {{.name = "mitigation zone", .radius_m = 500}}};

static struct board *make_board(void)
{
    struct board_setup setup = {.site = "test",
                                .permit = &permit,
                                .run = 3,
                                .n_stations = 1,
                                .stations = {"hammer cab"},
                                .n_streams = 2};
    struct board *board = NULL;
    assert_int_equal(board_create(&setup, &board), STATUS_OK);
    return board;
}

static json_t *parse(const char *json, size_t length)
{
    json_error_t error;
    json_t *object = json_loadb(json, length, JSON_REJECT_DUPLICATES, &error);
    if (!object)
        fail_msg("%s at %d: %.*s", error.text, error.position, 200, json);
    return object;
}

static void fill(struct watch_view *watch, struct hearing_view *hearing)
{
    watch->watch_ns = 90 * TIME_NS_PER_S;
    watch->phase = PHASE_SOFT_START;
    watch->source_said = PHASE_BREAK;
    watch->n_contacts = 1;
    watch->contacts[0] = (struct watch_contact){.contact = {.contact = 7,
                                                            .group = GROUP_PORPOISE,
                                                            .grade = GRADE_ACT,
                                                            .bearing_deg = NAN,
                                                            .mirror_deg = NAN,
                                                            .p_inside = NAN},
                                                .clears_at_ns = -1,
                                                .countdown_ends_ns = 120 * TIME_NS_PER_S};
    watch->n_advice = 1;
    watch->advice[0] = (struct watch_advice){.advice = {.advice = ADVICE_STOP, .until_ns = -1, .n_causes = 1},
                                             .id = "3.0.advice.1",
                                             .in_force = true};
    snprintf(watch->advice[0].advice.station, NOTE_NAME_SIZE, "crew");
    watch->advice[0].n_acknowledgements = 2;
    watch->advice[0].acknowledgements[0] = (struct watch_acknowledgement){
        .station = "hammer cab", .person = "Bo Sand", .answer = "seen", .known_ns = 88 * TIME_NS_PER_S};
    watch->advice[0].acknowledgements[1] = (struct watch_acknowledgement){
        .station = "bridge", .person = "Cy Reef", .answer = "declined", .known_ns = 89 * TIME_NS_PER_S};
    snprintf(watch->advice[0].advice.reason, FLOW_TEXT_SIZE, "<script>alert(1)</script> \xc3\xa9 \xff \"");
    snprintf(watch->advice[0].advice.causes[0], FLOW_ID_SIZE, "3.0.contact.7");
    hearing->recording = true;
    hearing->committed_seq = 41;
    hearing->n_unrecorded = 1;
    snprintf(hearing->unrecorded[0], FLOW_ID_SIZE, "3.0.advice.1");
    hearing->n_streams = 1;
    hearing->streams[0].n_accounts = 1;
    hearing->streams[0].accounts[0] = (struct class_account){
        .name = "whistle", .hearable = true, .n_found = 4, .rejected = {[REJECT_SHAPE] = 9}};
    hearing->n_levels = 1;
    hearing->levels[0].stream = 1;
    hearing->levels[0].level = (struct level){.channel = 2, .spl_db = 100, .n_bands = 12, .relative = true};
    for (int i = 0; i < 12; i++)
        hearing->levels[0].level.band_db[i] = i < 11 ? 90 : NAN;
    hearing->levels[0].research = (struct hearing_research){.kurtosis = NAN};
    hearing->n_curve = 1;
    hearing->curve_step[0] = 8;
    hearing->curve_sel_db[0] = 150.5f;
    hearing->curve_peak_db[0] = NAN;
    hearing->n_exposures = 1;
    hearing->exposures[0] = (struct exposure_outcome){.value_db = NAN,
                                                      .level_db = NAN,
                                                      .value_pa_s = 30,
                                                      .level_pa_s = 41.5,
                                                      .distance_m = INFINITY,
                                                      .distance = "beyond 1000 km",
                                                      .n_clipped = 3};
    hearing->n_sources = 1;
    hearing->sources[0] = (struct source_outcome){.n_insertion_bands = 2,
                                                  .insertion_band_db = {NAN, 8},
                                                  .n_reductions = 1,
                                                  .reductions = {{"NMFS 2024 LF", 8.4, 7, 9}},
                                                  .quieting_falls_db = NAN,
                                                  .warning = "may pass",
                                                  .n_refused = 4};
}

/* What is not known is null, and what has another unit has another name. */
static void check_sums(json_t *root)
{
    json_t *point = json_array_get(json_object_get(root, "curve"), 0);
    assert_int_equal(json_integer_value(json_array_get(point, 0)), 8 * BOARD_CURVE_STEP_S);
    assert_near(json_number_value(json_array_get(point, 1)), 150.5, 1e-9);
    assert_true(json_is_null(json_array_get(point, 2)));
    json_t *exposure = json_array_get(json_object_get(root, "exposures"), 0);
    assert_true(json_is_null(json_object_get(exposure, "level_db")));
    assert_near(json_number_value(json_object_get(exposure, "level_pa_s")), 41.5, 1e-9);
    assert_true(json_is_null(json_object_get(exposure, "distance_m")));
    assert_string_equal(json_string_value(json_object_get(exposure, "distance")), "beyond 1000 km");
    assert_int_equal(json_integer_value(json_object_get(exposure, "n_clipped")), 3);
    json_t *source = json_array_get(json_object_get(root, "sources"), 0);
    json_t *bands = json_object_get(source, "insertion_bands_db");
    assert_int_equal(json_array_size(bands), 2);
    assert_true(json_is_null(json_array_get(bands, 0)));
    assert_near(json_number_value(json_array_get(bands, 1)), 8, 1e-9);
    json_t *reduction = json_array_get(json_object_get(source, "reductions"), 0);
    assert_string_equal(json_string_value(json_object_get(reduction, "weighting")), "NMFS 2024 LF");
    assert_near(json_number_value(json_object_get(reduction, "low_db")), 7, 1e-9);
    assert_true(json_is_null(json_object_get(source, "quieting_falls_db")));
    assert_string_equal(json_string_value(json_object_get(source, "warning")), "may pass");
    assert_int_equal(json_integer_value(json_object_get(source, "n_refused")), 4);
    json_t *level = json_array_get(json_object_get(root, "levels"), 0);
    assert_true(json_is_null(json_object_get(json_object_get(level, "research"), "kurtosis")));
}

static void a_snapshot_says_what_the_views_say(void **state)
{
    (void)state;
    struct board *board = make_board();
    struct watch_view *watch = calloc(1, sizeof *watch);
    struct hearing_view *hearing = calloc(1, sizeof *hearing);
    fill(watch, hearing);
    assert_int_equal(board_publish(board, watch, hearing), STATUS_OK);
    const struct snapshot *snapshot = board_take(board);
    json_t *root = parse(snapshot->json, snapshot->json_length);
    assert_near(json_number_value(json_object_get(root, "watch_s")), 90, 0);
    /* the word that people enter, as the note's table has it */
    assert_string_equal(json_string_value(json_object_get(json_object_get(root, "phase"), "source_said")),
                        "stopped");
    assert_string_equal(json_string_value(json_object_get(json_object_get(root, "phase"), "phase")),
                        "soft start");
    json_t *advice = json_array_get(json_object_get(root, "advice"), 0);
    assert_string_equal(json_string_value(json_object_get(advice, "advice")), "stop");
    assert_true(json_is_false(json_object_get(advice, "recorded")));
    assert_true(json_is_null(json_object_get(advice, "until_s")));
    assert_string_equal(json_string_value(json_object_get(advice, "reason")),
                        "<script>alert(1)</script> \xc3\xa9 \xef\xbf\xbd \"");
    json_t *answers = json_object_get(advice, "acknowledgements"), *second = json_array_get(answers, 1);
    assert_int_equal(json_array_size(answers), 2);
    assert_string_equal(json_string_value(json_object_get(second, "station")), "bridge");
    assert_string_equal(json_string_value(json_object_get(second, "person")), "Cy Reef");
    assert_string_equal(json_string_value(json_object_get(second, "answer")), "declined");
    assert_near(json_number_value(json_object_get(second, "time_s")), 89, 0);
    json_t *stream = json_array_get(json_object_get(root, "streams"), 0);
    json_t *account = json_array_get(json_object_get(stream, "classes"), 0);
    assert_string_equal(json_string_value(json_object_get(account, "class")), "whistle");
    assert_true(json_is_true(json_object_get(account, "hearable")));
    assert_int_equal(json_integer_value(json_object_get(account, "found")), 4);
    assert_int_equal(json_object_size(json_object_get(account, "rejected")), 1);
    assert_int_equal(json_integer_value(json_object_get(json_object_get(account, "rejected"), "shape")), 9);
    json_t *contact = json_array_get(json_object_get(root, "contacts"), 0);
    assert_int_equal(json_integer_value(json_object_get(contact, "contact")), 7);
    assert_true(json_is_null(json_object_get(contact, "distance_p50_m")));
    assert_near(json_number_value(json_object_get(contact, "countdown_ends_s")), 120, 0);
    /* ten bands of 90 dB are 100 dB: 10 lg 10 = 10; the second decade has one band and one not measured */
    json_t *decades = json_object_get(json_array_get(json_object_get(root, "levels"), 0), "decades");
    assert_int_equal(json_array_size(decades), 2);
    assert_near(json_number_value(json_object_get(json_array_get(decades, 0), "spl_db")), 100, 0.005);
    assert_near(json_number_value(json_object_get(json_array_get(decades, 1), "spl_db")), 90, 0.005);
    check_sums(root);
    json_decref(root);
    char wanted[80];
    snprintf(wanted, sizeof wanted, "id: 3-%d\nevent: state\ndata: {", (int)snapshot->sequence);
    assert_memory_equal(snapshot->event, wanted, strlen(wanted));
    assert_memory_equal(snapshot->event + snapshot->event_length - 3, "}\n\n", 3);
    assert_null(memchr(snapshot->json, '\n', snapshot->json_length));
    board_release(board, snapshot);
    root = parse(board_fixed_json(board), strlen(board_fixed_json(board)));
    assert_string_equal(json_string_value(json_object_get(json_object_get(root, "permit"), "title")),
                        "A \"test\" <permit>");
    json_decref(root);
    free(watch);
    free(hearing);
    board_destroy(board);
}

static void urgent_rises_with_advice_and_phase_alone(void **state)
{
    (void)state;
    struct board *board = make_board();
    struct watch_view *watch = calloc(1, sizeof *watch);
    struct hearing_view *hearing = calloc(1, sizeof *hearing);
    fill(watch, hearing);
    uint64_t urgent[4];
    for (int i = 0; i < 4; i++) {
        watch->watch_ns += TIME_NS_PER_S;
        if (i == 2)
            hearing->n_unrecorded = 0;
        if (i == 3)
            watch->contacts[0].evidence = 4;
        assert_int_equal(board_publish(board, watch, hearing), STATUS_OK);
        const struct snapshot *snapshot = board_take(board);
        urgent[i] = snapshot->urgent;
        board_release(board, snapshot);
    }
    assert_int_equal(urgent[1], urgent[0]);
    assert_int_equal(urgent[2], urgent[0] + 1);
    assert_int_equal(urgent[3], urgent[2]);
    free(watch);
    free(hearing);
    board_destroy(board);
}

struct readers {
    struct board *board;
    atomic_bool stop;
    atomic_uint n_read;
};

static void *read_all_the_time(void *context)
{
    struct readers *readers = context;
    uint64_t last = 0;
    while (!atomic_load(&readers->stop)) {
        board_wait(readers->board, last, 1000000);
        const struct snapshot *snapshot = board_take(readers->board);
        if (snapshot->sequence < last || snapshot->event[snapshot->event_length - 1] != '\n')
            abort();
        last = snapshot->sequence;
        json_t *root = json_loadb(snapshot->json, snapshot->json_length, 0, NULL);
        if (!root || (uint64_t)json_integer_value(json_object_get(root, "sequence")) != last)
            abort();
        json_decref(root);
        board_release(readers->board, snapshot);
        atomic_fetch_add(&readers->n_read, 1);
    }
    return NULL;
}

static void readers_see_whole_texts_while_it_publishes(void **state)
{
    (void)state;
    struct readers readers = {.board = make_board()};
    struct watch_view *watch = calloc(1, sizeof *watch);
    struct hearing_view *hearing = calloc(1, sizeof *hearing);
    fill(watch, hearing);
    const struct snapshot *held = board_take(readers.board);
    char *copy = strndup(held->json, held->json_length);
    pthread_t threads[2];
    for (int i = 0; i < 2; i++)
        assert_int_equal(pthread_create(&threads[i], NULL, read_all_the_time, &readers), 0);
    for (int i = 0; i < 500; i++) {
        watch->watch_ns += TIME_NS_PER_S;
        assert_int_equal(board_publish(readers.board, watch, hearing), STATUS_OK);
    }
    while (atomic_load(&readers.n_read) < 20)
        sched_yield();
    atomic_store(&readers.stop, true);
    for (int i = 0; i < 2; i++)
        pthread_join(threads[i], NULL);
    assert_memory_equal(held->json, copy, held->json_length); /* a reader that holds on keeps its text */
    board_release(readers.board, held);
    free(copy);
    free(watch);
    free(hearing);
    board_destroy(readers.board);
}

static enum status push(struct board *board, uint32_t stream, uint32_t band, int64_t ns, int value)
{
    struct column column = {.band = band, .start_ns = ns, .low_hz = 20, .high_hz = 2000};
    memset(column.levels, value, sizeof column.levels);
    return board_push_column(board, stream, &column);
}

#define QUARTER INT64_C(250000000)

static void columns_of_half_an_hour_are_kept(void **state)
{
    (void)state;
    struct board *board = make_board();
    struct columns *columns = board_columns(board);
    for (int i = 0; i < COLUMNS_KEPT + 100; i++)
        assert_int_equal(push(board, 1, 0, i * QUARTER, i % 251), STATUS_OK);
    assert_int_equal(push(board, 1, 0, 0, 0), STATUS_BAD_ARGUMENT); /* time runs backwards */
    assert_int_equal(push(board, 1, 3, 0, 0), STATUS_BAD_ARGUMENT);
    assert_int_equal(push(board, 3, 0, 0, 0), STATUS_BAD_ARGUMENT);
    assert_int_equal(push(board, 2, 2, 0, 0), STATUS_OK);
    static int64_t times[COLUMNS_KEPT];
    static uint8_t read[COLUMNS_KEPT * COLUMN_ROWS];
    double low, high;
    size_t n = columns_read(columns, 1, 0, -1, INT64_MAX, COLUMNS_KEPT, times, read, &low, &high);
    assert_int_equal(n, COLUMNS_KEPT);
    assert_int_equal(times[0], 100 * QUARTER);
    assert_int_equal(read[0], 100);
    assert_near(high, 2000, 0);
    n = columns_read(columns, 1, 0, 200 * QUARTER, 203 * QUARTER, 9, times, read, &low, &high);
    assert_int_equal(n, 3);
    assert_int_equal(times[0], 201 * QUARTER);
    struct text text = {0};
    assert_int_equal(sound_json(&text, columns, 1, 200 * QUARTER, 203 * QUARTER), STATUS_OK);
    json_t *root = parse(text.data, text.length);
    assert_int_equal(json_array_size(json_object_get(root, "bands")), 1);
    json_t *band = json_array_get(json_object_get(root, "bands"), 0);
    const char *base64 = json_string_value(json_object_get(band, "levels"));
    size_t bytes;
    assert_int_equal(sodium_base642bin(read, sizeof read, base64, strlen(base64), NULL, &bytes, NULL,
                                       sodium_base64_VARIANT_ORIGINAL),
                     0);
    assert_int_equal(bytes, 3 * COLUMN_ROWS);
    assert_int_equal(read[2 * COLUMN_ROWS], 203);
    json_decref(root);
    text_destroy(&text);
    board_destroy(board);
}

static void a_note_comes_from_json(void **state)
{
    (void)state;
    struct note note;
    struct note_refusal refusal;
    const char *good = "{\"kind\":\"sighting\",\"person\":\"Ada\",\"group\":\"porpoise\",\"number\":2,"
                       "\"distance_m\":321.04,\"calf\":true}";
    assert_int_equal(note_from_json(good, strlen(good), &note, &refusal), STATUS_OK);
    assert_int_equal(note.kind, NOTE_SIGHTING);
    assert_int_equal(note.group, GROUP_PORPOISE);
    assert_near(note.distance_m, 321, 1e-9);
    assert_true(note.calf);
    static const char *const bad[][2] = {
        {"", ""},
        {"[]", ""},
        {"{\"kind\":\"sighting\"", ""},
        {"{\"kind\":\"sighting\"} x", ""},
        {"{\"person\":\"Ada\"}", "kind"},
        {"{\"kind\":\"song\",\"person\":\"Ada\"}", "kind"},
        {"{\"kind\":7}", "kind"},
        {"{\"kind\":\"sighting\",\"person\":\"Ada\",\"colour\":\"grey\"}", "colour"},
        {"{\"kind\":\"sighting\",\"person\":\"Ada\",\"known_ns\":1}", "known_ns"},
        {"{\"kind\":\"sighting\",\"person\":null}", "person"},
        {"{\"kind\":\"sighting\",\"person\":[\"Ada\"]}", "person"},
        {"{\"kind\":\"sighting\",\"person\":\"Ada\",\"distance_m\":-5}", "distance_m"},
        {"{\"kind\":\"sighting\",\"person\":\"Ada\",\"distance_m\":1e999}", ""},
        {"{\"kind\":\"sighting\",\"person\":\"Ada\",\"group\":\"dragon\"}", "group"},
        {"{\"kind\":\"sighting\",\"person\":\"A\",\"person\":\"B\"}", ""},
        {"{\"kind\":\"verdict\",\"person\":\"Ada\",\"contact\":1,\"verdict\":\"dismiss\"}", "text"},
        {"{\"kind\":\"sighting\",\"person\":\"A\\u0000B\"}", ""},
        {"{\"kind\":\"sighting\",\"person\":\"\xff\"}", ""},
    };
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
        note.number = 42;
        assert_int_equal(note_from_json(bad[i][0], strlen(bad[i][0]), &note, &refusal), STATUS_BAD_FORMAT);
        assert_string_equal(refusal.field, bad[i][1]);
        assert_true(refusal.error[0] != '\0');
        assert_near(note.number, 42, 0); /* untouched */
    }
    char *deep = malloc(8193);
    memset(deep, '[', 8192);
    assert_int_equal(note_from_json(deep, 8192, &note, &refusal), STATUS_BAD_FORMAT);
    free(deep);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_snapshot_says_what_the_views_say),
        cmocka_unit_test(urgent_rises_with_advice_and_phase_alone),
        cmocka_unit_test(readers_see_whole_texts_while_it_publishes),
        cmocka_unit_test(columns_of_half_an_hour_are_kept),
        cmocka_unit_test(a_note_comes_from_json),
    };
    return cmocka_run_group_tests_name("board", tests, NULL, NULL);
}
