/* The permit loader: every value with its mark and its source, every error with its line. */
#include "settings/permit.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static const char *const mark_words[] = {"read",           "secondary",   "memory, high",
                                         "memory, medium", "memory, low", "invented"};
#define N_MARKS (sizeof mark_words / sizeof mark_words[0])

/* One value { value; mark; source } while it is being read. */
struct value_reader {
    struct permit *permit;
    struct group_reader group;
    struct permit_value value; /* without its text */
};

/* Reads the mark and the source of the value in `group`; its `value` is the caller's to read. */
static void start_value(struct permit *permit, const struct group_reader *group, struct value_reader *out)
{
    *out = (struct value_reader){.permit = permit, .group = *group};
    snprintf(out->value.key, sizeof out->value.key, "%.63s", out->group.name);
    unsigned mark = MARK_MEMORY_LOW;
    if (group_word(&out->group, "mark", READER_REQUIRED, mark_words, N_MARKS, &mark) &&
        mark == MARK_MEMORY_LOW)
        group_problem(&out->group, "mark",
                      "is \"memory, low\": nobody may rely on it; look the value up in the document");
    out->value.mark = (enum value_mark)mark;
    group_string(&out->group, "source", READER_REQUIRED, out->value.source, sizeof out->value.source);
}

/* The same for the value of that key; false when it is absent. */
static bool open_value(struct permit *permit, struct group_reader *parent, const char *key, bool required,
                       struct value_reader *out)
{
    struct group_reader group;
    if (!group_child(parent, key, required, &group))
        return false;
    start_value(permit, &group, out);
    return true;
}

static void close_value(struct value_reader *value, const char *text)
{
    group_done(&value->group);
    struct permit *permit = value->permit;
    if (permit->n_values == PERMIT_MAX_VALUES) {
        group_problem(&value->group, "value", "is one too many; allowed: at most %d", PERMIT_MAX_VALUES);
        return;
    }
    snprintf(value->value.text, sizeof value->value.text, "%s", text);
    permit->values[permit->n_values++] = value->value;
}

static bool read_number(struct permit *permit, struct group_reader *parent, const char *key, bool required,
                        double min, double max, double *out)
{
    struct value_reader value;
    if (!open_value(permit, parent, key, required, &value))
        return false;
    bool good = group_number(&value.group, "value", READER_REQUIRED, min, max, out);
    char text[64];
    snprintf(text, sizeof text, "%.10g", *out);
    close_value(&value, text);
    return good;
}

static void read_flag(struct permit *permit, struct group_reader *parent, const char *key, bool required,
                      bool *out)
{
    struct value_reader value;
    if (!open_value(permit, parent, key, required, &value))
        return;
    group_flag(&value.group, "value", READER_REQUIRED, out);
    close_value(&value, *out ? "true" : "false");
}

static unsigned read_word(struct permit *permit, struct group_reader *parent, const char *key,
                          const char *const *words, unsigned n, unsigned otherwise)
{
    struct value_reader value;
    unsigned word = otherwise;
    if (!open_value(permit, parent, key, READER_REQUIRED, &value))
        return word;
    group_word(&value.group, "value", READER_REQUIRED, words, n, &word);
    close_value(&value, word < n && words[word] ? words[word] : "");
    return word;
}

/* Adds the groups that an array of names means; text, if not NULL, gets them joined. */
static uint32_t group_names(struct group_reader *group, const char *key, char *text, size_t size)
{
    char name[PERMIT_NAME_SIZE];
    uint32_t mask = 0;
    size_t used = 0;
    for (unsigned i = 0; group_text_at(group, key, i, name, sizeof name); i++) {
        enum group found;
        if (!group_from_text(name, &found)) {
            group_problem(group, key,
                          "has no group \"%s\"; allowed: unknown, baleen whale, sperm whale, beaked whale, "
                          "delphinid, porpoise, phocid, otariid, sirenian, sea otter, turtle",
                          name);
            continue;
        }
        mask |= PERMIT_GROUP_BIT(found);
        if (text && used < size)
            used += (size_t)snprintf(text + used, size - used, "%s%s", used ? ", " : "", name);
    }
    if (mask == 0)
        group_problem(group, key, "names no group; allowed: [\"baleen whale\", ...]");
    return mask;
}

static uint32_t read_groups(struct permit *permit, struct group_reader *parent, const char *key)
{
    struct value_reader value;
    if (!open_value(permit, parent, key, READER_REQUIRED, &value))
        return 0;
    char text[PERMIT_TEXT_SIZE] = "";
    uint32_t mask = group_names(&value.group, "value", text, sizeof text);
    close_value(&value, text);
    return mask;
}

static bool phase_from_text(const char *text, enum phase *out)
{
    for (unsigned i = 0; i < PHASE_COUNT; i++)
        if (strcmp(text, phase_text((enum phase)i)) == 0) {
            *out = (enum phase)i;
            return true;
        }
    return false;
}

/* { phases = [...]; value = "delay"; mark; source }: what the zone asks for in those phases. */
static void read_action(struct permit *permit, const struct group_reader *group, struct permit_zone *zone)
{
    static const char *const words[] = {"log", "prepare", "delay", "hold", "reduce", "stop"};
    struct value_reader value;
    start_value(permit, group, &value);
    unsigned action = ACTION_LOG;
    group_word(&value.group, "value", READER_REQUIRED, words, 6, &action);
    char name[PERMIT_NAME_SIZE], text[PERMIT_TEXT_SIZE];
    size_t used = (size_t)snprintf(text, sizeof text, "%s in", words[action]);
    for (unsigned i = 0; group_text_at(&value.group, "phases", i, name, sizeof name); i++) {
        enum phase phase;
        if (phase_from_text(name, &phase))
            zone->action[phase] = (enum permit_action)action;
        else
            group_problem(&value.group, "phases", "has no phase \"%s\"", name);
        if (used < sizeof text)
            used += (size_t)snprintf(text + used, sizeof text - used, "%s %s", i ? "," : "", name);
    }
    close_value(&value, text);
}

static void read_actions(struct permit *permit, struct group_reader *zone_group, struct permit_zone *zone)
{
    unsigned n = group_count(zone_group, "actions", READER_REQUIRED);
    for (unsigned i = 0; i < n; i++) {
        struct group_reader group;
        group_at(zone_group, "actions", i, &group);
        read_action(permit, &group, zone);
    }
}

static void read_zone(struct permit *permit, struct group_reader *group, struct permit_zone *zone)
{
    static const char *const origins[] = {"pile", "array centre", "array edge", "charge", "vessel"};
    bool any_distance = false;
    group_string(group, "name", READER_REQUIRED, zone->name, sizeof zone->name);
    group_string(group, "clause", READER_REQUIRED, zone->clause, sizeof zone->clause);
    read_flag(permit, group, "any_distance", READER_OPTIONAL, &any_distance);
    zone->radius_m = any_distance ? INFINITY : 0;
    if (!any_distance)
        read_number(permit, group, "radius_m", READER_REQUIRED, 1, 100000, &zone->radius_m);
    zone->origin = (enum zone_origin)read_word(permit, group, "origin", origins, 5, ORIGIN_PILE);
    zone->groups = read_groups(permit, group, "groups");
    read_flag(permit, group, "calf_only", READER_OPTIONAL, &zone->calf_only);
    read_actions(permit, group, zone);
    group_done(group);
}

static void read_zones(struct permit *permit, struct group_reader *root)
{
    unsigned n = group_count(root, "zones", READER_REQUIRED);
    if (n > PERMIT_MAX_ZONES)
        group_problem(root, "zones", "has %u zones; allowed: at most %d", n, PERMIT_MAX_ZONES);
    for (unsigned i = 0; i < n && i < PERMIT_MAX_ZONES; i++) {
        struct group_reader group;
        group_at(root, "zones", i, &group);
        read_zone(permit, &group, &permit->zones[permit->n_zones++]);
    }
}

static void read_clearances(struct permit *permit, struct group_reader *root)
{
    unsigned n = group_count(root, "clearances", READER_REQUIRED);
    if (n > PERMIT_MAX_CLEARANCES)
        group_problem(root, "clearances", "has %u; allowed: at most %d", n, PERMIT_MAX_CLEARANCES);
    for (unsigned i = 0; i < n && i < PERMIT_MAX_CLEARANCES; i++) {
        struct group_reader group;
        struct permit_clearance *clearance = &permit->clearances[permit->n_clearances++];
        group_at(root, "clearances", i, &group);
        clearance->groups = read_groups(permit, &group, "groups");
        read_number(permit, &group, "minutes", READER_REQUIRED, 0.01, 1440, &clearance->minutes);
        read_flag(permit, &group, "leaving_ends", READER_REQUIRED, &clearance->leaving_ends);
        group_string(&group, "clause", READER_REQUIRED, clearance->clause, sizeof clearance->clause);
        group_done(&group);
    }
}

/* unknown_distance = { clause; policies = ( { groups; policy = { value; mark; source } } ... ) }. */
static void read_unknown(struct permit *permit, struct group_reader *root)
{
    static const char *const words[] = {NULL, "inside", "ask observer", "ignore"};
    struct group_reader group, inner;
    group_child(root, "unknown_distance", READER_REQUIRED, &group);
    group_string(&group, "clause", READER_REQUIRED, permit->unknown_clause, sizeof permit->unknown_clause);
    unsigned n = group_count(&group, "policies", READER_REQUIRED);
    for (unsigned i = 0; i < n; i++) {
        group_at(&group, "policies", i, &inner);
        uint32_t mask = group_names(&inner, "groups", NULL, 0);
        unsigned policy = read_word(permit, &inner, "policy", words, 4, UNKNOWN_NOT_STATED);
        for (unsigned g = 0; g < GROUP_COUNT; g++)
            if (mask & PERMIT_GROUP_BIT(g)) {
                if (permit->unknown[g] != UNKNOWN_NOT_STATED)
                    group_problem(&inner, "groups", "names %s, which has a policy already",
                                  group_text((enum group)g));
                permit->unknown[g] = (enum unknown_policy)policy;
            }
        group_done(&inner);
    }
    group_done(&group);
}

static void read_pre_watch(struct permit *permit, struct group_reader *root)
{
    struct group_reader group;
    group_child(root, "pre_watch", READER_REQUIRED, &group);
    read_number(permit, &group, "minutes", READER_REQUIRED, 0.01, 1440, &permit->pre_watch_minutes);
    read_flag(permit, &group, "visual", READER_REQUIRED, &permit->pre_watch_visual);
    read_flag(permit, &group, "acoustic", READER_REQUIRED, &permit->pre_watch_acoustic);
    read_number(permit, &group, "longest_hole_minutes", READER_OPTIONAL, 0.01, 1440,
                &permit->pre_watch_hole_minutes);
    group_string(&group, "clause", READER_REQUIRED, permit->pre_watch_clause,
                 sizeof permit->pre_watch_clause);
    group_done(&group);
}

static void read_soft_start(struct permit *permit, struct group_reader *root)
{
    struct group_reader group;
    group_child(root, "soft_start", READER_REQUIRED, &group);
    read_number(permit, &group, "least_minutes", READER_REQUIRED, 0, 1440, &permit->soft_start_min_minutes);
    permit->soft_start_max_minutes = INFINITY;
    read_number(permit, &group, "longest_minutes", READER_OPTIONAL, 0.01, 1440,
                &permit->soft_start_max_minutes);
    read_flag(permit, &group, "stop_if_possible_else_hold", READER_OPTIONAL,
              &permit->stop_if_possible_else_hold);
    group_string(&group, "clause", READER_REQUIRED, permit->soft_start_clause,
                 sizeof permit->soft_start_clause);
    group_done(&group);
}

static void read_break(struct permit *permit, struct group_reader *root)
{
    static const char *const words[] = {"nothing", "counts", "stands"};
    struct group_reader group;
    group_child(root, "break", READER_REQUIRED, &group);
    read_number(permit, &group, "minutes", READER_REQUIRED, 0.01, 1440, &permit->break_minutes);
    read_flag(permit, &group, "limit_resumes", READER_REQUIRED, &permit->break_limit_resumes);
    permit->break_watch =
        (enum break_watch)read_word(permit, &group, "watch_kept", words, 3, BREAK_WATCH_NOTHING);
    group_string(&group, "clause", READER_REQUIRED, permit->break_clause, sizeof permit->break_clause);
    group_done(&group);
}

/* Who is asked, and from which probability; where a permit is silent, this program's own rules hold. */
static void read_decisions(struct permit *permit, struct group_reader *root)
{
    struct group_reader group;
    permit->confirm_countdown_s = 30;
    permit->p_inside_prepare = 0.1;
    permit->p_inside_act = 0.5;
    if (!group_child(root, "decisions", READER_OPTIONAL, &group))
        return;
    read_number(permit, &group, "countdown_s", READER_OPTIONAL, 0, 600, &permit->confirm_countdown_s);
    read_number(permit, &group, "p_inside_prepare", READER_OPTIONAL, 0.001, 1, &permit->p_inside_prepare);
    read_number(permit, &group, "p_inside_act", READER_OPTIONAL, 0.001, 1, &permit->p_inside_act);
    group_done(&group);
}

static void read_head(struct permit *permit, struct group_reader *root)
{
    static const char *const activities[] = {"piling", "seismic", "explosives"};
    unsigned activity = ACTIVITY_PILING;
    double year = 0;
    group_string(root, "id", READER_REQUIRED, permit->id, sizeof permit->id);
    group_string(root, "title", READER_REQUIRED, permit->title, sizeof permit->title);
    group_string(root, "document", READER_REQUIRED, permit->document, sizeof permit->document);
    group_number(root, "year", READER_REQUIRED, 1970, 2100, &year);
    group_flag(root, "demonstration", READER_OPTIONAL, &permit->demonstration);
    group_word(root, "activity", READER_REQUIRED, activities, 3, &activity);
    permit->year = (uint32_t)year;
    permit->activity = (enum permit_activity)activity;
}

static void read_permit(struct permit *permit, struct reader *reader)
{
    struct group_reader root = reader_root(reader);
    read_head(permit, &root);
    read_pre_watch(permit, &root);
    read_zones(permit, &root);
    read_clearances(permit, &root);
    read_unknown(permit, &root);
    read_soft_start(permit, &root);
    read_break(permit, &root);
    read_decisions(permit, &root);
    group_done(&root);
}

enum status permit_load(const char *path, struct problems *problems, struct permit *out)
{
    struct permit *permit = calloc(1, sizeof *permit);
    if (!permit)
        return STATUS_NO_MEMORY;
    unsigned before = problems->count;
    struct reader reader;
    enum status status = reader_open(&reader, path, problems, NULL);
    if (status == STATUS_OK)
        read_permit(permit, &reader);
    reader_close(&reader);
    /* What the file says must be readable before it can be judged as a whole. */
    char problem[PERMIT_TEXT_SIZE];
    bool readable = problems->count == before;
    for (uint32_t i = 0; readable && permit_check(permit, i, problem) != STATUS_OK; i++)
        problems_add(problems, path, 0, "", "%s", problem);
    if (status == STATUS_OK && problems->count != before)
        status = STATUS_BAD_FORMAT;
    if (status == STATUS_OK)
        *out = *permit;
    free(permit);
    return status;
}
