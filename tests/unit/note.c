/* lib/rule/note: one strict door for everything a person enters. */
#include "support/test.h"

#include "rule/note.h"
#include <math.h>

static struct note note;

static enum status set(const char *field, const char *value)
{
    const char *allowed = NULL;
    enum status status = note_set(&note, field, value, &allowed);
    /* Whoever is refused is told what is allowed; who is not, is not. */
    assert_true((allowed != NULL) == (status == STATUS_BAD_FORMAT || status == STATUS_OUT_OF_RANGE));
    return status;
}

static void empty_note(void **state)
{
    (void)state;
    memset(&note, 0x5a, sizeof note);
    note_reset(&note, NOTE_SIGHTING);
    assert_int_equal(note.kind, NOTE_SIGHTING);
    assert_string_equal(note.person, "");
    assert_string_equal(note.text, "");
    assert_int_equal(note.group, GROUP_UNKNOWN);
    assert_true(isnan(note.distance_m) && isnan(note.number) && isnan(note.bearing_deg));
    assert_true(isnan(note.sea_state) && isnan(note.visibility_m));
    assert_false(note.calf || note.leaving || note.contact);
}

static void good_values_are_kept(void **state)
{
    (void)state;
    note_reset(&note, NOTE_SIGHTING);
    assert_int_equal(set("person", "J\xc3\xb8rn Larsen"), STATUS_OK);
    assert_int_equal(set("group", "baleen whale"), STATUS_OK);
    assert_int_equal(set("distance_m", "1200.04"), STATUS_OK);
    assert_int_equal(set("bearing_deg", "359.94"), STATUS_OK);
    assert_int_equal(set("number", "2"), STATUS_OK);
    assert_int_equal(set("calf", "true"), STATUS_OK);
    assert_int_equal(set("contact", "4294967295"), STATUS_OK);
    assert_int_equal(set("source_state", "soft start"), STATUS_OK);
    assert_int_equal(set("occurred_ns", "1500000000"), STATUS_OK);
    assert_int_equal(note.group, GROUP_BALEEN_WHALE);
    assert_true(note.distance_m == 1200.0); /* rounded as entries are */
    assert_true(note.bearing_deg == 359.9);
    assert_true(note.number == 2 && note.calf && note.contact == 4294967295U);
    assert_int_equal(note.occurred_ns, 1500000000);
}

static void bad_values_are_refused_and_change_nothing(void **state)
{
    (void)state;
    static const struct {
        const char *field, *value;
        enum status wanted;
    } cases[] = {
        {"distance_m", "", STATUS_BAD_FORMAT},
        {"distance_m", "nan", STATUS_BAD_FORMAT},
        {"distance_m", "0x10", STATUS_BAD_FORMAT},
        {"distance_m", "12 m", STATUS_BAD_FORMAT},
        {"distance_m", " 12", STATUS_BAD_FORMAT},
        {"distance_m", "1e", STATUS_BAD_FORMAT},
        {"distance_m", "-1", STATUS_OUT_OF_RANGE},
        {"distance_m", "1e9", STATUS_OUT_OF_RANGE},
        {"bearing_deg", "361", STATUS_OUT_OF_RANGE},
        {"contact", "0", STATUS_OUT_OF_RANGE},
        {"contact", "-1", STATUS_BAD_FORMAT},
        {"contact", "4294967296", STATUS_OUT_OF_RANGE},
        {"contact", "99999999999999999999", STATUS_OUT_OF_RANGE},
        {"number", "0", STATUS_OUT_OF_RANGE},
        {"calf", "yes", STATUS_BAD_FORMAT},
        {"group", "whale", STATUS_OUT_OF_RANGE},
        {"watch", "sleeping", STATUS_OUT_OF_RANGE},
        {"verdict", "", STATUS_OUT_OF_RANGE},
        {"person", "a\nb", STATUS_BAD_FORMAT},
        {"job", "0123456789012345678901234567890123", STATUS_OUT_OF_RANGE},
        {"person", "0123456789012345678901234567890123456789012345678901234567890123", STATUS_OUT_OF_RANGE},
        {"latitude_deg", "90.1", STATUS_OUT_OF_RANGE},
        {"longitude_deg", "-181", STATUS_OUT_OF_RANGE},
        {"latitude_deg", "54 30", STATUS_BAD_FORMAT},
        {"occurred_ns", "-5", STATUS_BAD_FORMAT},
        {"known_ns", "5", STATUS_NOT_FOUND}, /* the watch stamps it, nobody else */
        {"kind", "release", STATUS_NOT_FOUND},
        {"distance", "5", STATUS_NOT_FOUND},
    };
    note_reset(&note, NOTE_SIGHTING);
    struct note before = note;
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        if (set(cases[i].field, cases[i].value) != cases[i].wanted)
            fail_msg("%s = '%s'", cases[i].field, cases[i].value);
        assert_memory_equal(&note, &before, sizeof note);
    }
    assert_int_equal(note_set(&note, "group", "whale", NULL), STATUS_OUT_OF_RANGE);
}

/* Each kind without any field names one that it misses; with the ones listed it is complete. */
static void every_kind_says_what_it_misses(void **state)
{
    (void)state;
    static const struct {
        enum note_kind kind;
        const char *fields[5][2];
    } cases[] = {
        {NOTE_SIGN_ON, {{"person", "A"}, {"watch", "crew"}, {"station", "bridge"}}},
        {NOTE_SIGN_ON, {{"person", "A"}, {"watch", "visual"}}},
        {NOTE_SIGN_OFF, {{"person", "A"}, {"watch", "visual"}}},
        {NOTE_SIGHTING, {{"person", "A"}}},
        {NOTE_DISTANCE, {{"person", "A"}, {"contact", "1"}, {"distance_m", "300"}}},
        {NOTE_DISTANCE, {{"person", "A"}, {"contact", "1"}, {"leaving", "true"}}},
        {NOTE_VERDICT, {{"person", "A"}, {"contact", "1"}, {"verdict", "left"}, {"text", "why"}}},
        {NOTE_RELEASE, {{"person", "A"}}},
        {NOTE_ACKNOWLEDGEMENT,
         {{"person", "A"}, {"station", "bridge"}, {"advice", "1.0.advice.1"}, {"answer", "seen"}}},
        {NOTE_SOURCE, {{"source_state", "off"}}},
        {NOTE_JOB, {{"job", "A1"}, {"answer", "open"}}},
        {NOTE_WEATHER, {{"sea_state", "3"}}},
        {NOTE_WEATHER, {{"visibility_m", "3000"}}},
        {NOTE_CHECK, {{"person", "A"}, {"check", "radio"}, {"answer", "good"}}},
        {NOTE_HAND_OVER, {{"person", "A"}, {"answer", "gives"}}},
        {NOTE_CORRECTION, {{"corrects", "1.0.note.7"}}},
        {NOTE_REMARK, {{"text", "x"}}},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        note_reset(&note, cases[i].kind);
        for (size_t f = 0; f < 5 && cases[i].fields[f][0]; f++) {
            const char *missing = NULL;
            assert_int_equal(note_check(&note, &missing), STATUS_BAD_FORMAT);
            assert_non_null(missing);
            assert_int_equal(set(cases[i].fields[f][0], cases[i].fields[f][1]), STATUS_OK);
        }
        assert_int_equal(note_check(&note, NULL), STATUS_OK);
    }
    note_reset(&note, NOTE_JOB);
    set("job", "A1");
    set("answer", "stopped"); /* an answer of another kind */
    const char *missing = NULL;
    assert_int_equal(note_check(&note, &missing), STATUS_BAD_FORMAT);
    assert_string_equal(missing, "answer");
}

static void kinds_have_words(void **state)
{
    (void)state;
    for (unsigned i = 0; i < NOTE_KIND_COUNT; i++) {
        enum note_kind kind = NOTE_KIND_COUNT;
        assert_true(note_kind_from_text(note_kind_text((enum note_kind)i), &kind));
        assert_int_equal(kind, i);
    }
    enum note_kind kind = NOTE_MARK;
    assert_false(note_kind_from_text("shout", &kind));
    assert_int_equal(kind, NOTE_MARK);
    assert_string_equal(note_kind_text(NOTE_KIND_COUNT), "unknown");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(empty_note),
        cmocka_unit_test(good_values_are_kept),
        cmocka_unit_test(bad_values_are_refused_and_change_nothing),
        cmocka_unit_test(every_kind_says_what_it_misses),
        cmocka_unit_test(kinds_have_words),
    };
    return cmocka_run_group_tests_name("note", tests, NULL, NULL);
}
