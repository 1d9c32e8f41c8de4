/* lib/rule/permit and its loader: what makes a permit unusable is said, all of it, with its line and key. The
 * files in config/permits are held against their documents in permit_presets_*.c. */
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
    /* Units: a number in another unit is no such number. */
    SPOILED(permit.clearances[0].minutes = 1800, "clearances[0].minutes: a clearance time is 1800 minutes");
    SPOILED(permit.post_watch_minutes = 3600, "post_watch.minutes");
    /* Every timer has a bound. */
    SPOILED(permit.pre_watch_hole_minutes = -1, "pre_watch.longest_hole_minutes");
    SPOILED(permit.deterrent =
                ((struct permit_deterrent){.stated = true, .least_minutes = 20, .longest_minutes = 10}),
            "deterrent.longest_minutes");
    SPOILED(permit.deterrent =
                ((struct permit_deterrent){.stated = true, .longest_minutes = 10, .gap_minutes = NAN}),
            "deterrent.gap_minutes");
    SPOILED(permit.outage =
                ((struct permit_outage){.stated = true, .diagnose_minutes = 20, .day_minutes = 10}),
            "outage");
    SPOILED(permit.staff.longest_hours = 0, "staff");
    SPOILED(permit.job.stated = true, "job.longest_minutes");
    SPOILED(permit.staff.day_hours = 4; permit.staff.longest_hours = 6, "more than 4 a day");
    SPOILED(permit.n_breaks = 2; permit.breaks[1] = permit.breaks[0], "break.longer[0]");
    SPOILED(permit.n_pre_watches = 2; permit.pre_watches[1] = permit.pre_watches[0], "pre_watch.deeper[0]");
    /* Every phase can be entered and left. */
    SPOILED(permit.start.closed_from = 101; permit.start.closed_to = 1231, "whole year");
    SPOILED(permit.start.closed_from = 1301; permit.start.closed_to = 230, "month * 100 + day");
    SPOILED(permit.start.closed_from = 101, "lacks");
    SPOILED(permit.soft_start.stop_if_possible_else_hold = true, "no zone asks to hold");
    SPOILED(permit.clearances[0].groups &= ~PERMIT_GROUP_BIT(GROUP_PHOCID), "would never end");
    SPOILED(permit.breaks[0].daylight = true, "nothing is said of the dark");
    /* Every group is heard, seen, or stated as neither. */
    SPOILED(permit.unknown[GROUP_TURTLE] = UNKNOWN_INSIDE, "turtle is in no zone");
    SPOILED(permit.zones[0].found = 0, "neither what is seen nor what is heard");
    /* No zone without an origin that the activity has. */
    SPOILED(permit.zones[0].origin = ORIGIN_ARRAY_EDGE, "which piling has not");
    SPOILED(permit.zones[1] = permit.zones[0]; permit.n_zones = 2, "zones[1]: another zone is called");
    /* Species. */
    SPOILED(permit.zones[0].n_species = 1, "what one unknown means");
    SPOILED(permit.clearances[1] = permit.clearances[0]; permit.clearances[1].n_species = 1;
            permit.clearances[1].species_unknown = SPECIES_NOT_STATED;
            permit.n_clearances = 2, "clearances[1].species");
    SPOILED(permit.values[3].mark = MARK_FILLED, "nobody says by whom");
    SPOILED(strcpy(permit.document_sha256, "abc"), "no SHA-256");
    load_good("demonstration");
    permit.demonstration = false; /* then every single value is refused */
    assert_int_equal(count_problems("invented"), permit.n_values);
    load_good("uk-piling-2010");
    permit.turn.stated = permit.mitigation_source.stated = true;
    permit.mitigation_source.longest_minutes = INFINITY;
    assert_int_equal(count_problems("piling has no lines"), 2);
    load_good("nz-2013-level-1");
    permit.steady.stated = true;
    assert_int_equal(count_problems("vibro_and_drilling: seismic has neither"), 1);
    load_good("demonstration");
    permit.activity = ACTIVITY_SEISMIC; /* a line turn of nothing */
    permit.zones[0].origin = ORIGIN_VESSEL;
    permit.turn = (struct permit_turn){.stated = true, .reduced = true};
    assert_int_equal(count_problems("line_turn"), 1);
    load_good("demonstration");
    permit.n_zones = 0;
    permit.breaks[0].minutes = -1;
    permit.title[0] = 0;
    assert_int_equal(count_problems("zones: there are 0 zones"), 3);
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
    from = fopen("config/permits/demonstration.cfg", "r"); /* what is readable and cannot be, has lines too */
    to = fopen(path, "w");
    assert_true(from && to);
    for (n = 0; fgets(line, sizeof line, from);) {
        n++;
        word = strstr(line, "activity =") ? n : word;
        typo = strstr(line, "origin =") ? n : typo;
        low = strstr(line, "longest_minutes") ? n : low;
        fputs(strstr(line, "origin =")
                  ? "origin = { value = \"charge\"; mark = \"invented\"; source = \"x\"; };\n"
              : strstr(line, "longest_minutes")
                  ? "longest_minutes = { value = 0.5; mark = \"invented\"; source = \"x\"; };\n"
                  : line,
              to);
    }
    fclose(from);
    fclose(to);
    assert_int_equal(permit_load(path, NULL, &problems, &permit), STATUS_BAD_FORMAT);
    assert_int_equal(problems.count, 2);
    snprintf(wanted, sizeof wanted, "%s:%u: zones[0].origin: zone 'stop zone' begins at the charge", path,
             typo);
    assert_non_null(strstr(problems.lines.data, wanted));
    snprintf(wanted, sizeof wanted, "%s:%u: soft_start.longest_minutes: the soft start's longest", path, low);
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
        cmocka_unit_test(all_errors_with_their_lines),
        cmocka_unit_test(words),
    };
    return cmocka_run_group_tests_name("permit", tests, NULL, NULL);
}
