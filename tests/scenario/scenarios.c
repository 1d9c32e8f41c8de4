/* Plays every .scn file of this folder, one test each. With HUSHWATCH_SCENARIO=NAME only that one, and what
 * follows from its events is printed instead of being compared: that is how a new one is begun. */
#include "support/test.h"

#include "settings/permit.h"
#include "support/scenario.h"
#include <dirent.h>
#include <stdlib.h>

#define FOLDER "tests/scenario"
#define MAX_SCENARIOS 400

struct scenario {
    char path[512], title[256];
    const struct permit *permit;
    bool transcript;
};

static struct scenario scenarios[MAX_SCENARIOS];
static struct permit permits[16];
static unsigned n_scenarios, n_permits, n_outcomes;

static const struct permit *permit_of(const char *id)
{
    for (unsigned i = 0; i < n_permits; i++)
        if (strcmp(permits[i].id, id) == 0)
            return &permits[i];
    char path[512];
    struct problems problems = {0};
    snprintf(path, sizeof path, "config/permits/%s.cfg", id);
    if (n_permits == 16 || permit_load(path, &problems, &permits[n_permits]) != STATUS_OK) {
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
    if (!scenario_play(scenario->path, scenario->permit, scenario->transcript, &n_outcomes, problem,
                       sizeof problem)) {
        print_message("# %s\n", problem);
        fail();
    }
}

static void add(const char *name, bool transcript)
{
    struct scenario *scenario = &scenarios[n_scenarios++];
    char permit[PERMIT_NAME_SIZE];
    snprintf(scenario->path, sizeof scenario->path, FOLDER "/%.200s", name);
    scenario->transcript = transcript;
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
    static struct CMUnitTest tests[MAX_SCENARIOS];
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
    if (n_scenarios == 0) {
        printf("not ok 1 - no scenario found in " FOLDER "\n");
        return 1;
    }
    clock_t start = clock();
    int failed = _cmocka_run_group_tests("scenarios", tests, n_scenarios, NULL, NULL);
    printf("# figure %u scenarios, %u outcomes, %.2f s\n", n_scenarios, n_outcomes,
           (double)(clock() - start) / CLOCKS_PER_SEC);
    return failed;
}
