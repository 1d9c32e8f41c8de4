/* The call catalogue's loader: what is shipped loads; what is wrong is named with file, line and key. */
#include "support/test.h"

#include "call/certainty.h"
#include "settings/catalogue.h"
#include <math.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <unistd.h>

static const char good_tone[] =
    "name = \"test moan\"\ngroup = \"baleen whale\"\nform = \"tone\"\nlow_hz = 50\n"
    "high_hz = 300\nnatural_delay_s = 0.5\nfalse_per_hour = 1\ncertainty = 0.5\n"
    "evidence = 1\nsource = \"invented for this test\"\n"
    "tone = { window_s = 0.1; min_snr_db = 10; min_s = 0.3; max_s = 5; "
    "max_rate_hz_s = 500; }\n";

/* A fresh folder with two files (the second may be NULL); the caller removes it with drop_folder. */
static void make_folder(char folder[64], const char *first, const char *second)
{
    strcpy(folder, "/tmp/hushwatch-catalogue-XXXXXX");
    assert_non_null(mkdtemp(folder));
    const char *texts[] = {first, second};
    for (int i = 0; i < 2 && texts[i]; i++) {
        char path[128];
        snprintf(path, sizeof path, "%s/%c.cfg", folder, "ba"[i]);
        FILE *file = fopen(path, "w");
        assert_non_null(file);
        fputs(texts[i], file);
        fclose(file);
    }
}

static void drop_folder(const char *folder)
{
    char path[128];
    for (int i = 0; i < 2; i++) {
        snprintf(path, sizeof path, "%s/%c.cfg", folder, "ba"[i]);
        unlink(path);
    }
    rmdir(folder);
}

static void shipped_classes_load(void **state)
{
    (void)state;
    struct problems problems = {0};
    struct text effective = {0};
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    enum status status = catalogue_load("config/calls", &problems, &effective, catalogue);
    if (problems.count)
        print_error("%s", problems.lines.data);
    assert_int_equal(status, STATUS_OK);
    static const char *const wanted[] = {"humpback song unit", "baleen moan", "right whale upcall",
                                         "delphinid whistle"};
    for (size_t w = 0; w < sizeof wanted / sizeof wanted[0]; w++) {
        uint32_t i = 0;
        while (i < catalogue->n_classes && strcmp(catalogue->classes[i].name, wanted[w]) != 0)
            i++;
        assert_true(i < catalogue->n_classes);
        assert_int_equal(catalogue->classes[i].form, CALL_TONE);
        assert_true(strlen(catalogue->classes[i].source) > 20);
    }
    assert_non_null(strstr(effective.data, "natural_delay_s"));
    problems_destroy(&problems);
    text_destroy(&effective);
    free(catalogue);
}

static void classes_come_in_the_order_of_file_names(void **state)
{
    (void)state;
    char folder[64], second[1024];
    snprintf(second, sizeof second, "%s", good_tone);
    memcpy(strstr(second, "test"), "last", 4);
    make_folder(folder, second, good_tone); /* b.cfg, then a.cfg */
    struct problems problems = {0};
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    assert_int_equal(catalogue_load(folder, &problems, NULL, catalogue), STATUS_OK);
    assert_int_equal(catalogue->n_classes, 2);
    assert_string_equal(catalogue->classes[0].name, "test moan");
    assert_string_equal(catalogue->classes[1].name, "last moan");
    assert_true(catalogue->classes[0].animal);
    assert_int_equal(catalogue->classes[0].group, GROUP_BALEEN_WHALE);
    assert_true(isinf(catalogue->classes[0].tone.max_sweep_hz) &&
                isinf(catalogue->classes[0].tone.min_sweep_hz));
    drop_folder(folder);
    problems_destroy(&problems);
    free(catalogue);
}

/* Loads one changed class and expects the words in the problems. */
static void expect_problem(const char *from, const char *to, const char *word1, const char *word2)
{
    char text[2048], folder[64];
    const char *at = strstr(good_tone, from);
    assert_non_null(at);
    snprintf(text, sizeof text, "%.*s%s%s", (int)(at - good_tone), good_tone, to, at + strlen(from));
    make_folder(folder, text, NULL);
    struct problems problems = {0};
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    catalogue->n_classes = 77;
    assert_int_equal(catalogue_load(folder, &problems, NULL, catalogue), STATUS_BAD_FORMAT);
    assert_int_equal(catalogue->n_classes, 77);
    assert_true(problems.count >= 1);
    if (!strstr(problems.lines.data, word1) || !strstr(problems.lines.data, word2))
        fail_msg("wanted \"%s\" and \"%s\" in: %s", word1, word2, problems.lines.data);
    assert_non_null(strstr(problems.lines.data, "b.cfg:"));
    drop_folder(folder);
    problems_destroy(&problems);
    free(catalogue);
}

static void wrong_values_are_named(void **state)
{
    (void)state;
    expect_problem("min_snr_db = 10", "min_snr_db = 100", ":11: tone.min_snr_db", "allowed: 0 to 60");
    expect_problem("min_s = 0.3", "min_s = 6", "tone.max_s", "more than min_s");
    expect_problem("max_s = 5; ", "", "tone.max_s", "missing");
    expect_problem("evidence = 1", "evidance = 1", ":9: evidance", "did you mean \"evidence\"");
    expect_problem("\"tone\"", "\"tune\"", ":3: form", "allowed: tone, train");
    expect_problem("\"baleen whale\"", "\"bird\"", ":2: group", "sperm whale");
    expect_problem("tone = {", "train = {", "tone", "missing");
    expect_problem("high_hz = 300", "high_hz = 20", ":5: high_hz", "more than low_hz");
    expect_problem("low_hz = 50", "low_hz = ", ":5:", "syntax error");
    expect_problem("\"test moan\"", "\"a name that is longer than any class may have\"", ":1: name",
                   "at most 31");
}

static const char good_certainty[] =
    "source = \"invented for this test\"\ntone = { length = [0.5, 1.25] }\ntrain = { }\n"
    "grades = { look_evidence = 2; look_false_per_hour = 1; act_evidence = 4; act_false_per_day = 0.4; "
    "evidence_decay_s = 60 }\n";

/* Loads the class and certainty.cfg, changed, from a folder of their own. */
static enum status load_with_certainty(const char *from, const char *to, struct problems *problems,
                                       struct catalogue *out)
{
    char text[1024], folder[64], path[128];
    const char *at = strstr(good_certainty, from);
    assert_non_null(at);
    snprintf(text, sizeof text, "%.*s%s%s", (int)(at - good_certainty), good_certainty, to,
             at + strlen(from));
    make_folder(folder, good_tone, NULL);
    snprintf(path, sizeof path, "%s/" CATALOGUE_CERTAINTY_FILE, folder);
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    fputs(text, file);
    fclose(file);
    enum status status = catalogue_load(folder, problems, NULL, out);
    unlink(path);
    drop_folder(folder);
    return status;
}

static void what_certainty_rests_on_is_no_class(void **state)
{
    (void)state;
    static const struct {
        const char *from, *to, *word1, *word2;
    } wrong[] = {
        {"length", "lenght", "tone.lenght", "did you mean \"length\""},
        {", 1.25]", "]", "tone.length", "allowed: [weight, usual value]"},
        {"look_evidence = 2", "look_evidence = 5", "grades.act_evidence", "at least look_evidence, 5"},
        {"evidence_decay_s = 60", "evidence_decay_s = 0", "grades.evidence_decay_s", "allowed: 1 to"},
        {"train = { }", "", "train", "missing"}};
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    struct problems none = {0};
    assert_int_equal(load_with_certainty("0.5", "0.5", &none, catalogue), STATUS_OK);
    assert_int_equal(catalogue->n_classes, 1);
    assert_near(catalogue->certainty.tone.weight[TONE_LENGTH], 0.5, 0);
    assert_near(catalogue->certainty.tone.usual[TONE_LENGTH], 1.25, 0);
    assert_near(catalogue->certainty.act_evidence, 4, 0);
    assert_near(catalogue->certainty.evidence_decay_s, 60, 0);
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
        struct problems problems = {0};
        assert_int_equal(load_with_certainty(wrong[i].from, wrong[i].to, &problems, catalogue),
                         STATUS_BAD_FORMAT);
        if (!strstr(problems.lines.data, wrong[i].word1) || !strstr(problems.lines.data, wrong[i].word2))
            fail_msg("wanted \"%s\" and \"%s\" in: %s", wrong[i].word1, wrong[i].word2, problems.lines.data);
        problems_destroy(&problems);
    }
    free(catalogue);
}

static void two_files_may_not_share_a_name(void **state)
{
    (void)state;
    char folder[64];
    make_folder(folder, good_tone, good_tone);
    struct problems problems = {0};
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    assert_int_equal(catalogue_load(folder, &problems, NULL, catalogue), STATUS_BAD_FORMAT);
    assert_non_null(strstr(problems.lines.data, "b.cfg:1: name: is \"test moan\", which another file has"));
    drop_folder(folder);
    problems_destroy(&problems);
    free(catalogue);
}

static void absent_and_empty_folders_are_named(void **state)
{
    (void)state;
    char folder[64];
    make_folder(folder, NULL, NULL);
    struct problems problems = {0};
    struct catalogue *catalogue = calloc(1, sizeof *catalogue);
    assert_int_equal(catalogue_load(folder, &problems, NULL, catalogue), STATUS_NOT_FOUND);
    assert_non_null(strstr(problems.lines.data, "holds no *.cfg file"));
    drop_folder(folder);
    assert_int_equal(catalogue_load(folder, &problems, NULL, catalogue), STATUS_NOT_FOUND);
    assert_non_null(strstr(problems.lines.data, "cannot be read"));
    assert_int_equal(problems.count, 2);
    problems_destroy(&problems);
    free(catalogue);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(shipped_classes_load),
        cmocka_unit_test(classes_come_in_the_order_of_file_names),
        cmocka_unit_test(wrong_values_are_named),
        cmocka_unit_test(what_certainty_rests_on_is_no_class),
        cmocka_unit_test(two_files_may_not_share_a_name),
        cmocka_unit_test(absent_and_empty_folders_are_named),
    };
    return cmocka_run_group_tests_name("catalogue", tests, NULL, NULL);
}
