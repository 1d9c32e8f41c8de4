/* lib/rule/permit and its loader: what makes a permit unusable is said, all of it, and the files in
 * config/permits hold what their documents say. */
#include "support/test.h"

#include "settings/permit.h"
#include <math.h>
#include <stdlib.h>
#include <unistd.h>

static struct permit permit;

static void load_good(const char *name)
{
    struct problems problems = {0};
    char path[128];
    snprintf(path, sizeof path, "config/permits/%s.cfg", name);
    memset(&permit, 0, sizeof permit);
    enum status status = permit_load(path, NULL, &problems, &permit);
    if (status != STATUS_OK)
        fail_msg("%s: %s", path, problems.lines.data);
    problems_destroy(&problems);
}

static unsigned count_problems(const char *wanted)
{
    char problem[PERMIT_TEXT_SIZE];
    bool found = false;
    unsigned n = 0;
    for (; permit_check(&permit, n, problem) != STATUS_OK; n++) {
        assert_int_equal(permit_check(&permit, n, problem), STATUS_OUT_OF_RANGE);
        found = found || strstr(problem, wanted);
    }
    if (n && !found)
        fail_msg("no problem says '%s' but e.g. '%s'", wanted, problem);
    return n;
}

static void every_unusable_permit_is_named(void **state)
{
    (void)state;
    load_good("demonstration");
    assert_int_equal(count_problems(""), 0);
#define SPOILED(change, wanted)                                                                              \
    load_good("demonstration");                                                                              \
    change;                                                                                                  \
    assert_int_equal(count_problems(wanted), 1)
    SPOILED(permit.id[0] = 0, "id");
    SPOILED(permit.pre_watches[0].minutes = 0, "pre-watch");
    SPOILED(permit.pre_watches[0].minutes = NAN, "pre-watch");
    SPOILED(permit.pre_watches[0].minutes = INFINITY, "pre-watch");
    SPOILED(permit.pre_watches[0].visual = permit.pre_watches[0].acoustic = false, "neither");
    SPOILED(permit.unknown[GROUP_PORPOISE] = UNKNOWN_NOT_STATED, "porpoise");
    SPOILED(permit.zones[0].radius_m = 0, "radius");
    SPOILED(permit.zones[0].origin = (enum zone_origin)9, "no origin");
    SPOILED(permit.zones[0].groups = 0, "no known group");
    SPOILED(permit.zones[0].groups |= PERMIT_GROUP_BIT(GROUP_TURTLE), "turtle");
    SPOILED(permit.zones[0].action[PHASE_READY] = ACTION_STOP, "ready");
    SPOILED(permit.zones[0].action[PHASE_FULL_POWER] = ACTION_DELAY, "full power");
    SPOILED(memset(permit.zones[0].action, 0, sizeof permit.zones[0].action), "asks for nothing");
    SPOILED(permit.clearances[0].minutes = 1e9, "clearance");
    SPOILED(permit.clearances[1] = permit.clearances[0]; permit.clearances[1].groups = 2;
            permit.n_clearances = 2, "two clearance times");
    SPOILED(permit.soft_start.least_minutes = -1, "soft start");
    SPOILED(permit.soft_start.longest_minutes = 0.1, "soft start");
    SPOILED(permit.breaks[0].minutes = 0, "break");
    SPOILED(permit.confirm_countdown_s = 1e6, "countdown");
    SPOILED(permit.p_inside_prepare = 0.9, "P(inside)");
    SPOILED(permit.values[3].mark = MARK_MEMORY_LOW, "low-confidence");
    SPOILED(permit.values[3].source[0] = 0, "source");
    load_good("demonstration");
    permit.demonstration = false; /* then every single value is refused */
    assert_int_equal(count_problems("invented"), permit.n_values);
    load_good("demonstration");
    permit.n_zones = 0;
    permit.breaks[0].minutes = -1;
    permit.title[0] = 0;
    assert_int_equal(count_problems("0 zones"), 3);
}

/* JNCC, NE and CCW piling protocol, August 2010. */
static void uk_piling(void **state)
{
    (void)state;
    load_good("uk-piling-2010");
    assert_true(permit.pre_watches[0].minutes == 30 && permit.pre_watches[0].visual && permit.pre_watches[0].acoustic);
    assert_int_equal(permit.n_zones, 1);
    assert_true(permit.zones[0].radius_m == 500 && permit.zones[0].origin == ORIGIN_PILE);
    assert_int_equal(permit.zones[0].groups, PERMIT_ALL_GROUPS & ~PERMIT_GROUP_BIT(GROUP_TURTLE));
    assert_int_equal(permit.zones[0].action[PHASE_PRE_WATCH], ACTION_DELAY);
    assert_int_equal(permit.zones[0].action[PHASE_SOFT_START], ACTION_HOLD);
    assert_int_equal(permit.zones[0].action[PHASE_FULL_POWER], ACTION_LOG);
    assert_true(permit.clearances[0].minutes == 20 && !permit.clearances[0].leaving_ends);
    assert_true(permit.soft_start.least_minutes == 20 && isinf(permit.soft_start.longest_minutes));
    assert_true(permit.soft_start.stop_if_possible_else_hold);
    assert_true(permit.breaks[0].minutes == 10 && permit.breaks[0].limit_included);
    assert_int_equal(permit.break_watch, BREAK_WATCH_STANDS);
    assert_int_equal(permit.unknown[GROUP_PORPOISE], UNKNOWN_ASK_OBSERVER);
    assert_true(permit.confirm_countdown_s == 30); /* the program's own, where the permit is silent */
    assert_false(permit.demonstration);
    /* Nobody has read the clearance time in the document yet, and that is said. */
    bool said = false;
    for (uint32_t i = 0; i < permit.n_values; i++) {
        const struct permit_value *value = &permit.values[i];
        said = said || (strcmp(value->key, "clearances[0].minutes") == 0 && strcmp(value->text, "20") == 0 &&
                        value->mark == MARK_MEMORY_HIGH && mark_unverified(value->mark) && *value->source);
    }
    assert_true(said);
}

/* Department of Conservation, 2013 Code of Conduct, level 1. */
static void nz_level_1(void **state)
{
    (void)state;
    load_good("nz-2013-level-1");
    assert_int_equal(permit.n_zones, 3);
    assert_true(permit.zones[0].radius_m == 1500 && permit.zones[0].calf_only);
    assert_true(permit.zones[1].radius_m == 1000 && !permit.zones[1].calf_only);
    assert_true(permit.zones[2].radius_m == 200);
    assert_int_equal(permit.zones[1].action[PHASE_FULL_POWER], ACTION_STOP);
    assert_int_equal(permit.zones[2].action[PHASE_FULL_POWER], ACTION_LOG);
    assert_int_equal(permit.zones[2].action[PHASE_DELAY], ACTION_DELAY);
    assert_true(permit.clearances[0].minutes == 30 && permit.clearances[0].leaving_ends);
    assert_int_equal(permit.clearances[1].groups, PERMIT_GROUP_BIT(GROUP_OTARIID));
    assert_true(permit.clearances[1].minutes == 10);
    assert_true(permit.soft_start.least_minutes == 20 && permit.soft_start.longest_minutes == 40);
    assert_true(permit.breaks[0].minutes == 10 && !permit.breaks[0].limit_included);
    assert_int_equal(permit.unknown[GROUP_PORPOISE], UNKNOWN_INSIDE);
}

/* Several errors at once, each with its line; the permit that was there stays. */
static void all_errors_with_their_lines(void **state)
{
    (void)state;
    char path[] = "/tmp/hushwatch-permit-XXXXXX";
    int fd = mkstemp(path);
    assert_true(fd >= 0);
    FILE *from = fopen("config/permits/demonstration.cfg", "r"), *to = fdopen(fd, "w");
    assert_true(from && to);
    char line[512];
    unsigned n = 0, low = 0, typo = 0, word = 0;
    while (fgets(line, sizeof line, from)) {
        n++;
        if (strstr(line, "radius_m")) {
            fputs("    radius_m = { value = 500; mark = \"memory, low\"; source = \"x\"; };\n", to);
            low = n;
        } else if (strstr(line, "limit_resumes")) {
            fputs("    limit_resume = { value = true; mark = \"invented\"; source = \"x\"; };\n", to);
            typo = n;
        } else if (strstr(line, "activity =")) {
            fputs("activity = \"fishing\";\n", to);
            word = n;
        } else
            fputs(line, to);
    }
    fclose(from);
    fclose(to);
    struct problems problems = {0};
    load_good("uk-piling-2010");
    assert_int_equal(permit_load(path, NULL, &problems, &permit), STATUS_BAD_FORMAT);
    assert_string_equal(permit.id, "uk-piling-2010");
    assert_int_equal(problems.count, 4); /* the typo is a missing key and an unknown one */
    char wanted[160];
    snprintf(wanted, sizeof wanted, "%s:%u: zones[0].radius_m.mark: is \"memory, low\"", path, low);
    assert_non_null(strstr(problems.lines.data, wanted));
    snprintf(wanted, sizeof wanted, "%s:%u: break.limit_resume: is not a known key; did you mean", path,
             typo);
    assert_non_null(strstr(problems.lines.data, wanted));
    snprintf(wanted, sizeof wanted, "%s:%u: activity: is \"fishing\"; allowed: piling", path, word);
    assert_non_null(strstr(problems.lines.data, wanted));
    problems_destroy(&problems);
    problems = (struct problems){0};
    assert_int_equal(truncate(path, 0), 0); /* an empty file: everything is missing, nothing breaks */
    assert_int_equal(permit_load(path, NULL, &problems, &permit), STATUS_BAD_FORMAT);
    assert_true(problems.count > 8);
    problems_destroy(&problems);
    unlink(path);
    problems = (struct problems){0};
    assert_int_equal(permit_load(path, NULL, &problems, &permit), STATUS_NOT_FOUND);
    assert_int_equal(problems.count, 1);
    problems_destroy(&problems);
}

static void words(void **state)
{
    (void)state;
    assert_string_equal(permit_action_text(ACTION_REDUCE), "reduce");
    assert_string_equal(permit_action_text((enum permit_action)99), "unknown");
    assert_string_equal(permit_mark_text(MARK_MEMORY_MEDIUM), "memory, medium");
    assert_string_equal(permit_origin_text(ORIGIN_ARRAY_EDGE), "array edge");
    assert_string_equal(permit_unknown_text(UNKNOWN_ASK_OBSERVER), "ask observer");
    assert_string_equal(permit_break_watch_text(BREAK_WATCH_COUNTS), "counts");
    assert_string_equal(permit_activity_text(ACTIVITY_SEISMIC), "seismic");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_unusable_permit_is_named),
        cmocka_unit_test(uk_piling),
        cmocka_unit_test(nz_level_1),
        cmocka_unit_test(all_errors_with_their_lines),
        cmocka_unit_test(words),
    };
    return cmocka_run_group_tests_name("permit", tests, NULL, NULL);
}
