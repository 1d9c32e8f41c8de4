/* Fuzzes the settings files: site, permit, scene, notes and criteria loaders take any bytes and say what is
 * wrong. */
#include "settings/criteria.h"
#include "settings/notes.h"
#include "settings/permit.h"
#include "settings/scene.h"
#include "settings/site.h"
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static int file = -1;
    static char path[64];
    static struct site site;
    static struct permit permit;
    if (file < 0) {
        file = memfd_create("settings", 0);
        snprintf(path, sizeof path, "/proc/self/fd/%d", file);
    }
    /* An include would read other files: it is libconfig's own, and not what is tried here. */
    if (size < 1 || memmem(data, size, "@include", 8) || ftruncate(file, 0) != 0 ||
        pwrite(file, data + 1, size - 1, 0) != (ssize_t)size - 1)
        return 0;
    struct problems problems = {0};
    if (data[0] == 'c') {
        static struct criteria criteria;
        criteria.n = criteria.n_sets = 0;
        criteria_load(path, &problems, NULL, &criteria);
    } else if (data[0] % 4 == 0) {
        site_load(path, &problems, &site);
        site_destroy(&site);
    } else if (data[0] % 4 == 1)
        permit_load(path, NULL, &problems, &permit);
    else if (data[0] % 4 == 2) {
        static struct scene_file scene;
        if (scene_load(path, &problems, &scene) == STATUS_OK)
            scene_file_destroy(&scene);
    } else {
        struct timed_note *notes = NULL;
        unsigned n;
        if (notes_load(path, &problems, &notes, &n) == STATUS_OK)
            free(notes);
    }
    problems_destroy(&problems);
    return 0;
}
