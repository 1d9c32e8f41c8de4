/* The shipped permits; see permits.h. */
#include "support/permits.h"
#include <stdio.h>
#include <string.h>

const char *const test_permit_ids[] = {
    "accobams-2019",
    "australia-2008",
    "belgium-2018",
    "brazil-2018",
    "canada-2007",
    "denmark-2022",
    "germany-2013",
    "ireland-2014-blasting",
    "ireland-2014-piling",
    "ireland-2014-seismic",
    "netherlands",
    "nz-2013-level-1",
    "nz-2013-level-2",
    "taiwan-2018",
    "uk-explosives-2010",
    "uk-explosives-2025",
    "uk-piling-2010",
    "uk-seismic-2017",
    "us-gulf-2026",
    "us-nmfs-coastal-works",
    "us-nmfs-gulf-2021",
    "us-nmfs-hrg",
    "us-nmfs-wind",
    "us-ntl-2016-g02",
    NULL,
};

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
