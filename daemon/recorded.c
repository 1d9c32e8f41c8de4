/* What a recorded run judged by; see recorded.h. */
#include "recorded.h"
#include "record/marks.h"
#include "settings/criteria.h"
#include "settings/permit.h"
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* A file's part of the effective settings: after its line "# FILE", up to the next such line. */
struct part {
    char name[SITE_PATH_SIZE];
    const char *text;
    size_t length;
};

/* Where the next part begins; the first, the site's own, has no such line. */
static bool next_part(const char **at, struct part *part)
{
    const char *from = *at;
    if (*from == '\0')
        return false;
    part->name[0] = '\0';
    if (*from == '#') {
        size_t length = strcspn(from, "\n");
        snprintf(part->name, sizeof part->name, "%.*s", (int)(length < 2 ? 0 : length - 2),
                 from + (length < 2 ? 0 : 2));
        from += length + (from[length] == '\n');
    }
    const char *end = *from == '#' ? from : strstr(from, "\n#");
    part->text = from;
    part->length = end ? (size_t)(end - from) + (*end == '\n') : strlen(from);
    *at = from + part->length;
    return true;
}

/* A call class has no such key. */
static bool is_criteria(const struct part *part)
{
    static const char key[] = "\ncriteria[0].";
    const char *found = strstr(part->text, key);
    return *part->name && found && (size_t)(found - part->text) < part->length;
}

/* What the catalogue of that run said of grades stands in its own part. */
static void load_grades(struct recorded *recorded, struct problems *problems)
{
    struct certainty_table table = {0};
    const struct {
        const char *key;
        double *out;
    } numbers[] = {{"\ngrades.look_evidence = ", &table.look_evidence},
                   {"\ngrades.act_evidence = ", &table.act_evidence},
                   {"\ngrades.evidence_decay_s = ", &table.evidence_decay_s}};
    for (size_t i = 0; i < sizeof numbers / sizeof numbers[0]; i++) {
        const char *found = strstr(recorded->settings.data, numbers[i].key);
        if (found)
            *numbers[i].out = strtod(found + strlen(numbers[i].key), NULL);
    }
    rules_take_grades(&table, recorded->site, problems);
}

static void load_settings(struct recorded *recorded, struct problems *problems)
{
    const char *at = recorded->settings.data;
    struct part part;
    struct text *said = &recorded->site->effective;
    if (!next_part(&at, &part))
        return;
    site_load_effective("the run's settings", part.text, part.length, problems, recorded->site);
    recorded->other_defaults = said->length != part.length || memcmp(said->data, part.text, part.length) != 0;
    while (next_part(&at, &part)) {
        size_t before = said->length;
        if (!is_criteria(&part))
            continue;
        criteria_load_effective(part.name, part.text, part.length, problems, said,
                                &recorded->rules->criteria);
        const char *again = said->data + before;
        again += strcspn(again, "\n") + 1;
        recorded->other_defaults =
            recorded->other_defaults || strlen(again) != part.length || memcmp(again, part.text, part.length);
    }
}

static enum status load_permit(struct recorded *recorded, const char *permit_body,
                               const struct permit *instead, struct problems *problems)
{
    struct rules *rules = recorded->rules;
    if (instead) {
        rules->permit = *instead;
        return STATUS_OK;
    }
    enum status status = entry_permit_text(permit_body, &rules->permit_text);
    return status != STATUS_OK ? status
                               : permit_load_text("the permit entry's text", rules->permit_text.data,
                                                  &recorded->site->permit_fills, problems, &rules->permit);
}

static enum status load(struct recorded *recorded, const char *run_body, const char *permit_body,
                        const struct permit *instead, struct problems *problems)
{
    recorded->rules = calloc(1, sizeof *recorded->rules);
    recorded->site = calloc(1, sizeof *recorded->site);
    if (!recorded->rules || !recorded->site)
        return STATUS_NO_MEMORY;
    enum status status =
        entry_run_settings(run_body, &recorded->settings, &recorded->n_streams, recorded->n_channels);
    if (status != STATUS_OK)
        return status;
    load_settings(recorded, problems);
    load_grades(recorded, problems);
    if (problems->count == 0)
        status = load_permit(recorded, permit_body, instead, problems);
    if (problems->count == 0 && status == STATUS_OK)
        rules_place_zones(recorded->site, recorded->rules, problems);
    return problems->count ? STATUS_BAD_FORMAT : status;
}

enum status recorded_load(const char *run_body, const char *permit_body, const struct permit *instead,
                          struct recorded **out, char problem[RECORDED_PROBLEM_SIZE])
{
    struct recorded *recorded = calloc(1, sizeof *recorded);
    struct problems problems = {0};
    if (!recorded)
        return STATUS_NO_MEMORY;
    enum status status = load(recorded, run_body, permit_body, instead, &problems);
    if (status == STATUS_OK)
        *out = recorded;
    else {
        snprintf(problem, RECORDED_PROBLEM_SIZE, "%.*s",
                 problems.count ? (int)strcspn(problems.lines.data, "\n") : 200,
                 problems.count ? problems.lines.data
                 : status == STATUS_NOT_FOUND
                     ? "its run or permit entry does not hold all that a rerun needs "
                       "(an older version wrote it)"
                     : status_text(status));
        recorded_destroy(recorded);
    }
    problems_destroy(&problems);
    return status;
}

void recorded_destroy(struct recorded *recorded)
{
    if (!recorded)
        return;
    rules_destroy(recorded->rules);
    if (recorded->site)
        site_destroy(recorded->site);
    free(recorded->site);
    text_destroy(&recorded->settings);
    free(recorded);
}
