/* The permit loader: every value with its mark and its source, every error with its line. */
#include "settings/permit.h"
#include "settings/permit_parts.h"
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static void read_head(struct permit *permit, struct group_reader *root)
{
    static const char *const activities[] = {"piling", "seismic", "explosives"};
    unsigned activity = ACTIVITY_PILING;
    double year = 0;
    group_string(root, "id", READER_REQUIRED, permit->id, sizeof permit->id);
    group_string(root, "title", READER_REQUIRED, permit->title, sizeof permit->title);
    group_string(root, "document", READER_REQUIRED, permit->document, sizeof permit->document);
    group_string(root, "revision", READER_OPTIONAL, permit->revision, sizeof permit->revision);
    group_string(root, "document_sha256", READER_OPTIONAL, permit->document_sha256,
                 sizeof permit->document_sha256);
    group_string(root, "applies", READER_OPTIONAL, permit->applies, sizeof permit->applies);
    group_string(root, "ended", READER_OPTIONAL, permit->ended, sizeof permit->ended);
    group_number(root, "year", READER_REQUIRED, 1970, 2100, &year);
    group_flag(root, "demonstration", READER_OPTIONAL, &permit->demonstration);
    group_word(root, "activity", READER_REQUIRED, activities, 3, &activity);
    permit->year = (uint32_t)year;
    permit->activity = (enum permit_activity)activity;
}

static void read_permit(struct permit_reader *reader, struct group_reader *root)
{
    read_head(reader->permit, root);
    permit_read_sets(reader, root);
    permit_read_times(reader, root);
    permit_read_zones(reader, root);
    permit_read_clearances(reader, root);
    permit_read_unknown(reader, root);
    permit_read_conditions(reader, root);
    group_done(root);
}

/* A value that the settings state and the file does not have would be lost without a word. */
static void check_fills(const struct permit_reader *reader, const char *name, struct problems *problems)
{
    for (uint32_t i = 0; reader->fills && i < reader->fills->n; i++)
        if (!reader->used[i])
            problems_add(problems, permit_fill_where(&reader->fills->fills[i]), 0, "permit_values",
                         "%s has no value \"%s\"", name, reader->fills->fills[i].key);
}

/* Where the file says the key, or what it is part of: "zones[0].radius_m" is zones.[0].radius_m there. */
static unsigned line_of(const struct reader *file, const char *key)
{
    char path[2 * PERMIT_NAME_SIZE];
    size_t n = 0;
    for (const char *at = key; *at && n + 2 < sizeof path; at++) {
        if (*at == '[')
            path[n++] = '.';
        path[n++] = *at;
    }
    path[n] = '\0';
    for (;;) {
        const config_setting_t *setting = config_lookup(&file->config, path);
        char *end = strrchr(path, '.');
        if (setting)
            return (unsigned)config_setting_source_line(setting);
        if (!end)
            return 0;
        *end = '\0';
    }
}

/* One sentence of permit_check, "KEY: what is wrong". */
static void say_problem(struct reader *file, const char *problem)
{
    char key[PERMIT_TEXT_SIZE];
    const char *sentence = strstr(problem, ": ");
    snprintf(key, sizeof key, "%.*s", sentence ? (int)(sentence - problem) : 0, problem);
    problems_add(file->problems, file->path, line_of(file, key), key, "%s",
                 sentence ? sentence + 2 : problem);
}

static enum status load(struct reader *file, enum status status, const struct permit_fills *fills,
                        struct permit *out)
{
    struct problems *problems = file->problems;
    struct permit *permit = calloc(1, sizeof *permit);
    unsigned before = problems->count;
    if (permit && status == STATUS_OK) {
        struct permit_reader reader = {.permit = permit, .fills = fills};
        struct group_reader root = reader_root(file);
        read_permit(&reader, &root);
        check_fills(&reader, file->path, problems);
    }
    /* What the file says must be readable before it can be judged as a whole. */
    char problem[PERMIT_TEXT_SIZE];
    bool readable = permit && status == STATUS_OK && problems->count == before;
    for (uint32_t i = 0; readable && permit_check(permit, i, problem) != STATUS_OK; i++)
        say_problem(file, problem);
    if (!permit)
        status = STATUS_NO_MEMORY;
    else if (status == STATUS_OK && problems->count != before)
        status = STATUS_BAD_FORMAT;
    if (status == STATUS_OK)
        *out = *permit;
    free(permit);
    reader_close(file);
    return status;
}

enum status permit_load(const char *path, const struct permit_fills *fills, struct problems *problems,
                        struct permit *out)
{
    struct reader file;
    enum status status = reader_open(&file, path, problems, NULL);
    return load(&file, status, fills, out);
}

enum status permit_load_text(const char *name, const char *text, const struct permit_fills *fills,
                             struct problems *problems, struct permit *out)
{
    struct reader file;
    enum status status = reader_open_text(&file, name, text, problems);
    return load(&file, status, fills, out);
}
