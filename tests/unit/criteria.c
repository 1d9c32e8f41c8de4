/* config/criteria and its loader: the files hold what their documents say, and a criterion that lacks a
 * weighting, a unit, a metric, a reference or a source is refused with its line. */
#include "support/test.h"

#include "settings/criteria.h"
#include <math.h>
#include <stdlib.h>
#include <unistd.h>

static struct criteria criteria;

static const char *const sets[] = {"nmfs-2018",        "southall-2019",     "nmfs-2024",    "fish-fhwg-2008",
                                   "fish-popper-2014", "turtles-navy-2017", "behaviour-us", "germany-2008",
                                   "belgium-2018",     "taiwan-2018",       "denmark-2022"};
#define N_SETS (sizeof sets / sizeof sets[0])

static int load_all(void **state)
{
    (void)state;
    for (unsigned i = 0; i < N_SETS; i++) {
        struct problems problems = {0};
        char path[128];
        snprintf(path, sizeof path, "config/criteria/%s.cfg", sets[i]);
        if (criteria_load(path, &problems, NULL, &criteria) != STATUS_OK)
            fail_msg("%s", problems.lines.data);
        problems_destroy(&problems);
    }
    return 0;
}

static const struct criterion *find(const char *set, const char *name)
{
    for (uint32_t i = 0; i < criteria.n; i++)
        if (strcmp(criteria.items[i].set, set) == 0 && strcmp(criteria.items[i].name, name) == 0)
            return &criteria.items[i];
    fail_msg("no criterion %s: %s", set, name);
    return NULL;
}

static double value_of(const char *set, const char *group, const char *rest)
{
    char name[CRITERION_NAME_SIZE];
    snprintf(name, sizeof name, "%s %s", group, rest);
    const struct criterion *c = find(set, name);
    bool sel = strstr(rest, "SEL") != NULL;
    assert_int_equal(c->metric, sel ? METRIC_SEL_CUMULATIVE : METRIC_PEAK);
    assert_int_equal(c->window, sel ? ACCUMULATE_24_H : ACCUMULATE_NOTHING);
    assert_int_equal(c->sound, strstr(rest, "impulsive") ? SOUND_IMPULSIVE : SOUND_CONTINUOUS);
    if (sel)
        assert_string_equal(c->weighting->group, group);
    else
        assert_null(c->weighting);
    return c->value;
}

struct mammal_row {
    const char *set, *group;
    enum guidance guidance;
    double tts_continuous, injury_continuous, tts_impulsive, injury_impulsive, tts_peak, injury_peak;
};

/* NMFS 2018 (version 2.0), Southall et al. 2019, NMFS 2024 (version 3.0): their tables, from copies;
 * OCW also as in Federal Register 2025-00450, table 1. The impulsive TTS cells of 2018 are from memory. */
static const struct mammal_row rows[] = {
    {"nmfs-2018", "LF", GUIDANCE_NMFS_2018, 179, 199, 168, 183, 213, 219},
    {"nmfs-2018", "MF", GUIDANCE_NMFS_2018, 178, 198, 170, 185, 224, 230},
    {"nmfs-2018", "HF", GUIDANCE_NMFS_2018, 153, 173, 140, 155, 196, 202},
    {"nmfs-2018", "PW", GUIDANCE_NMFS_2018, 181, 201, 170, 185, 212, 218},
    {"nmfs-2018", "OW", GUIDANCE_NMFS_2018, 199, 219, 188, 203, 226, 232},
    {"southall-2019", "LF", GUIDANCE_SOUTHALL_2019, 179, 199, 168, 183, 213, 219},
    {"southall-2019", "HF", GUIDANCE_SOUTHALL_2019, 178, 198, 170, 185, 224, 230},
    {"southall-2019", "VHF", GUIDANCE_SOUTHALL_2019, 153, 173, 140, 155, 196, 202},
    {"southall-2019", "SI", GUIDANCE_SOUTHALL_2019, 186, 206, 175, 190, 220, 226},
    {"southall-2019", "PCW", GUIDANCE_SOUTHALL_2019, 181, 201, 170, 185, 212, 218},
    {"southall-2019", "OCW", GUIDANCE_SOUTHALL_2019, 199, 219, 188, 203, 226, 232},
    {"nmfs-2024", "LF", GUIDANCE_NMFS_2024, 177, 197, 168, 183, 216, 222},
    {"nmfs-2024", "HF", GUIDANCE_NMFS_2024, 181, 201, 178, 193, 224, 230},
    {"nmfs-2024", "VHF", GUIDANCE_NMFS_2024, 161, 181, 144, 159, 196, 202},
    {"nmfs-2024", "PW", GUIDANCE_NMFS_2024, 175, 195, 168, 183, 217, 223},
    {"nmfs-2024", "OW", GUIDANCE_NMFS_2024, 179, 199, 170, 185, 224, 230},
};

static void marine_mammals(void **state)
{
    (void)state;
    for (unsigned i = 0; i < sizeof rows / sizeof rows[0]; i++) {
        const struct mammal_row *row = &rows[i];
        const double want[] = {row->tts_continuous,   row->injury_continuous, row->tts_impulsive,
                               row->injury_impulsive, row->tts_peak,          row->injury_peak};
        static const char *const names[] = {"TTS, continuous, SEL", "injury, continuous, SEL",
                                            "TTS, impulsive, SEL",  "injury, impulsive, SEL",
                                            "TTS, impulsive, peak", "injury, impulsive, peak"};
        double got[6];
        for (int k = 0; k < 6; k++)
            assert_near(got[k] = value_of(row->set, row->group, names[k]), want[k], 0);
        /* Identities of the guidances: injury lies 20, 15 and 6 dB above TTS. */
        assert_near(got[1] - got[0], 20, 0);
        assert_near(got[3] - got[2], 15, 0);
        assert_near(got[5] - got[4], 6, 0);
        /* TTS onset for continuous sound is K + C, rounded. */
        const struct weighting *w = weighting_find(row->guidance, row->group);
        assert_near(got[0], weighting_threshold_db(w), 0.76);
    }
    for (uint32_t i = 0; i < criteria.n; i++)
        assert_false(criteria.items[i].weighting && criteria.items[i].weighting->in_air);
}

static void fish_behaviour_and_limits(void **state)
{
    (void)state;
    /* FHWG 2008; effective quiet from memory. */
    assert_near(find("fish-fhwg-2008", "fish, peak")->value, 206, 0);
    const struct criterion *c = find("fish-fhwg-2008", "fish of 2 g or more, SEL");
    assert_near(c->value, 187, 0);
    assert_near(c->quiet_db, 150, 0);
    assert_int_equal(c->window, ACCUMULATE_DAY);
    assert_true(criterion_unverified(c));
    assert_near(find("fish-fhwg-2008", "fish below 2 g, SEL")->value, 183, 0);
    /* Popper et al. 2014, from memory: nothing of it may pass as checked. */
    assert_near(find("fish-popper-2014", "bladder for hearing, mortality, SEL")->value, 207, 0);
    assert_near(find("fish-popper-2014", "swim bladder, injury, SEL")->value, 203, 0);
    for (uint32_t i = 0; i < criteria.n; i++)
        if (strcmp(criteria.items[i].set, "fish-popper-2014") == 0 ||
            strcmp(criteria.items[i].set, "turtles-navy-2017") == 0)
            assert_true(criterion_unverified(&criteria.items[i]));
    /* 50 CFR 217.164(b), 217.234(b). */
    c = find("behaviour-us", "behaviour, impulsive");
    assert_near(c->value, 160, 0);
    assert_int_equal(c->average, AVERAGE_T90);
    assert_false(criterion_unverified(c));
    c = find("behaviour-us", "behaviour, continuous");
    assert_near(c->value, 120, 0);
    assert_int_equal(c->sound, SOUND_CONTINUOUS);
    assert_true(criterion_applies(c, SOUND_CONTINUOUS) && !criterion_applies(c, SOUND_IMPULSIVE));
    /* BSH; the metric of the peak is disputed, and 184 dB zero-to-peak is 190 dB peak-to-peak at most. */
    c = find("germany-2008", "SEL at 750 m");
    assert_near(c->value, 160, 0);
    assert_near(c->limit_range_m, 750, 0);
    assert_near(c->limit_exceedance, 0.05, 0);
    c = find("germany-2008", "peak at 750 m");
    assert_near(c->value, 190, 0);
    assert_true(c->disputed);
    assert_int_equal(c->metric, METRIC_PEAK);
    assert_int_equal(c->other_metric, METRIC_PEAK_TO_PEAK);
    assert_false(find("belgium-2018", "peak at 750 m")->disputed);
    assert_near(find("belgium-2018", "peak at 750 m")->value, 185, 0);
    assert_near(find("denmark-2022", "porpoise, permanent threshold shift")->flee_m_s, 1.5, 0);
}

/* One good criterion, a key a line; a case replaces the line of `key` by `line`. */
struct line {
    const char *key, *text;
};
static const struct line good[] = {
    {"name", "name = \"a\";"},
    {"effect", "effect = \"injury\";"},
    {"meaning", "meaning = \"onset\";"},
    {"sound", "sound = \"impulsive\";"},
    {"metric", "metric = \"SEL cumulative\";"},
    {"weighting", "weighting = \"NMFS 2024 LF\";"},
    {"window", "window = \"24 h\";"},
    {"unit", "unit = \"dB\";"},
    {"reference", "reference = \"1 uPa2 s\";"},
    {"value", "value = { value = 183; mark = \"read\"; source = \"x\"; };"},
};
#define N_LINES (sizeof good / sizeof good[0])
#define GROUP_LINE 6u /* of the `{` of the criterion; a key stands on GROUP_LINE + 1 + its number */

static char *write_case(const char *key, const char *line)
{
    static char path[600];
    snprintf(path, sizeof path, "%s/criteria-case.cfg", test_build());
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    fputs("id = \"x\";\ntitle = \"x\";\ndocument = \"x\";\nyear = 2024;\ncriteria = (\n{\n", file);
    for (unsigned i = 0; i < N_LINES; i++)
        fprintf(file, "%s\n", strcmp(good[i].key, key) == 0 ? line : good[i].text);
    fputs("} );\n", file);
    assert_int_equal(fclose(file), 0);
    return path;
}

/* The problem names the key and the line: the key's own, or the group's when the key is missing. */
static void refused(const char *key, const char *line, const char *wanted)
{
    struct problems problems = {0};
    static struct criteria none, before;
    char start[640];
    char *path = write_case(key, line);
    unsigned n = 0;
    while (strcmp(good[n].key, key) != 0)
        n++;
    snprintf(start, sizeof start, "%s:%u: criteria[0].", path, *line ? GROUP_LINE + 1 + n : GROUP_LINE);
    none = before = (struct criteria){.n = 0};
    assert_int_equal(criteria_load(path, &problems, NULL, &none), STATUS_BAD_FORMAT);
    assert_memory_equal(&none, &before, sizeof none);
    if (!strstr(problems.lines.data, start) || !strstr(problems.lines.data, wanted))
        fail_msg("wanted '%s' and '%s' in: %s", start, wanted, problems.lines.data);
    assert_int_equal(problems.count, 1);
    problems_destroy(&problems);
    unlink(path);
}

static void what_is_missing_is_refused_with_its_line(void **state)
{
    (void)state;
    struct problems problems = {0};
    static struct criteria one;
    struct text effective = {0};
    assert_int_equal(criteria_load(write_case("", ""), &problems, &effective, &one), STATUS_OK);
    assert_int_equal(one.n, 1);
    assert_non_null(strstr(effective.data, "criteria[0].value.value = 183"));
    text_destroy(&effective);
    for (unsigned i = 0; i < N_LINES; i++) {
        char wanted[64];
        snprintf(wanted, sizeof wanted, "%s: is missing", good[i].key);
        if (strcmp(good[i].key, "metric") != 0)
            refused(good[i].key, "", wanted);
    }
}

static void what_is_wrong_is_refused_with_its_line(void **state)
{
    (void)state;
    refused("weighting", "weighting = \"HF\";", "NMFS 2018 HF");
    refused("weighting", "weighting = \"NMFS 2024 MF\";", "NMFS 2024 VHF");
    refused("weighting", "weighting = \"NMFS 2024 PA\";", "in air");
    refused("unit", "unit = \"uPa\";", "\"dB\"");
    refused("reference", "reference = \"20 uPa\";", "\"1 uPa2 s\"");
    refused("reference", "reference = \"1 uPa\";", "\"1 uPa2 s\"");
    refused("window", "window = \"none\";", "window");
    refused("value", "value = { value = 1830; mark = \"read\"; source = \"x\"; };", "allowed: 60 to 300 dB");
    refused("value", "value = { value = 183; mark = \"memory, low\"; source = \"x\"; };", "nobody may rely");
    refused("value", "value = { value = 183; mark = \"invented\"; source = \"x\"; };", "nobody may rely");
    refused("value", "value = { value = 183; mark = \"read\"; source = \"\"; };", "source");
    refused("value", "value = { value = 183; mark = \"read\"; };", "source: is missing");
    refused("value", "value = { value = 183; source = \"x\"; };", "mark: is missing");
    refused("effect", "effect = \"limit\";", "limit");
    refused("meaning", "meaning = \"x\"; average = \"1 s\";", "average");
    refused("meaning", "meaning = \"x\"; wieghting = \"none\";", "wieghting");
    refused("meaning", "meaning = \"x\"; quiet = { level_db = 190; mark = \"read\"; source = \"x\"; };",
            "quiet");
    refused("meaning", "meaning = \"x\"; flee = { speed_m_s = 0; mark = \"read\"; source = \"x\"; };",
            "speed");
}

/* The metric decides what else must be there, so its absence is said alone or with what then no longer fits.
 */
static void a_metric_must_be_named(void **state)
{
    (void)state;
    static const char *const lines[] = {"", "metric = \"rms\";", "metric = 5;", "metric = \"peak\";"};
    for (unsigned i = 0; i < 4; i++) {
        struct problems problems = {0};
        static struct criteria none;
        char *path = write_case("metric", lines[i]), start[640];
        snprintf(start, sizeof start, "%s:%u: criteria[0].%s", path,
                 i == 3 ? GROUP_LINE + 1 + 8
                 : i    ? GROUP_LINE + 1 + 4
                        : GROUP_LINE,
                 i == 3 ? "reference" : "metric");
        assert_int_equal(criteria_load(path, &problems, NULL, &none), STATUS_BAD_FORMAT);
        if (!strstr(problems.lines.data, start))
            fail_msg("wanted '%s' in: %s", start, problems.lines.data);
        problems_destroy(&problems);
        unlink(path);
    }
}

static void a_set_comes_once(void **state)
{
    (void)state;
    struct problems problems = {0};
    uint32_t n = criteria.n;
    assert_int_equal(criteria_load("config/criteria/nmfs-2024.cfg", &problems, NULL, &criteria),
                     STATUS_BAD_FORMAT);
    assert_non_null(strstr(problems.lines.data, "which another file has"));
    assert_int_equal(criteria.n, n);
    assert_int_equal(criteria.n_sets, N_SETS);
    assert_int_equal(criteria_load("config/criteria/none.cfg", &problems, NULL, &criteria), STATUS_NOT_FOUND);
    problems_destroy(&problems);
    printf("# figure criteria: %u in %zu sets\n", criteria.n, N_SETS);
}

/* What the loader cannot write, the check still refuses. */
static void the_check_names_every_fault(void **state)
{
    (void)state;
    const char *key = NULL;
    char problem[CRITERION_TEXT_SIZE];
    for (uint32_t i = 0; i < criteria.n; i++)
        assert_int_equal(criterion_check(&criteria.items[i], 0, &key, problem), STATUS_OK);
#define SPOILED(which, change, wanted)                                                                       \
    do {                                                                                                     \
        struct criterion c = *(which);                                                                       \
        change;                                                                                              \
        assert_int_equal(criterion_check(&c, 0, &key, problem), STATUS_OUT_OF_RANGE);                        \
        assert_string_equal(key, wanted);                                                                    \
    } while (0)
    const struct criterion *sel = find("nmfs-2024", "LF injury, impulsive, SEL");
    const struct criterion *peak = find("nmfs-2024", "LF injury, impulsive, peak");
    const struct criterion *limit = find("germany-2008", "peak at 750 m");
    SPOILED(peak, c.weighting = sel->weighting, "weighting");
    SPOILED(peak, c.window = ACCUMULATE_DAY, "window");
    SPOILED(peak, c.value = NAN, "value");
    SPOILED(peak, c.metric = METRIC_SPL, "average");
    SPOILED(peak, c.metric = METRIC_POSITIVE_IMPULSE; c.sound = SOUND_ANY, "sound");
    SPOILED(sel, c.sound = SOUND_CONTINUOUS; c.metric = METRIC_SEL_SINGLE;
            c.window = ACCUMULATE_NOTHING, "sound");
    SPOILED(sel, c.quiet_db = 183; c.quiet_basis = sel->basis, "quiet");
    SPOILED(sel, c.flee_m_s = -1; c.flee_basis = sel->basis, "flee");
    SPOILED(sel, c.basis.source[0] = 0, "value");
    SPOILED(limit, c.other_metric = METRIC_PEAK, "disputed");
    SPOILED(limit, c.other_metric = METRIC_SEL_SINGLE, "disputed");
    SPOILED(limit, c.limit_range_m = 0, "limit");
    SPOILED(limit, c.effect = EFFECT_INJURY, "effect");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(marine_mammals),
        cmocka_unit_test(fish_behaviour_and_limits),
        cmocka_unit_test(what_is_missing_is_refused_with_its_line),
        cmocka_unit_test(what_is_wrong_is_refused_with_its_line),
        cmocka_unit_test(a_metric_must_be_named),
        cmocka_unit_test(a_set_comes_once),
        cmocka_unit_test(the_check_names_every_fault),
    };
    return cmocka_run_group_tests(tests, load_all, NULL);
}
