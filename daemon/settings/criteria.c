/* The loader of criteria: every number with its mark and source, every error with its line. */
#include "settings/criteria.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static void read_basis(struct group_reader *group, struct basis *basis)
{
    const char *words[MARK_COUNT];
    for (unsigned i = 0; i < MARK_COUNT; i++)
        words[i] = mark_text((enum value_mark)i);
    unsigned mark = MARK_MEMORY_LOW;
    if (group_word(group, "mark", READER_REQUIRED, words, MARK_COUNT, &mark) && mark >= MARK_MEMORY_LOW)
        group_problem(group, "mark", "is \"%s\": nobody may rely on it; look the number up in the document",
                      words[mark]);
    basis->mark = (enum value_mark)mark;
    if (group_string(group, "source", READER_REQUIRED, basis->source, sizeof basis->source) &&
        !*basis->source)
        group_problem(group, "source", "is empty; name the document and where in it");
}

/* key = { number = ...; mark = "..."; source = "..."; } with a number of that name. */
static void read_number(struct group_reader *parent, const char *key, const char *number, bool required,
                        double min, double max, double *out, struct basis *basis)
{
    struct group_reader group;
    if (!group_child(parent, key, required, &group))
        return;
    group_number(&group, number, READER_REQUIRED, min, max, out);
    read_basis(&group, basis);
    group_done(&group);
}

/* Finds a word by one of criterion.h's text functions. */
#define READ_WORD(group, key, required, type, count, text, out)                                              \
    do {                                                                                                     \
        const char *allowed[count];                                                                          \
        unsigned found = 0;                                                                                  \
        for (unsigned i = 0; i < (count); i++)                                                               \
            allowed[i] = text((type)i);                                                                      \
        if (group_word(group, key, required, allowed, count, &found))                                        \
            *(out) = (type)found;                                                                            \
    } while (0)

static bool read_metric(struct group_reader *group, enum criterion_metric *out)
{
    *out = METRIC_COUNT;
    READ_WORD(group, "metric", READER_REQUIRED, enum criterion_metric, METRIC_COUNT, criterion_metric_text,
              out);
    return *out != METRIC_COUNT;
}

/* Both must be those of the metric: a peak re 1 uPa2 s, or a level re 20 uPa, is somebody's mistake. */
static void read_unit(struct group_reader *group, const struct criterion *criterion, bool has_metric)
{
    char unit[16], reference[16];
    bool has_unit = group_string(group, "unit", READER_REQUIRED, unit, sizeof unit);
    bool has_reference = group_string(group, "reference", READER_REQUIRED, reference, sizeof reference);
    if (!has_metric)
        return;
    const char *want_unit = criterion_unit(criterion->metric);
    const char *want_reference = criterion_reference(criterion->metric);
    if (has_unit && strcmp(unit, want_unit) != 0)
        group_problem(group, "unit", "is \"%s\"; allowed for %s: \"%s\"", unit,
                      criterion_metric_text(criterion->metric), want_unit);
    if (has_reference && strcmp(reference, want_reference) != 0)
        group_problem(group, "reference", "is \"%s\"; allowed for %s: \"%s\"", reference,
                      criterion_metric_text(criterion->metric), want_reference);
}

/* "none", or guidance and group: "NMFS 2024 VHF". */
static void read_weighting(struct group_reader *group, struct criterion *criterion)
{
    char name[WEIGHTING_NAME_SIZE];
    if (!group_string(group, "weighting", READER_REQUIRED, name, sizeof name) || strcmp(name, "none") == 0 ||
        weighting_from_name(name, &criterion->weighting) == STATUS_OK)
        return;
    char allowed[512] = "none", known[WEIGHTING_NAME_SIZE];
    for (uint32_t i = 0; weighting_at(i); i++) {
        weighting_name(weighting_at(i), known);
        if (!weighting_at(i)->in_air && strlen(allowed) + strlen(known) + 3 < sizeof allowed) {
            strcat(allowed, ", ");
            strcat(allowed, known);
        }
    }
    group_problem(group, "weighting", "is \"%s\"; allowed: %s", name, allowed);
}

static void read_options(struct group_reader *group, struct criterion *criterion)
{
    struct group_reader child;
    criterion->quiet_db = criterion->limit_range_m = NAN;
    read_number(group, "quiet", "level_db", READER_OPTIONAL, 60, 300, &criterion->quiet_db,
                &criterion->quiet_basis);
    read_number(group, "flee", "speed_m_s", READER_OPTIONAL, 0.01, 20, &criterion->flee_m_s,
                &criterion->flee_basis);
    if (group_child(group, "limit", READER_OPTIONAL, &child)) {
        group_number(&child, "range_m", READER_REQUIRED, 1, 100000, &criterion->limit_range_m);
        group_number(&child, "exceedance", READER_OPTIONAL, 0, 0.99, &criterion->limit_exceedance);
        read_basis(&child, &criterion->limit_basis);
        group_done(&child);
    }
    if (group_child(group, "disputed", READER_OPTIONAL, &child)) {
        criterion->disputed = read_metric(&child, &criterion->other_metric);
        read_basis(&child, &criterion->disputed_basis);
        group_done(&child);
    }
}

static void read_criterion(struct group_reader *group, struct criterion *c)
{
    unsigned before = group->reader->problems->count;
    group_string(group, "name", READER_REQUIRED, c->name, sizeof c->name);
    READ_WORD(group, "effect", READER_REQUIRED, enum criterion_effect, EFFECT_COUNT, criterion_effect_text,
              &c->effect);
    group_string(group, "meaning", READER_REQUIRED, c->meaning, sizeof c->meaning);
    READ_WORD(group, "sound", READER_REQUIRED, enum criterion_sound, SOUND_COUNT, criterion_sound_text,
              &c->sound);
    bool has_metric = read_metric(group, &c->metric);
    read_unit(group, c, has_metric);
    read_weighting(group, c);
    READ_WORD(group, "window", has_metric && c->metric == METRIC_SEL_CUMULATIVE, enum criterion_window,
              ACCUMULATE_COUNT, criterion_window_text, &c->window);
    READ_WORD(group, "average", has_metric && c->metric == METRIC_SPL, enum criterion_average, AVERAGE_COUNT,
              criterion_average_text, &c->average);
    read_number(group, "value", "value", READER_REQUIRED, 1e-3, 1e6, &c->value, &c->basis);
    read_options(group, c);
    group_done(group);
    if (group->reader->problems->count != before)
        return; /* what depends on a value that could not be read would only confuse */
    const char *key;
    char problem[CRITERION_TEXT_SIZE];
    for (uint32_t n = 0; criterion_check(c, n, &key, problem) != STATUS_OK; n++)
        group_problem(group, key, "%s", problem);
}

static void read_set(struct group_reader *root, struct criteria *criteria)
{
    struct criteria_set *set = &criteria->sets[criteria->n_sets];
    double year = 0;
    if (group_string(root, "id", READER_REQUIRED, set->id, sizeof set->id) && !*set->id)
        group_problem(root, "id", "is empty; allowed: 1 to %d bytes", CRITERION_NAME_SIZE - 1);
    group_string(root, "title", READER_REQUIRED, set->title, sizeof set->title);
    group_string(root, "document", READER_REQUIRED, set->document, sizeof set->document);
    group_number(root, "year", READER_REQUIRED, 1980, 2100, &year);
    set->year = (uint32_t)year;
    for (uint32_t i = 0; i < criteria->n_sets; i++)
        if (strcmp(criteria->sets[i].id, set->id) == 0)
            group_problem(root, "id", "is \"%s\", which another file has; allowed: an id of its own",
                          set->id);
    unsigned n = group_count(root, "criteria", READER_REQUIRED);
    if (n == 0)
        group_problem(root, "criteria", "holds none; allowed: ( { ... }, ... )");
    uint32_t first = criteria->n;
    for (unsigned i = 0; i < n; i++) {
        struct group_reader group;
        group_at(root, "criteria", i, &group);
        if (criteria->n == CRITERIA_MAX) {
            group_problem(&group, "name", "is one too many; allowed: %d of all sets", CRITERIA_MAX);
            return;
        }
        struct criterion *c = &criteria->items[criteria->n];
        *c = (struct criterion){.metric = METRIC_COUNT};
        memcpy(c->set, set->id, sizeof c->set);
        read_criterion(&group, c);
        for (uint32_t k = first; k < criteria->n; k++)
            if (*c->name && strcmp(criteria->items[k].name, c->name) == 0)
                group_problem(&group, "name", "is \"%s\", which another criterion of the set has", c->name);
        criteria->n++;
    }
    criteria->n_sets++;
    group_done(root);
}

/* status: of opening. */
static enum status load(struct reader *reader, enum status status, struct criteria *criteria)
{
    struct problems *problems = reader->problems;
    unsigned before = problems->count;
    struct criteria *work = status == STATUS_OK ? malloc(sizeof *work) : NULL;
    if (status == STATUS_OK && !work)
        status = STATUS_NO_MEMORY;
    if (work) {
        *work = *criteria;
        struct group_reader root = reader_root(reader);
        if (work->n_sets == CRITERIA_MAX_SETS)
            group_problem(&root, "id", "is one set too many; allowed: %d", CRITERIA_MAX_SETS);
        else
            read_set(&root, work);
        status = problems->count != before ? STATUS_BAD_FORMAT : STATUS_OK;
    }
    reader_close(reader);
    if (status == STATUS_OK)
        *criteria = *work;
    free(work);
    return status;
}

enum status criteria_load(const char *path, struct problems *problems, struct text *effective,
                          struct criteria *criteria)
{
    struct reader reader;
    if (effective)
        text_format(effective, "# %s\n", path);
    enum status status = reader_open(&reader, path, problems, effective);
    return load(&reader, status, criteria);
}

enum status criteria_load_effective(const char *name, const char *text, size_t length,
                                    struct problems *problems, struct text *effective,
                                    struct criteria *criteria)
{
    struct reader reader;
    if (effective)
        text_format(effective, "# %s\n", name);
    enum status status = reader_open_effective(&reader, name, text, length, problems, effective);
    return load(&reader, status, criteria);
}
