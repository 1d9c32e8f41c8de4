/* Plays every .scn file of this folder, one test each. With HUSHWATCH_SCENARIO=NAME only that one, and what
 * follows from its events is printed instead of being compared: that is how a new one is begun. */
#include "support/test.h"

#include "support/permits.h"
#include "support/scenario.h"
#include <dirent.h>
#include <stdlib.h>
#include <unistd.h>

#define FOLDER "tests/scenario"
#define MAX_SCENARIOS 400

struct scenario {
    char path[512], title[256];
    const struct permit *permit;
    bool writes_all;
};

static struct scenario scenarios[MAX_SCENARIOS];
static struct permit permits[32];
static unsigned n_scenarios, n_permits, n_outcomes;

static const struct permit *permit_of(const char *id)
{
    for (unsigned i = 0; i < n_permits; i++)
        if (strcmp(permits[i].id, id) == 0)
            return &permits[i];
    char path[512];
    struct problems problems = {0};
    snprintf(path, sizeof path, FOLDER "/%s.cfg", id); /* a permit of these tests */
    bool ours = access(path, R_OK) == 0;
    if (n_permits == 32 || (!ours && !test_load_permit(id, &permits[n_permits])))
        return NULL;
    if (ours && permit_load(path, NULL, &problems, &permits[n_permits]) != STATUS_OK) {
        printf("# %s\n", problems.lines.data ? problems.lines.data : path);
        return NULL;
    }
    return &permits[n_permits++];
}

static void play(void **state)
{
    const struct scenario *scenario = *state;
    static char problem[4096];
    if (!scenario->permit)
        fail_msg("%s: no title, or a permit that cannot be loaded", scenario->path);
    if (!scenario_play(scenario->path, scenario->permit, scenario->writes_all, &n_outcomes, problem,
                       sizeof problem)) {
        print_message("# %s\n", problem);
        fail();
    }
}

/* The player must be able to fail: each of these spoils a good scenario in one place. */
static void the_player_is_strict(void **state)
{
    (void)state;
    static const char head[] =
        "0:00:00 Ann signs on as visual observer\n0:00:00 Bo signs on as acoustic observer\n";
    static const char phase[] = "0:00:00 => phase pre-watch because \"is kept\" causes note\n";
    static const char advice[] = "0:00:00 => all are told: do not start until 0:01:00\n";
    static const struct {
        const char *pieces[4];
        const char *wanted; /* part of the problem; NULL where it is good */
    } cases[] = {
        {{head, phase, advice, "0:00:50 end\n"}, NULL},
        {{head, phase, advice, ""}, "has no end"},
        {{head, phase, advice, "0:01:00 end\n"}, "nobody expects"},
        {{head, phase, "", "0:00:50 end\n"}, "nobody expects"},
        {{head, advice, "", "0:00:50 end\n"}, "but it is"},
        {{head, phase, "0:00:00 => observer is told: do not start\n", "0:00:50 end\n"}, "nobody expects"},
        {{head, phase, advice, "0:00:50 => phase ready\n0:00:50 end\n"}, "nothing comes"},
        {{head, phase, "0:00:01 => all are told: do not start\n", "0:00:50 end\n"}, "but it is"},
        {{head, phase, "0:00:00 => all are told: do not start until 0:01:01\n", ""}, "another"},
        {{head, phase, "0:00:00 => all are told: do not start, not yet confirmed\n", ""}, "but it is"},
        {{head, "0:00:00 => phase pre-watch because \"is lost\"\n", "", ""}, "the reason is"},
        {{head, "0:00:00 => phase pre-watch clause \"9\"\n", "", ""}, "the clause is"},
        {{head, "0:00:00 => phase pre-watch causes call\n", "", ""}, "no cause is a call"},
        {{"0:00:00 Ann dances\n", "", "", ""}, "cannot read the event"},
        {{"0:00:09 job A opens\n", "0:00:08 job A closes\n", "", ""}, "earlier"},
        {{head, phase, advice, "0:00:30 check timer pre-watch stands at 0:00:29\n"}, "stands at 0:00:30"},
        {{head, phase, advice, "0:00:30 check release possible\n"}, "the other way"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        char path[] = "/tmp/hushwatch-scenario-XXXXXX", problem[2048] = "";
        int fd = mkstemp(path);
        assert_true(fd >= 0);
        FILE *file = fdopen(fd, "w");
        for (int k = 0; k < 4; k++)
            fputs(cases[i].pieces[k], file);
        fclose(file);
        unsigned outcomes = 0;
        bool good =
            scenario_play(path, permit_of("demonstration"), false, &outcomes, problem, sizeof problem);
        unlink(path);
        if (good != !cases[i].wanted || (cases[i].wanted && !strstr(problem, cases[i].wanted)))
            fail_msg("case %zu says \"%s\"", i, problem);
    }
}

static void add(const char *name, bool writes_all)
{
    struct scenario *scenario = &scenarios[n_scenarios++];
    char permit[PERMIT_NAME_SIZE];
    snprintf(scenario->path, sizeof scenario->path, FOLDER "/%.200s", name);
    scenario->writes_all = writes_all;
    if (scenario_head(scenario->path, scenario->title, sizeof scenario->title, permit, sizeof permit))
        scenario->permit = permit_of(permit);
    else
        snprintf(scenario->title, sizeof scenario->title, "%.200s", name);
}

static int by_path(const void *a, const void *b)
{
    return strcmp(((const struct scenario *)a)->path, ((const struct scenario *)b)->path);
}

int main(void)
{
    static struct CMUnitTest tests[MAX_SCENARIOS + 1];
    const char *only = getenv("HUSHWATCH_SCENARIO");
    DIR *folder = opendir(FOLDER);
    struct dirent *file;
    while (folder && (file = readdir(folder)) != NULL && n_scenarios < MAX_SCENARIOS) {
        size_t n = strlen(file->d_name);
        if (n > 4 && strcmp(file->d_name + n - 4, ".scn") == 0 && (!only || strstr(file->d_name, only)))
            add(file->d_name, only != NULL);
    }
    if (folder)
        closedir(folder);
    qsort(scenarios, n_scenarios, sizeof scenarios[0], by_path);
    for (unsigned i = 0; i < n_scenarios; i++)
        tests[i] = (struct CMUnitTest){scenarios[i].title, play, NULL, NULL, &scenarios[i]};
    tests[n_scenarios] = (struct CMUnitTest)cmocka_unit_test(the_player_is_strict);
    if (n_scenarios == 0) {
        printf("not ok 1 - no scenario found in " FOLDER "\n");
        return 1;
    }
    clock_t start = clock();
    int failed = _cmocka_run_group_tests("scenarios", tests, n_scenarios + 1, NULL, NULL);
    printf("# figure %u scenarios, %u outcomes, %.2f s\n", n_scenarios, n_outcomes,
           (double)(clock() - start) / CLOCKS_PER_SEC);
    return failed;
}
