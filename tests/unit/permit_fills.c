/* The shipped permits as they stand and with what a site states: one that leaves values to be filled is
 * refused, with file, line and key of each; one that does not loads. */
#include "support/test.h"

#include "base/mark.h"
#include "support/permits.h"
#include <stdlib.h>
#include <sys/stat.h>
#include <unistd.h>

#define MAX_OPEN 64

/* A value of a file that must be stated: its mark's line and its key in that file. */
struct open_value {
    unsigned line;
    char key[PERMIT_NAME_SIZE];
};

static struct permit permit, again;
static char ids[TEST_MAX_PERMITS][PERMIT_NAME_SIZE];
static struct permit_fills fills;
static struct open_value open_values[MAX_OPEN];

static void path_of(const char *id, char path[128])
{
    snprintf(path, 128, "config/permits/%.63s.cfg", id);
}

/* Found by walking the file's own tree, not by the permit loader. */
static unsigned walk(const config_setting_t *at, const char *key, unsigned n)
{
    const char *mark = NULL;
    if (config_setting_is_group(at) && config_setting_lookup_string(at, "mark", &mark) &&
        (strcmp(mark, "to be filled") == 0 || strcmp(mark, "memory, low") == 0)) {
        assert_true(n < MAX_OPEN);
        snprintf(open_values[n].key, sizeof open_values[n].key, "%.63s", key);
        open_values[n].line = (unsigned)config_setting_source_line(config_setting_get_member(at, "mark"));
        return n + 1;
    }
    for (int i = 0; config_setting_is_aggregate(at) && i < config_setting_length(at); i++) {
        const config_setting_t *child = config_setting_get_elem(at, (unsigned)i);
        char name[512];
        if (config_setting_name(child))
            snprintf(name, sizeof name, "%s%s%s", key, *key ? "." : "", config_setting_name(child));
        else
            snprintf(name, sizeof name, "%s[%d]", key, i);
        n = walk(child, name, n);
    }
    return n;
}

static unsigned find_open_values(const char *path)
{
    config_t config;
    config_init(&config);
    assert_int_equal(config_read_file(&config, path), CONFIG_TRUE);
    unsigned n = walk(config_root_setting(&config), "", 0);
    config_destroy(&config);
    return n;
}

static void refused_as_it_stands(const char *id, unsigned n)
{
    char path[128], wanted[256];
    struct problems problems = {0};
    path_of(id, path);
    memset(&permit, 0x5a, sizeof permit);
    assert_int_equal(permit_load(path, NULL, &problems, &permit), STATUS_BAD_FORMAT);
    assert_int_equal(permit.id[0], 0x5a);
    if (problems.count != n)
        fail_msg("%s: %u problems for %u open values:\n%s", path, problems.count, n, problems.lines.data);
    for (unsigned i = 0; i < n; i++) {
        snprintf(wanted, sizeof wanted, "%s:%u: %s.mark: is \"", path, open_values[i].line,
                 open_values[i].key);
        if (!strstr(problems.lines.data, wanted))
            fail_msg("no '%s' in\n%s", wanted, problems.lines.data);
    }
    problems_destroy(&problems);
}

/* Each value that was stated is kept with who states it; nothing is left that nobody may rely on. */
static void holds_what_was_stated(unsigned n)
{
    unsigned stated = 0;
    char problem[PERMIT_TEXT_SIZE];
    for (uint32_t i = 0; i < permit.n_values; i++) {
        const struct permit_value *value = &permit.values[i];
        assert_true(value->mark != MARK_TO_BE_FILLED && value->mark != MARK_MEMORY_LOW);
        assert_true(*value->source && *value->key && *value->text);
        stated += value->mark == MARK_FILLED;
        if (value->mark == MARK_FILLED)
            assert_string_equal(value->who, "nobody: invented for tests");
        else
            assert_string_equal(value->who, "");
    }
    assert_int_equal(stated, n);
    assert_int_equal(permit_check(&permit, 0, problem), STATUS_OK);
}

static void every_preset(void **state)
{
    (void)state;
    unsigned n_marks[MARK_COUNT] = {0}, n_all = 0;
    unsigned n_ids = test_list_permits(ids);
    assert_true(n_ids >= 24);
    for (unsigned p = 0; p < n_ids; p++) {
        const char *id = ids[p];
        char path[128];
        path_of(id, path);
        unsigned n = find_open_values(path), marks[MARK_COUNT] = {0};
        if (n > 0)
            refused_as_it_stands(id, n);
        assert_true(test_permit_fills(id, &fills));
        assert_int_equal(fills.n, n);
        memset(&permit, 0, sizeof permit);
        assert_true(test_load_permit(id, &permit));
        assert_string_equal(permit.id, id);
        holds_what_was_stated(n);
        for (uint32_t i = 0; i < permit.n_values; i++) {
            marks[permit.values[i].mark]++;
            n_marks[permit.values[i].mark]++;
        }
        n_all += permit.n_values;
        print_message("# figure %s: %u values: %u read, %u secondary, %u memory high, %u memory medium, %u "
                      "to be stated\n",
                      id, permit.n_values, marks[MARK_READ], marks[MARK_SECONDARY], marks[MARK_MEMORY_HIGH],
                      marks[MARK_MEMORY_MEDIUM], marks[MARK_FILLED]);
    }
    print_message(
        "# figure all: %u values: %u read, %u secondary, %u memory high, %u memory medium, %u to be stated\n",
        n_all, n_marks[MARK_READ], n_marks[MARK_SECONDARY], n_marks[MARK_MEMORY_HIGH],
        n_marks[MARK_MEMORY_MEDIUM], n_marks[MARK_FILLED]);
    assert_int_equal(n_marks[MARK_INVENTED], 0);
}

/* What a ledger keeps of the values that were stated gives the same permit again. */
static void stated_values_come_back_from_a_ledger(void **state)
{
    (void)state;
    unsigned n_ids = test_list_permits(ids);
    for (unsigned p = 0; p < n_ids; p++) {
        struct problems problems = {0};
        char path[128];
        path_of(ids[p], path);
        memset(&permit, 0, sizeof permit);
        memset(&again, 0, sizeof again);
        assert_true(test_load_permit(ids[p], &permit));
        memset(&fills, 0, sizeof fills);
        for (uint32_t i = 0; i < permit.n_values; i++) {
            const struct permit_value *value = &permit.values[i];
            if (value->mark != MARK_FILLED)
                continue;
            struct permit_fill *fill = &fills.fills[fills.n++];
            memcpy(fill->key, value->key, sizeof fill->key);
            memcpy(fill->text, value->text, sizeof fill->text);
            memcpy(fill->who, value->who, sizeof fill->who);
            memcpy(fill->source, value->source, sizeof fill->source);
        }
        if (permit_load(path, &fills, &problems, &again) != STATUS_OK)
            fail_msg("%s", problems.lines.data);
        assert_memory_equal(&permit, &again, sizeof permit);
        problems_destroy(&problems);
    }
}

static void load_with(const char *id, const char *key, const char *text, const char *wanted)
{
    struct problems problems = {0};
    char path[128];
    path_of(id, path);
    assert_true(test_permit_fills(id, &fills));
    struct permit_fill *fill = &fills.fills[fills.n];
    for (uint32_t i = 0; i < fills.n; i++)
        if (strcmp(fills.fills[i].key, key) == 0)
            fill = &fills.fills[i];
    if (fill == &fills.fills[fills.n])
        fills.n++;
    *fill = (struct permit_fill){.who = "Ann Lee", .source = "licence 12/2026"};
    snprintf(fill->key, sizeof fill->key, "%s", key);
    snprintf(fill->text, sizeof fill->text, "%s", text);
    enum status status = permit_load(path, &fills, &problems, &permit);
    if (wanted && !(status == STATUS_BAD_FORMAT && strstr(problems.lines.data, wanted)))
        fail_msg("no '%s' in %s", wanted, problems.lines.data ? problems.lines.data : "nothing");
    if (!wanted && status != STATUS_OK)
        fail_msg("%s", problems.lines.data);
    problems_destroy(&problems);
}

static const struct permit_value *value_of(const char *key)
{
    for (uint32_t i = 0; i < permit.n_values; i++)
        if (strcmp(permit.values[i].key, key) == 0)
            return &permit.values[i];
    fail_msg("no value %s", key);
    return NULL;
}

/* A consent: the site states what differs, also where the preset has a value of its own. */
static void a_site_states_its_consent(void **state)
{
    (void)state;
    load_with("uk-piling-2010", "zones[0].radius_m", "750", NULL);
    assert_true(permit.zones[0].radius_m == 750);
    const struct permit_value *value = value_of("zones[0].radius_m");
    assert_int_equal(value->mark, MARK_FILLED);
    assert_string_equal(value->text, "750");
    assert_string_equal(value->who, "Ann Lee");
    assert_string_equal(value->source, "licence 12/2026");
    load_with("uk-piling-2010", "start.dark", "acoustic", NULL);
    assert_int_equal(permit.start.dark, DARK_START_ACOUSTIC);
    load_with("uk-piling-2010", "deterrent.required", "true", NULL);
    assert_true(permit.deterrent.stated);
    load_with("uk-piling-2010", "zones[0].actions[2]", "stop", NULL);
    assert_int_equal(permit.zones[0].action[PHASE_FULL_POWER], ACTION_STOP);
    load_with("uk-piling-2010", "zones[0].groups", "porpoise, phocid", "unknown is in no zone");
    load_with("uk-piling-2010", "zones[0].radius_m", "0.75", "a number from 5 to 100000"); /* kilometres */
    load_with("uk-piling-2010", "zones[0].radius_m", "wide", "zones[0].radius_m is \"wide\"");
    load_with("uk-piling-2010", "soft_start.least_minutes", "1200", "a number from 0 to 240"); /* seconds */
    load_with(
        "uk-piling-2010", "zones[1].radius_m", "750",
        "the settings: permit_values: config/permits/uk-piling-2010.cfg has no value \"zones[1].radius_m\"");
    load_with("uk-piling-2010", "start.dark", "sometimes", "allowed: allowed, acoustic, never");
    load_with("accobams-2019", "zones[0].groups", "whale", "has no group \"whale\"");
}

/* A list that is longer than there is room for is one problem, with its number, and nothing is written beyond
 * the room. */
static void more_than_there_is_room_for_is_said_once(void **state)
{
    (void)state;
    static const char *const path = "build/try/too-many.cfg";
    char block[4096];
    size_t n;
    FILE *from = fopen("config/permits/demonstration.cfg", "r");
    mkdir("build/try", 0755);
    FILE *to = fopen(path, "w");
    assert_true(from && to);
    while ((n = fread(block, 1, sizeof block, from)) > 0)
        assert_int_equal(fwrite(block, 1, n, to), n);
    fprintf(to, "\nrecords = (");
    for (int i = 0; i < PERMIT_MAX_RECORDS + 3; i++)
        fprintf(to,
                "%s{ what = { value = \"report %d\"; mark = \"invented\"; source = \"a test\"; };"
                " within_hours = { value = 1; mark = \"invented\"; source = \"a test\"; }; }",
                i ? ", " : "", i);
    fprintf(to, ");\n");
    fclose(from);
    fclose(to);
    struct problems problems = {0};
    assert_int_equal(permit_load(path, NULL, &problems, &permit), STATUS_BAD_FORMAT);
    assert_int_equal(problems.count, 1);
    assert_non_null(strstr(problems.lines.data, "records: has 11; allowed: at most 8"));
    problems_destroy(&problems);
    unlink(path);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(more_than_there_is_room_for_is_said_once),
        cmocka_unit_test(every_preset),
        cmocka_unit_test(stated_values_come_back_from_a_ledger),
        cmocka_unit_test(a_site_states_its_consent),
    };
    return cmocka_run_group_tests_name("permit fills", tests, NULL, NULL);
}
