/* lib/record: bodies, their way back to events, minutes of levels, the hash of an entry. */
#include "support/test.h"

#include "base/random.h"
#include "base/time.h"
#include "record/entry.h"
#include "record/level_body.h"
#include "record/marks.h"
#include "record/minute.h"
#include "record/views.h"
#include <jansson.h>
#include <math.h>
#include <stdlib.h>

#define ZERO_NS INT64_C(1772366400000000000) /* 2026-03-01T12:00:00Z */

/* ---- random events, whose texts hold what people and damaged files bring */

static void random_text(struct random *random, char *out, size_t size)
{
    static const char *const pieces[] = {"a",    "pile 7",       "\"",       "\\",
                                         "\n",   "\t",           "\x7f",     "\xc3\xa5",
                                         " / ",  "\xff",         "\xe2\x82", "\xf0\x9f\x90\x8b",
                                         "\x01", "\xed\xa0\x80", "<&>'",     "Zoë"};
    out[0] = '\0';
    size_t used = 0;
    for (uint64_t n = random_bits(random) % 12; n > 0; n--) {
        const char *piece = pieces[random_bits(random) % (sizeof pieces / sizeof pieces[0])];
        size_t length = strlen(piece);
        if (used + length >= size)
            length = size - 1 - used; /* cuts a character in the middle, as a full field does */
        memcpy(out + used, piece, length);
        used += length;
        out[used] = '\0';
    }
}

static double maybe(struct random *random, double low, double high)
{
    return random_uniform(random) < 0.2 ? NAN : random_between(random, low, high);
}

static int64_t random_time(struct random *random)
{
    return (int64_t)random_between(random, 0, 4e17); /* up to twelve years */
}

static void random_call(struct random *random, struct call *call)
{
    *call = (struct call){.channel = (uint32_t)(1 + random_bits(random) % 16),
                          .group = (enum group)(random_bits(random) % GROUP_COUNT),
                          .form = (enum call_form)(random_bits(random) % 2),
                          .start_ns = random_time(random),
                          .end_ns = random_time(random),
                          .low_hz = random_between(random, 0, 2e5),
                          .high_hz = random_between(random, 0, 2e5),
                          .n_pulses = (uint32_t)(random_bits(random) % 1000),
                          .interval_s = maybe(random, 0, 3),
                          .snr_db = random_between(random, -5, 60),
                          .level_db = random_between(random, -90, 220),
                          .relative = random_bits(random) % 2,
                          .bearing_deg = maybe(random, 0, 360),
                          .mirror_deg = maybe(random, 0, 360),
                          .bearing_from = (enum bearing_from)(random_bits(random) % 3),
                          .certainty = random_uniform(random),
                          .evidence = random_between(random, -5, 5)};
    random_text(random, call->class_name, sizeof call->class_name);
    call->n_sounds = random_bits(random) % 2 ? (uint32_t)(random_bits(random) % 500) : 0;
    call->n_against = call->n_sounds > 0 ? (uint32_t)(random_bits(random) % (CALL_MAX_AGAINST + 1)) : 0;
    for (uint32_t i = 0; i < call->n_against; i++)
        call->against[i] = 1 + random_bits(random) % 1000000;
}

static void random_impulse(struct random *random, struct impulse *impulse)
{
    *impulse = (struct impulse){.channel = (uint32_t)(1 + random_bits(random) % 16),
                                .time_ns = random_time(random),
                                .sel_db = random_between(random, 100, 230),
                                .peak_db = random_between(random, 100, 260),
                                .peak_to_peak_db = random_between(random, 100, 260),
                                .rms90_db = random_between(random, 100, 230),
                                .t90_s = random_between(random, 0, 1),
                                .background_db = maybe(random, 60, 130),
                                .effective_s = maybe(random, 0, 1),
                                .kurtosis = maybe(random, 1, 300),
                                .window_s = random_between(random, 0, 1.3),
                                .positive_impulse_pa_s = maybe(random, 0, 2000),
                                .n_bands = (uint32_t)(random_bits(random) % (LEVEL_MAX_BANDS + 1)),
                                .refused = random_bits(random) % 2,
                                .relative = random_bits(random) % 2,
                                .clipped = random_bits(random) % 2,
                                .overlapped = random_bits(random) % 2,
                                .weak = random_bits(random) % 2,
                                .whose = (enum impulse_whose)(random_bits(random) % 3),
                                .range_m = maybe(random, 1, 20000),
                                .range_from = (enum range_from)(random_bits(random) % RANGE_FROM_COUNT)};
    for (uint32_t b = 0; b < impulse->n_bands; b++)
        impulse->band_sel_db[b] = maybe(random, -20, 220);
    random_text(random, impulse->job, sizeof impulse->job);
}

static void random_note(struct random *random, struct note *note)
{
    note_reset(note, (enum note_kind)(random_bits(random) % NOTE_KIND_COUNT));
    note->occurred_ns = random_time(random);
    note->known_ns = random_time(random);
    note->planned_ns = random_bits(random) % 2 ? random_time(random) : 0;
    note->in_zone_ns = random_bits(random) % 2 ? random_time(random) : 0;
    note->out_zone_ns = random_bits(random) % 2 ? random_time(random) : 0;
    char *const texts[] = {note->person,   note->watch,  note->station,      note->species,   note->verdict,
                           note->answer,   note->advice, note->source_state, note->certainty, note->behaviour,
                           note->sighting, note->mark,   note->corrects};
    for (size_t i = 0; i < sizeof texts / sizeof texts[0]; i++)
        random_text(random, texts[i], NOTE_NAME_SIZE);
    random_text(random, note->job, IMPULSE_JOB_SIZE);
    random_text(random, note->text, NOTE_TEXT_SIZE);
    note->group = (enum group)(random_bits(random) % GROUP_COUNT);
    note->contact = (uint32_t)(random_bits(random) % 5);
    note->number = maybe(random, 0, 50);
    note->distance_m = maybe(random, 0, 20000);
    note->number_low = maybe(random, 1, 50);
    note->number_high = maybe(random, 1, 500);
    note->calves = maybe(random, 0, 20);
    note->closest_m = maybe(random, 0, 20000);
    note->bearing_deg = maybe(random, 0, 360);
    note->sea_state = maybe(random, 0, 9);
    note->visibility_m = maybe(random, 0, 40000);
    note->depth_m = maybe(random, 0, 5000);
    note->minutes = maybe(random, 0, 90);
    note->energy_kj = maybe(random, 0, 4000);
    note->elements = maybe(random, 0, 48);
    note->latitude_deg = maybe(random, -90, 90);
    note->longitude_deg = maybe(random, -180, 180);
    note->calf = random_bits(random) % 2;
    note->leaving = random_bits(random) % 2;
}

static void random_position(struct random *random, struct position *position)
{
    *position = (struct position){.of = (enum position_of)(random_bits(random) % POSITION_OF_COUNT),
                                  .from = (enum position_from)(random_bits(random) % POSITION_FROM_COUNT),
                                  .latitude_deg = random_between(random, -90, 90),
                                  .longitude_deg = random_between(random, -180, 180),
                                  .heading_deg = maybe(random, 0, 360),
                                  .course_deg = maybe(random, 0, 360),
                                  .speed_m_s = maybe(random, 0, 15),
                                  .accuracy_m = maybe(random, 0, 50),
                                  .occurred_ns = random_time(random)};
}

static void random_event(struct random *random, enum event_kind kind, struct event *event)
{
    *event = (struct event){.kind = kind,
                            .stream = (uint32_t)(random_bits(random) % 4),
                            .run = (uint32_t)(1 + random_bits(random) % 100),
                            .counter = kind == EVENT_RUN ? 1 : 1 + random_bits(random) % 1000000,
                            .known_ns = random_time(random)};
    if (kind == EVENT_RUN) {
        event->stream = 0;
        event->as.run_mark = (struct run_mark){random_time(random), random_time(random)};
    } else if (kind == EVENT_UNHEARD)
        event->as.unheard = (struct unheard){
            .channel = (uint32_t)(random_bits(random) % 16),
            .low_hz = random_between(random, 0, 1000),
            .high_hz = random_uniform(random) < 0.2 ? INFINITY : random_between(random, 1000, 2e5),
            .start_ns = random_time(random),
            .end_ns = random_time(random),
            .cause = (enum unheard_cause)(random_bits(random) % 5)};
    else if (kind == EVENT_IMPULSE)
        random_impulse(random, &event->as.impulse);
    else if (kind == EVENT_CALL)
        random_call(random, &event->as.call);
    else if (kind == EVENT_POSITION)
        random_position(random, &event->as.position);
    else
        random_note(random, &event->as.note);
}

/* ---- exact comparison, member by member; NaN equals NaN */

#define SAME(member) assert_true(a->member == b->member)
#define SAME_NUMBER(member) assert_true(a->member == b->member || (isnan(a->member) && isnan(b->member)))
#define SAME_TEXT(member) assert_string_equal(a->member, b->member)

static void assert_same_call(const struct call *a, const struct call *b)
{
    SAME(channel);
    SAME_TEXT(class_name);
    SAME(group);
    SAME(form);
    SAME(start_ns);
    SAME(end_ns);
    SAME_NUMBER(low_hz);
    SAME_NUMBER(high_hz);
    SAME(n_pulses);
    SAME_NUMBER(interval_s);
    SAME_NUMBER(snr_db);
    SAME_NUMBER(level_db);
    SAME(relative);
    SAME_NUMBER(bearing_deg);
    SAME_NUMBER(mirror_deg);
    SAME(bearing_from);
    SAME_NUMBER(certainty);
    SAME_NUMBER(evidence);
    SAME(n_sounds);
    SAME(n_against);
    for (uint32_t i = 0; i < a->n_against; i++)
        SAME(against[i]);
}

static void assert_same_impulse(const struct impulse *a, const struct impulse *b)
{
    SAME(channel);
    SAME(time_ns);
    SAME_NUMBER(sel_db);
    SAME_NUMBER(peak_db);
    SAME_NUMBER(peak_to_peak_db);
    SAME_NUMBER(rms90_db);
    SAME_NUMBER(t90_s);
    SAME_NUMBER(background_db);
    SAME_NUMBER(effective_s);
    SAME_NUMBER(kurtosis);
    SAME_NUMBER(window_s);
    SAME_NUMBER(positive_impulse_pa_s);
    SAME(n_bands);
    for (uint32_t i = 0; i < a->n_bands; i++)
        SAME_NUMBER(band_sel_db[i]);
    SAME(refused);
    SAME(relative);
    SAME(clipped);
    SAME(overlapped);
    SAME(weak);
    SAME(whose);
    SAME_TEXT(job);
    SAME_NUMBER(range_m);
    SAME(range_from);
}

static void assert_same_note(const struct note *a, const struct note *b)
{
    SAME(kind);
    SAME(occurred_ns);
    SAME(known_ns);
    SAME(planned_ns);
    SAME(in_zone_ns);
    SAME(out_zone_ns);
    SAME_TEXT(certainty);
    SAME_TEXT(behaviour);
    SAME_TEXT(sighting);
    SAME_TEXT(mark);
    SAME_TEXT(corrects);
    SAME_NUMBER(number_low);
    SAME_NUMBER(number_high);
    SAME_NUMBER(calves);
    SAME_NUMBER(closest_m);
    SAME_TEXT(person);
    SAME_TEXT(watch);
    SAME_TEXT(station);
    SAME_TEXT(species);
    SAME_TEXT(verdict);
    SAME_TEXT(answer);
    SAME_TEXT(advice);
    SAME_TEXT(job);
    SAME_TEXT(source_state);
    SAME_TEXT(text);
    SAME(group);
    SAME(contact);
    SAME_NUMBER(number);
    SAME_NUMBER(distance_m);
    SAME_NUMBER(bearing_deg);
    SAME_NUMBER(sea_state);
    SAME_NUMBER(visibility_m);
    SAME_NUMBER(depth_m);
    SAME_NUMBER(minutes);
    SAME_NUMBER(energy_kj);
    SAME_NUMBER(elements);
    SAME(calf);
    SAME_NUMBER(latitude_deg);
    SAME_NUMBER(longitude_deg);
    SAME(leaving);
}

static void assert_same_position(const struct position *a, const struct position *b)
{
    SAME(of);
    SAME(from);
    SAME(latitude_deg);
    SAME(longitude_deg);
    SAME_NUMBER(heading_deg);
    SAME_NUMBER(course_deg);
    SAME_NUMBER(speed_m_s);
    SAME_NUMBER(accuracy_m);
    SAME(occurred_ns);
}

static void assert_same_event(const struct event *a, const struct event *b)
{
    SAME(kind);
    SAME(stream);
    SAME(run);
    SAME(counter);
    SAME(known_ns);
    if (a->kind == EVENT_CALL)
        assert_same_call(&a->as.call, &b->as.call);
    else if (a->kind == EVENT_IMPULSE)
        assert_same_impulse(&a->as.impulse, &b->as.impulse);
    else if (a->kind == EVENT_NOTE)
        assert_same_note(&a->as.note, &b->as.note);
    else if (a->kind == EVENT_POSITION)
        assert_same_position(&a->as.position, &b->as.position);
    else if (a->kind == EVENT_RUN) {
        SAME(as.run_mark.outage_start_ns);
        SAME(as.run_mark.outage_end_ns);
    } else {
        SAME(as.unheard.channel);
        SAME_NUMBER(as.unheard.low_hz);
        SAME_NUMBER(as.unheard.high_hz);
        SAME(as.unheard.start_ns);
        SAME(as.unheard.end_ns);
        SAME(as.unheard.cause);
    }
}

/* One line of printable ASCII, keys in byte order, no key twice, an id of the right form: read by jansson,
 * which keeps the order of keys. */
static void assert_well_formed(const char *body, const char *wanted_id)
{
    for (const char *c = body; *c; c++)
        assert_in_range(*c, 0x20, 0x7e);
    json_t *root = json_loads(body, JSON_REJECT_DUPLICATES, NULL);
    assert_non_null(root);
    const char *before = "";
    const char *key;
    json_t *value;
    json_object_foreach(root, key, value)
    {
        if (strcmp(before, key) >= 0)
            fail_msg("key %s after %s in %s", key, before, body);
        before = key;
    }
    if (wanted_id)
        assert_string_equal(json_string_value(json_object_get(root, "id")), wanted_id);
    json_decref(root);
}

static void outcome_of(const struct event *event, struct outcome *outcome)
{
    *outcome = (struct outcome){.kind = OUTCOME_EVENT,
                                .run = event->run,
                                .stream = event->stream,
                                .counter = event->counter,
                                .watch_ns = event->known_ns};
    outcome->as.event = *event;
}

/* Any event, once rounded, comes back from its body exactly, and gives the same body again. */
static void events_come_back_from_their_bodies(void **state)
{
    (void)state;
    static const enum event_kind kinds[] = {EVENT_RUN,  EVENT_UNHEARD, EVENT_IMPULSE,
                                            EVENT_CALL, EVENT_NOTE,    EVENT_POSITION};
    struct random random;
    random_reset(&random, 20260301);
    struct text body = {0}, again = {0};
    int n = test_length() == TEST_SHORT ? 2000 : test_length() == TEST_CHECK ? 20000 : 200000;
    for (int i = 0; i < n; i++) {
        struct event event, back = {0};
        random_event(&random, kinds[i % 6], &event);
        entry_round(&event);
        struct outcome outcome;
        outcome_of(&event, &outcome);
        assert_int_equal(entry_body(&outcome, ZERO_NS, &body), STATUS_OK);
        const char *kind = flow_outcome_kind_text(&outcome);
        char id[FLOW_ID_SIZE];
        flow_id(event.run, event.stream, kind, event.counter, id);
        assert_well_formed(body.data, id);
        assert_int_equal(entry_event(kind, body.data, event.known_ns, &back), STATUS_OK);
        assert_same_event(&event, &back);
        outcome_of(&back, &outcome);
        assert_int_equal(entry_body(&outcome, ZERO_NS, &again), STATUS_OK);
        assert_string_equal(body.data, again.data);
    }
    text_destroy(&body);
    text_destroy(&again);
}

/* The stored text of one call, by hand from the contract: this is what auditors' tools rely on. */
static void a_call_is_written_as_documented(void **state)
{
    (void)state;
    struct event event = {.kind = EVENT_CALL, .stream = 1, .run = 2, .counter = 7, .known_ns = 12500000000};
    event.as.call = (struct call){.channel = 3,
                                  .class_name = "right whale upcall",
                                  .group = GROUP_BALEEN_WHALE,
                                  .form = CALL_TONE,
                                  .start_ns = 11000001000,
                                  .end_ns = 12000000000,
                                  .low_hz = 80.04,
                                  .high_hz = 199.96,
                                  .interval_s = NAN,
                                  .snr_db = 12.345,
                                  .level_db = 110.1,
                                  .bearing_deg = NAN,
                                  .mirror_deg = NAN,
                                  .certainty = 0.9,
                                  .evidence = 2.25};
    struct outcome outcome;
    outcome_of(&event, &outcome);
    struct text body = {0};
    assert_int_equal(entry_body(&outcome, ZERO_NS, &body), STATUS_OK);
    assert_string_equal(
        body.data,
        "{\"bearing_deg\":null,\"bearing_from\":null,\"certainty\":0.900,\"channel\":3,"
        "\"class\":\"right whale upcall\",\"end_s\":12.000000,\"evidence\":2.250,\"form\":\"tone\","
        "\"group\":\"baleen whale\",\"high_hz\":200.0,\"id\":\"2.1.call.7\",\"interval_s\":null,"
        "\"level_db\":110.10,\"low_hz\":80.0,\"mirror_deg\":null,\"n_pulses\":0,\"relative\":false,"
        "\"snr_db\":12.35,\"start_s\":11.000001,\"stream\":1}");
    text_destroy(&body);
}

static void conclusions_are_well_formed(void **state)
{
    (void)state;
    struct text body = {0};
    struct outcome contact = {.kind = OUTCOME_CONTACT, .run = 1, .counter = 2};
    contact.as.contact = (struct contact_outcome){.contact = 2,
                                                  .group = GROUP_PORPOISE,
                                                  .grade = GRADE_ACT,
                                                  .whereabouts = {true, 400, 0.2},
                                                  .bearing_deg = 12.34,
                                                  .mirror_deg = NAN,
                                                  .bearing_from = BEARING_TRUE,
                                                  .p_inside = 0.8765};
    assert_int_equal(entry_body(&contact, ZERO_NS, &body), STATUS_OK);
    assert_well_formed(body.data, "1.0.contact.2");
    assert_non_null(strstr(body.data, "\"distance_p50_m\":400.0,"));
    /* 5 % quantile of a log-normal: 400 exp(-1.644854 * 0.2) = 287.86 (normal quantile: any table) */
    assert_non_null(strstr(body.data, "\"distance_p05_m\":287.9,"));
    assert_non_null(strstr(body.data, "\"p_inside\":0.877"));
    struct outcome phase = {.kind = OUTCOME_PHASE, .run = 1, .counter = 1};
    phase.as.phase.phase = PHASE_SOFT_START;
    assert_int_equal(entry_body(&phase, ZERO_NS, &body), STATUS_OK);
    assert_well_formed(body.data, "1.0.phase.1");
    struct outcome advice = {.kind = OUTCOME_ADVICE, .run = 1, .counter = 7};
    advice.as.advice = (struct advice_outcome){
        .advice = ADVICE_STOP, .station = "crew", .until_ns = 90000001000, .n_causes = 2};
    snprintf(advice.as.advice.causes[0], FLOW_ID_SIZE, "1.0.contact.2");
    snprintf(advice.as.advice.causes[1], FLOW_ID_SIZE, "1.0.phase.1");
    assert_int_equal(entry_body(&advice, ZERO_NS, &body), STATUS_OK);
    assert_well_formed(body.data, "1.0.advice.7");
    assert_non_null(strstr(body.data, "\"causes\":[\"1.0.contact.2\",\"1.0.phase.1\"]"));
    assert_non_null(strstr(body.data, "\"until\":\"2026-03-01T12:01:30.000001Z\""));
    struct outcome finding = {.kind = OUTCOME_FINDING, .run = 1, .counter = 1};
    assert_int_equal(entry_body(&finding, ZERO_NS, &body), STATUS_OK);
    assert_well_formed(body.data, "1.0.finding.1");
    text_destroy(&body);
}

/* What is unknown is null, what has no unit in dB is not in dB, and arrays have a place for every band. */
static void sums_are_well_formed(void **state)
{
    (void)state;
    struct text body = {0};
    struct outcome exposure = {.kind = OUTCOME_EXPOSURE, .run = 1, .counter = 3};
    exposure.as.exposure = (struct exposure_outcome){.value_db = NAN,
                                                     .level_db = NAN,
                                                     .value_pa_s = 30,
                                                     .level_pa_s = 41.5,
                                                     .limit_range_m = NAN,
                                                     .distance_m = INFINITY,
                                                     .distance = "beyond 1000 km",
                                                     .n_clipped = 2};
    assert_int_equal(entry_body(&exposure, ZERO_NS, &body), STATUS_OK);
    assert_well_formed(body.data, "1.0.exposure.3");
    assert_non_null(strstr(body.data, "\"level_db\":null,\"level_pa_s\":41.500000,"));
    assert_non_null(strstr(body.data, "\"value_db\":null,\"value_pa_s\":30.000000,"));
    assert_non_null(strstr(body.data, "\"distance\":\"beyond 1000 km\","));
    assert_non_null(strstr(body.data, "\"distance_m\":null,"));
    assert_non_null(strstr(body.data, "\"n_clipped\":2,"));
    struct outcome source = {.kind = OUTCOME_SOURCE, .run = 1, .counter = 4};
    struct source_outcome *said = &source.as.source;
    said->n_insertion_bands = 2;
    said->insertion_band_db[0] = said->insertion_band_low_db[0] = said->insertion_band_high_db[0] = NAN;
    said->insertion_band_db[1] = 8.126;
    said->n_reductions = 2;
    said->reductions[0] = (struct source_reduction){"NMFS 2024 LF", 8.4, 7.5, 9.25};
    said->reductions[1] = (struct source_reduction){"NMFS 2024 HF", 14.8, 13, 16};
    said->quieting_falls_db = NAN;
    snprintf(said->warning, sizeof said->warning, "may pass");
    assert_int_equal(entry_body(&source, ZERO_NS, &body), STATUS_OK);
    assert_well_formed(body.data, "1.0.source.4");
    assert_non_null(strstr(body.data, "\"insertion_bands_db\":[null,8.13],"));
    assert_non_null(strstr(body.data, "\"reductions\":[{\"db\":8.40,\"high_db\":9.25,\"low_db\":7.50,"
                                      "\"weighting\":\"NMFS 2024 LF\"},{\"db\":14.80,"));
    assert_non_null(strstr(body.data, "\"quieting_falls_db\":null,"));
    assert_non_null(strstr(body.data, "\"warning\":\"may pass\""));
    said->warning[0] = '\0';
    assert_int_equal(entry_body(&source, ZERO_NS, &body), STATUS_OK);
    assert_non_null(strstr(body.data, "\"warning\":null"));
    text_destroy(&body);
}

static void marks_are_well_formed(void **state)
{
    (void)state;
    struct text body = {0};
    struct run_mark mark = {5000000000, 65000000000};
    struct run_facts facts = {.site = "north yard", .settings = "a = 1\nb = \"x\"\n"};
    assert_int_equal(entry_body_run(3, &mark, ZERO_NS, &facts, &body), STATUS_OK);
    assert_well_formed(body.data, "3.0.run.1");
    struct event event;
    assert_int_equal(entry_event("run", body.data, 65000000000, &event), STATUS_OK);
    assert_int_equal(event.run, 3);
    assert_int_equal(event.as.run_mark.outage_start_ns, 5000000000);
    assert_int_equal(event.as.run_mark.outage_end_ns, 65000000000);
    struct permit *permit = calloc(1, sizeof *permit);
    assert_non_null(permit);
    permit->n_values = 2;
    snprintf(permit->values[0].key, PERMIT_NAME_SIZE, "pre_watch.minutes");
    snprintf(permit->values[1].who, PERMIT_NAME_SIZE, "Ann Lee");
    permit->values[1].mark = MARK_FILLED;
    snprintf(permit->revision, PERMIT_TEXT_SIZE, "second edition");
    snprintf(permit->ended, sizeof permit->ended, "2026-04-19");
    snprintf(permit->document_sha256, sizeof permit->document_sha256, "%064d", 7);
    assert_int_equal(entry_body_permit(1, 1, permit, "abc", &body), STATUS_OK);
    free(permit);
    assert_well_formed(body.data, "1.0.permit.1");
    assert_non_null(strstr(body.data, "\"ended\":\"2026-04-19\""));
    assert_non_null(strstr(body.data, "\"revision\":\"second edition\""));
    assert_non_null(strstr(body.data, "\"document_sha256\":\"0000"));
    assert_non_null(
        strstr(body.data, "\"mark\":\"filled\",\"source\":null,\"value\":\"\",\"who\":\"Ann Lee\""));
    /* FIPS 180-2, appendix B.1: SHA-256 of "abc" */
    assert_non_null(
        strstr(body.data, "\"ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad\""));
    assert_int_equal(entry_body_health(1, 2, 4, false, "no block for 2.1 s", &body), STATUS_OK);
    assert_well_formed(body.data, "1.2.health.4");
    struct calibration calibration = {.self_noise_db = NAN};
    struct channel_facts channel = {.channel = 1, .x_m = NAN, .y_m = NAN, .z_m = NAN};
    assert_int_equal(entry_body_calibration(1, 1, 1, &calibration, &channel, &body), STATUS_OK);
    assert_well_formed(body.data, "1.1.calibration.1");
    calibration.n_points = 2;
    calibration.point_hz[1] = 1000;
    calibration.point_db[1] = -180.5;
    assert_int_equal(entry_body_calibration(1, 1, 1, &calibration, &channel, &body), STATUS_OK);
    assert_well_formed(body.data, "1.1.calibration.1");
    assert_non_null(strstr(body.data, "\"sensitivity_points\":[[0.0,0.00],[1000.0,-180.50]],"));
    struct field_check_facts check = {
        .channel = channel, .tone_db = 145, .measured_db = 145.25, .change_db = NAN};
    assert_int_equal(entry_body_field_check(2, 1, 1, &check, &body), STATUS_OK);
    assert_well_formed(body.data, "2.1.calibration.1");
    assert_non_null(strstr(body.data, "\"change_db\":null,"));
    assert_non_null(strstr(body.data, "\"difference_db\":0.25,"));
    struct time_map map = {.anchor_frame = 9, .anchor_ns = 7000, .rate_hz = 48000.1};
    struct clock_facts clock = {.map = &map, .zero_unix_ns = ZERO_NS, .offset_s = NAN};
    assert_int_equal(entry_body_clock(1, 1, 1, &clock, &body), STATUS_OK);
    assert_well_formed(body.data, "1.1.clock.1");
    struct sound_entry_facts sound = {.stream = 2,
                                      .channel = 1,
                                      .counter = 7,
                                      .end_ns = 5000000000,
                                      .rate_hz = 96000,
                                      .reason = SOUND_DISMISSED,
                                      .low_hz = NAN,
                                      .high_hz = NAN,
                                      .file = "1.2.sound.7.flac",
                                      .n_causes = 1,
                                      .causes = {"1.2.call.3"}};
    assert_int_equal(entry_body_sound(1, &sound, &body), STATUS_OK);
    assert_well_formed(body.data, "1.2.sound.7");
    assert_non_null(strstr(body.data, "\"reason\":\"dismissed\""));
    struct stamp_facts stamp = {.text = "x\ny\n", .first = 1, .last = 9};
    assert_int_equal(entry_body_stamp(1, 1, &stamp, &body), STATUS_OK);
    assert_well_formed(body.data, "1.0.stamp.1");
    text_destroy(&body);
}

static void foreign_bodies_are_refused(void **state)
{
    (void)state;
    static const char *const bad[] = {
        "",
        "{",
        "[]",
        "{}",
        "null",
        "{\"id\":\"1.0.run.1\"}",
        "{\"id\":\"1.0.note.1\",\"outage_end_s\":0.0,\"outage_start_s\":0.0}",
        "{\"id\":\"1.0.run.1x\",\"outage_end_s\":0.0,\"outage_start_s\":0.0}",
        "{\"id\":\"-1.0.run.1\",\"outage_end_s\":0.0,\"outage_start_s\":0.0}",
        "{\"id\":\"1.0.run.99999999999999999999\",\"outage_end_s\":0.0,\"outage_start_s\":0.0}",
        "{\"id\":\"1.0.run.1\",\"outage_end_s\":\"0\",\"outage_start_s\":0.0}",
        "{\"id\":\"1.0.run.1\",\"outage_end_s\":null,\"outage_start_s\":0.0}",
        "{\"id\":\"1.0.run.1\",\"outage_end_s\":1e30,\"outage_start_s\":0.0}",
        "{\"id\":\"1.0.run.1\",\"id\":\"1.0.run.1\",\"outage_end_s\":0.0,\"outage_start_s\":0.0}"};
    struct event event = {.counter = 42};
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++)
        assert_int_equal(entry_event("run", bad[i], 0, &event), STATUS_BAD_FORMAT);
    static const char *const no_input[] = {"level",   "phase",  "advice", "contact",
                                           "finding", "health", "x",      ""};
    for (size_t i = 0; i < sizeof no_input / sizeof no_input[0]; i++)
        assert_int_equal(entry_event(no_input[i], "{}", 0, &event), STATUS_NOT_FOUND);
    assert_int_equal(event.counter, 42);
}

/* ---- minutes of levels */

struct gathered {
    unsigned n;
    char bodies[16][12288];
    struct minute_body minutes[16];
};

static void gather(void *context, const struct minute_body *minute)
{
    struct gathered *gathered = context;
    assert_true(gathered->n < 16);
    snprintf(gathered->bodies[gathered->n], sizeof gathered->bodies[0], "%s", minute->body);
    gathered->minutes[gathered->n++] = *minute;
}

static void push_second(struct minutes *minutes, uint32_t channel, double start_s, double seconds,
                        struct gathered *gathered)
{
    struct outcome outcome = {.kind = OUTCOME_EVENT};
    outcome.as.event = (struct event){.kind = EVENT_LEVEL, .run = 1, .stream = 1, .counter = 1};
    outcome.as.event.known_ns = outcome.watch_ns = time_from_s(start_s + 1);
    struct level *level = &outcome.as.event.as.level;
    *level = (struct level){.channel = channel, .start_ns = time_from_s(start_s), .seconds = seconds};
    level->spl_db = 100 + start_s / 100;
    level->n_bands = 2;
    level->band_db[0] = NAN;
    level->band_db[1] = 90;
    struct minute_sink sink = {gather, gathered};
    assert_int_equal(minutes_take(minutes, &outcome, &sink), STATUS_OK);
}

static void advance(struct minutes *minutes, double watch_s, struct gathered *gathered)
{
    struct outcome outcome = {.kind = OUTCOME_PHASE, .watch_ns = time_from_s(watch_s)};
    struct minute_sink sink = {gather, gathered};
    assert_int_equal(minutes_take(minutes, &outcome, &sink), STATUS_OK);
}

static size_t seconds_in(const char *body)
{
    json_t *root = json_loads(body, 0, NULL);
    size_t n = json_array_size(json_object_get(root, "start_s"));
    static const char *const arrays[] = {"bands",  "fast_max_db", "peak_db", "seconds",
                                         "sel_db", "slow_max_db", "spl_db"};
    for (size_t i = 0; i < sizeof arrays / sizeof arrays[0]; i++)
        assert_int_equal(json_array_size(json_object_get(root, arrays[i])), n);
    json_decref(root);
    return n;
}

static void assert_number(const char *body, const char *object, const char *key, double wanted)
{
    json_t *root = json_loads(body, 0, NULL);
    assert_near(json_number_value(json_object_get(json_object_get(root, object), key)), wanted, 1e-9);
    json_decref(root);
}

/* An hour lets go of what began an hour or more before. 7,200 seconds that rise by 0.01 dB each: the last
 * 3,600 are 136.00 to 171.99 dB. */
static void an_hour_holds_its_last_seconds(void **state)
{
    (void)state;
    struct level_hour *hour = calloc(1, sizeof *hour);
    assert_non_null(hour);
    struct level_statistics got;
    level_hour_get(hour, &got);
    assert_true(isnan(got.l50_db) && isnan(got.mean_db) && got.seconds == 0);
    double energy = 0;
    for (int i = 0; i < 7200; i++) {
        struct level level = {.start_ns = time_from_s(i), .seconds = 1, .spl_db = 100 + i / 100.0};
        level_hour_take(hour, &level);
        energy += i >= 3600 ? pow(10, level.spl_db / 10) : 0;
    }
    level_hour_get(hour, &got);
    assert_near(got.l05_db, 136 + 0.01 * 3599 * 0.95, 1e-6);
    assert_near(got.l50_db, 136 + 0.01 * 3599 * 0.50, 1e-6);
    assert_near(got.l95_db, 136 + 0.01 * 3599 * 0.05, 1e-6);
    assert_near(got.mean_db, 10 * log10(energy / 3600), 1e-9);
    assert_near(got.seconds, 3600, 0);
    struct level late = {.start_ns = time_from_s(20000), .seconds = 0.5, .spl_db = 90};
    level_hour_take(hour, &late);
    level_hour_get(hour, &got);
    assert_near(got.l50_db, 90, 0);
    assert_near(got.seconds, 0.5, 0);
    free(hour);
}

/* 60 s of a Gaussian with one pulse whose fourth power gives the whole a kurtosis of 41: sums by hand. */
static void a_minute_says_its_kurtosis_as_research(void **state)
{
    (void)state;
    struct level level = {.channel = 1, .seconds = 1, .spl_db = 150, .high_hz = 24000};
    level.moments = (struct moments){.n = 48000, .sum2 = 48000 * 1000.0, .sum4 = 48000 * 41e6};
    struct text body = {0};
    assert_int_equal(level_body(1, 1, 1, &level, 1, NULL, &body), STATUS_OK);
    assert_well_formed(body.data, "1.1.level.1");
    assert_number(body.data, "research", "kurtosis", 41);
    assert_number(body.data, "research", "window_s", 1);
    assert_number(body.data, "research", "high_hz", 24000);
    /* 150 + 4.02 lg(41 / 3) (Goley et al. 2011) */
    assert_number(body.data, "research", "adjusted_sel_db", 154.57);
    text_destroy(&body);
}

static void levels_become_minutes(void **state)
{
    (void)state;
    struct minutes *minutes;
    assert_int_equal(minutes_create(1, 2, &minutes), STATUS_OK);
    struct gathered *gathered = calloc(1, sizeof *gathered);
    assert_non_null(gathered);
    /* Watch time 30.5 s to 150.5 s on two channels: half a minute, a whole one, half a minute. */
    for (int i = 0; i < 120; i++)
        for (uint32_t channel = 2; channel >= 1; channel--)
            push_second(minutes, channel, 30.5 + i, 1, gathered);
    assert_int_equal(gathered->n, 4);
    struct minute_sink sink = {gather, gathered};
    assert_int_equal(minutes_flush(minutes, time_from_s(151), &sink), STATUS_OK);
    assert_int_equal(minutes_flush(minutes, time_from_s(151), &sink), STATUS_OK);
    static const size_t wanted[] = {30, 30, 60, 60, 30, 30};
    static const uint32_t channels[] = {2, 1, 2, 1, 1, 2};
    assert_int_equal(gathered->n, 6);
    for (unsigned i = 0; i < 6; i++) {
        char id[FLOW_ID_SIZE];
        flow_id(1, 1, "level", i + 1, id);
        assert_well_formed(gathered->bodies[i], id);
        assert_int_equal(seconds_in(gathered->bodies[i]), wanted[i]);
        assert_int_equal(gathered->minutes[i].channel, channels[i]);
        assert_int_equal(gathered->minutes[i].counter, i + 1);
    }
    assert_int_equal(gathered->minutes[0].watch_ns, time_from_s(60.5));
    assert_non_null(strstr(gathered->bodies[0], "{\"bands\":[[null,90.00],[null,90.00],"));
    /* SPL is 100 + start / 100: seconds 60.5 .. 119.5 of the minute, 30.5 .. 119.5 of the hour; rank (n -
     * 1)(1 - N / 100), linear between (Hyndman and Fan 1996, number 7). */
    assert_number(gathered->bodies[2], "minute", "l05_db", 101.17);
    assert_number(gathered->bodies[2], "minute", "l50_db", 100.90);
    assert_number(gathered->bodies[2], "minute", "l95_db", 100.63);
    assert_number(gathered->bodies[2], "minute", "seconds", 60);
    assert_number(gathered->bodies[2], "hour", "l05_db", 101.15);
    assert_number(gathered->bodies[2], "hour", "l50_db", 100.75);
    assert_number(gathered->bodies[2], "hour", "l95_db", 100.35);
    assert_number(gathered->bodies[2], "hour", "seconds", 90);
    minutes_destroy(minutes);
    free(gathered);
}

static void a_gap_and_silence_end_a_minute(void **state)
{
    (void)state;
    struct minutes *minutes;
    assert_int_equal(minutes_create(1, 1, &minutes), STATUS_OK);
    struct gathered *gathered = calloc(1, sizeof *gathered);
    assert_non_null(gathered);
    push_second(minutes, 1, 0, 1, gathered);
    push_second(minutes, 1, 1, 0.5, gathered); /* half a second was lost */
    push_second(minutes, 1, 2, 1, gathered);
    assert_int_equal(gathered->n, 1);
    assert_int_equal(seconds_in(gathered->bodies[0]), 2);
    advance(minutes, 64, gathered);
    assert_int_equal(gathered->n, 1);
    advance(minutes, 66, gathered);
    assert_int_equal(gathered->n, 2);
    assert_int_equal(gathered->minutes[1].watch_ns, time_from_s(66));
    struct outcome other = {.kind = OUTCOME_EVENT};
    other.as.event.kind = EVENT_LEVEL;
    other.as.event.as.level.channel = 2;
    struct minute_sink sink = {gather, gathered};
    assert_int_equal(minutes_take(minutes, &other, &sink), STATUS_FULL);
    minutes_destroy(minutes);
    minutes_destroy(NULL);
    free(gathered);
}

/* ---- the hash, against coreutils' sha256sum on the documented text */

static void hash_agrees_with_sha256sum(void **state)
{
    (void)state;
    struct random random;
    random_reset(&random, 7);
    char previous[ENTRY_HASH_SIZE], hash[ENTRY_HASH_SIZE], path[1200], command[1300], line[256];
    memset(previous, '0', 64);
    previous[64] = '\0';
    snprintf(path, sizeof path, "%s/hash-test.txt", test_build());
    snprintf(command, sizeof command, "sha256sum '%s'", path);
    for (int i = 1; i <= 20; i++) {
        char body[512];
        snprintf(body, sizeof body, "{\"id\":\"1.0.note.%d\",\"x\":\"%0*d\"}", i,
                 (int)(random_bits(&random) % 400), 0);
        FILE *file = fopen(path, "w");
        assert_non_null(file);
        fprintf(file, "%s\n%d\n2026-03-01T12:00:00.%06dZ\nnote\n%s", previous, i, i, body);
        fclose(file);
        snprintf(line, sizeof line, "2026-03-01T12:00:00.%06dZ", i);
        entry_hash(previous, i, line, "note", body, hash);
        FILE *program = popen(command, "r");
        assert_non_null(program);
        assert_non_null(fgets(line, sizeof line, program));
        pclose(program);
        assert_memory_equal(line, hash, 64);
        memcpy(previous, hash, sizeof previous);
    }
    remove(path);
}

static void every_kind_has_a_view(void **state)
{
    (void)state;
    static const char *const kinds[] = {"run",         "permit",  "job",      "source",  "call",
                                        "impulse",     "level",   "exposure", "contact", "phase",
                                        "advice",      "finding", "note",     "unheard", "health",
                                        "calibration", "clock",   "position", "sound",   "stamp"};
    for (size_t i = 0; i < sizeof kinds / sizeof kinds[0]; i++)
        assert_true(views_has_kind(kinds[i]));
    assert_false(views_has_kind("entry"));
    assert_false(views_has_kind("entry_id"));
    assert_false(views_has_kind("impulse_count"));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(events_come_back_from_their_bodies),
        cmocka_unit_test(a_call_is_written_as_documented),
        cmocka_unit_test(conclusions_are_well_formed),
        cmocka_unit_test(sums_are_well_formed),
        cmocka_unit_test(marks_are_well_formed),
        cmocka_unit_test(foreign_bodies_are_refused),
        cmocka_unit_test(levels_become_minutes),
        cmocka_unit_test(an_hour_holds_its_last_seconds),
        cmocka_unit_test(a_minute_says_its_kurtosis_as_research),
        cmocka_unit_test(a_gap_and_silence_end_a_minute),
        cmocka_unit_test(hash_agrees_with_sha256sum),
        cmocka_unit_test(every_kind_has_a_view),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
