/* The typed line of a mark: what it means, and what is said of one that means nothing. */
#include "support/test.h"

#include "base/random.h"
#include "rule/mark_line.h"
#include <math.h>

static struct note read_good(const char *line)
{
    struct note note;
    char sentence[MARK_LINE_SENTENCE_SIZE] = "";
    note_reset(&note, NOTE_SIGHTING);
    enum status status = mark_line_read(line, &note, sentence);
    if (status != STATUS_OK)
        fail_msg("'%s': %s", line, sentence);
    assert_string_equal(note.text, line);
    return note;
}

static void the_example_of_the_page(void **state)
{
    (void)state;
    struct note note = read_good("porpoise 320 m 045 closing");
    assert_int_equal(note.group, GROUP_PORPOISE);
    assert_near(note.distance_m, 320, 0);
    assert_near(note.bearing_deg, 45, 0);
    assert_string_equal(note.behaviour, "closing");
    assert_true(isnan(note.number) && isnan(note.calves) && !note.calf && !note.leaving);
}

static void words_in_any_order(void **state)
{
    (void)state;
    struct note note = read_good("Probable, 3 Sperm Whales at 1.2km, bearing 7, 2 calves: one blow");
    assert_int_equal(note.group, GROUP_SPERM_WHALE);
    assert_near(note.distance_m, 1200, 0);
    assert_near(note.bearing_deg, 7, 0);
    assert_near(note.number, 3, 0);
    assert_near(note.calves, 2, 0);
    assert_true(note.calf);
    assert_string_equal(note.certainty, "probable");
    note = read_good("contact 2 bow riding dolphins 2-5 0.5 nm leaving");
    assert_int_equal(note.group, GROUP_DELPHINID);
    assert_int_equal(note.contact, 2);
    assert_near(note.number_low, 2, 0);
    assert_near(note.number_high, 5, 0);
    assert_near(note.distance_m, 926, 0); /* half of 1852 */
    assert_string_equal(note.behaviour, "bow riding");
    assert_true(note.leaving);
    note = read_good("360\xc2\xb0 unknown 80 m calf");
    assert_near(note.bearing_deg, 360, 0);
    assert_int_equal(note.group, GROUP_UNKNOWN);
    assert_true(note.calf);
    assert_int_equal(read_good("sea otter 45 deg 10m").group, GROUP_SEA_OTTER);
    assert_int_equal(read_good("seal 10m hauled out").group, GROUP_PHOCID);
}

static void every_group_and_word_is_known(void **state)
{
    (void)state;
    char line[80];
    for (unsigned g = 0; g < GROUP_COUNT; g++) {
        snprintf(line, sizeof line, "%s 100 m", group_text((enum group)g));
        assert_int_equal(read_good(line).group, g);
    }
    for (const char *const *word = note_words("behaviour"); *word; word++)
        assert_string_equal(read_good(*word).behaviour, *word);
    for (const char *const *word = note_words("certainty"); *word; word++)
        assert_string_equal(read_good(*word).certainty, *word);
}

static void faults_name_the_word(void **state)
{
    (void)state;
    static const char *const faults[][2] = {
        {"", "empty"},
        {" , ", "empty"},
        {"porpose 320 m", "'porpose' is no word"},
        {"whale 320 m", "several groups"},
        {"porpoise 3200", "'3200' has no unit"},
        {"porpoise 32.5", "'32.5' has no unit"},
        {"porpoise 320 m 400 m", "second distance_m"},
        {"porpoise seal", "second group"},
        {"porpoise 320 ft", "no word of this line"},
        {"porpoise 320ft", "no unit that is known"},
        {"porpoise 361", "0 to 360 degrees"},
        {"porpoise 200 km", "0 to 100000 m"},
        {"porpoise 5-2", "no range"},
        {"porpoise 5-", "no range"},
        {"contact", "needs a number"},
        {"contact 0", "from 1"},
        {"bearing north", "needs a number"},
        {"closing opening", "second behaviour"},
        {"0 porpoises", "1 to 100000 animals"},
        {"porpoise 1.2.3 m", "no word"},
        {"porpoise nan m", "'nan' is no word"},
        {"aaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaaa", "too long"},
    };
    for (size_t i = 0; i < sizeof faults / sizeof faults[0]; i++) {
        struct note note, before;
        char sentence[MARK_LINE_SENTENCE_SIZE] = "";
        note_reset(&note, NOTE_SIGHTING);
        memcpy(&before, &note, sizeof before);
        enum status status = mark_line_read(faults[i][0], &note, sentence);
        if (status == STATUS_OK || !strstr(sentence, faults[i][1]))
            fail_msg("'%s' gives %d, '%s'", faults[i][0], (int)status, sentence);
        assert_memory_equal(&before, &note, sizeof note);
    }
}

/* Whatever is typed, it is a good note or a sentence. */
static void any_line_is_answered(void **state)
{
    (void)state;
    static const char letters[] = "abcdeghilmnoprstuw0123456789 .,:-\xc2\xb0";
    struct random random;
    random_reset(&random, 42);
    unsigned n_good = 0;
    for (int i = 0; i < 200000; i++) {
        char line[400];
        size_t length = random_bits(&random) % (i % 100 ? 24 : 390);
        for (size_t k = 0; k < length; k++)
            line[k] = letters[random_bits(&random) % (sizeof letters - 1)];
        line[length] = '\0';
        struct note note;
        char sentence[MARK_LINE_SENTENCE_SIZE] = "";
        note_reset(&note, NOTE_SIGHTING);
        strcpy(note.person, "A. Eyes");
        if (mark_line_read(line, &note, sentence) == STATUS_OK) {
            assert_int_equal(note_check(&note, NULL), STATUS_OK);
            n_good++;
        } else
            assert_true(strlen(sentence) > 0);
    }
    printf("# seed 42: %u of 200000 lines mean something\n", n_good);
    assert_true(n_good > 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_example_of_the_page),       cmocka_unit_test(words_in_any_order),
        cmocka_unit_test(every_group_and_word_is_known), cmocka_unit_test(faults_name_the_word),
        cmocka_unit_test(any_line_is_answered),
    };
    return cmocka_run_group_tests_name("typed line", tests, NULL, NULL);
}
