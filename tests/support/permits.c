/* The shipped permits; see permits.h. */
#include "support/permits.h"
#include "support/test.h"
#include <dirent.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static int by_name(const void *a, const void *b)
{
    return strcmp(a, b);
}

unsigned test_list_permits(char ids[TEST_MAX_PERMITS][PERMIT_NAME_SIZE])
{
    unsigned n = 0;
    DIR *folder = opendir("config/permits");
    for (const struct dirent *entry; folder && n < TEST_MAX_PERMITS && (entry = readdir(folder)) != NULL;) {
        const char *end = strstr(entry->d_name, ".cfg");
        if (end && strcmp(entry->d_name, "demonstration.cfg") != 0)
            snprintf(ids[n++], PERMIT_NAME_SIZE, "%.*s", (int)(end - entry->d_name), entry->d_name);
    }
    if (folder)
        closedir(folder);
    qsort(ids, n, sizeof ids[0], by_name);
    return n;
}

bool test_permit_fills(const char *id, struct permit_fills *out)
{
    static const char *const path = "tests/support/permit-values.cfg";
    struct problems problems = {0};
    struct reader file;
    struct group_reader root, group;
    memset(out, 0, sizeof *out);
    if (reader_open(&file, path, &problems, NULL) == STATUS_OK) {
        root = reader_root(&file);
        group_child(&root, id, READER_OPTIONAL, &group);
        permit_read_fills(&group, out);
    }
    reader_close(&file);
    if (problems.count > 0)
        printf("# %s\n", problems.lines.data);
    bool good = problems.count == 0;
    problems_destroy(&problems);
    return good;
}

bool test_load_permit(const char *id, struct permit *out)
{
    struct problems problems = {0};
    struct permit_fills fills;
    char path[128];
    snprintf(path, sizeof path, "config/permits/%s.cfg", id);
    if (!test_permit_fills(id, &fills))
        return false;
    enum status status = permit_load(path, &fills, &problems, out);
    if (status != STATUS_OK)
        printf("# %s: %s\n", path, problems.lines.data ? problems.lines.data : "not read");
    problems_destroy(&problems);
    return status == STATUS_OK;
}

void test_permit_states(const struct permit *permit, const char *key, const char *text, enum value_mark mark)
{
    for (uint32_t i = 0; i < permit->n_values; i++) {
        const struct permit_value *value = &permit->values[i];
        if (strcmp(value->key, key) != 0)
            continue;
        assert_string_equal(value->text, text);
        assert_int_equal(value->mark, mark);
        return;
    }
    fail_msg("%s has no value %s", permit->id, key);
}
