/* Values of a permit file, each with its mark and its source; see permit_value.h. */
#include "settings/permit_value.h"
#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static const char *const mark_words[] = {"read",        "secondary", "memory, high", "memory, medium",
                                         "memory, low", "invented",  "to be filled"};
#define N_MARKS (sizeof mark_words / sizeof mark_words[0])

/* One value while it is being read. */
struct reading {
    struct permit_reader *reader;
    struct group_reader group;
    struct permit_value value;      /* without its text */
    const struct permit_fill *fill; /* NULL: the file's own value holds */
};

const char *permit_fill_where(const struct permit_fill *fill)
{
    return *fill->where ? fill->where : "the settings";
}

static const struct permit_fill *find_fill(struct permit_reader *reader, const char *key)
{
    for (uint32_t i = 0; reader->fills && i < reader->fills->n; i++)
        if (strcmp(reader->fills->fills[i].key, key) == 0) {
            reader->used[i] = true;
            return &reader->fills->fills[i];
        }
    return NULL;
}

/* Whether there is a value to be read. */
static bool start(struct permit_reader *reader, const struct group_reader *group, struct reading *out)
{
    *out = (struct reading){.reader = reader, .group = *group};
    snprintf(out->value.key, sizeof out->value.key, "%.63s", group->name);
    out->fill = find_fill(reader, out->value.key);
    unsigned mark = MARK_MEMORY_LOW;
    bool marked = group_word(&out->group, "mark", READER_REQUIRED, mark_words, N_MARKS, &mark);
    out->value.mark = (enum value_mark)mark;
    group_string(&out->group, "source", READER_REQUIRED, out->value.source, sizeof out->value.source);
    if (out->fill) {
        out->value.mark = MARK_FILLED;
        memcpy(out->value.source, out->fill->source, sizeof out->value.source);
        memcpy(out->value.who, out->fill->who, sizeof out->value.who);
        return true;
    }
    if (marked && mark == MARK_MEMORY_LOW)
        group_problem(&out->group, "mark",
                      "is \"memory, low\": nobody may rely on it; look the value up and state it in the "
                      "settings: permit_values = ( { key = \"%s\"; value; who; source } )",
                      out->value.key);
    if (marked && mark == MARK_TO_BE_FILLED)
        group_problem(&out->group, "mark",
                      "is \"to be filled\" (%.250s): the settings must state it: "
                      "permit_values = ( { key = \"%s\"; value; who; source } )",
                      out->value.source, out->value.key);
    return mark != MARK_TO_BE_FILLED;
}

static bool open(struct permit_reader *reader, struct group_reader *parent, const char *key, bool required,
                 struct reading *out)
{
    struct group_reader group;
    if (!group_child(parent, key, required, &group))
        return false;
    if (start(reader, &group, out))
        return true;
    group_done(&out->group);
    return false;
}

/* The file's own value is still read where the settings state another, so that the key is known. */
static void close_reading(struct reading *reading, const char *text)
{
    static const char *const unread[] = {"value", "phases"};
    for (size_t i = 0; i < sizeof unread / sizeof unread[0]; i++)
        group_know(&reading->group, unread[i]);
    group_done(&reading->group);
    struct permit *permit = reading->reader->permit;
    if (permit->n_values == PERMIT_MAX_VALUES) {
        group_problem(&reading->group, "value", "is one too many; allowed: at most %d", PERMIT_MAX_VALUES);
        return;
    }
    snprintf(reading->value.text, sizeof reading->value.text, "%s", text);
    permit->values[permit->n_values++] = reading->value;
}

static bool fill_problem(struct reading *reading, const char *allowed)
{
    problems_add(reading->group.reader->problems, permit_fill_where(reading->fill), 0, "permit_values",
                 "%s is \"%.80s\"; allowed: %s", reading->value.key, reading->fill->text, allowed);
    return false;
}

static bool fill_number(struct reading *reading, double min, double max, double *out)
{
    char *end, allowed[64];
    double number = strtod(reading->fill->text, &end);
    snprintf(allowed, sizeof allowed, "a number from %g to %g", min, max);
    if (end == reading->fill->text || *end != '\0' || !(number >= min && number <= max))
        return fill_problem(reading, allowed);
    *out = number;
    return true;
}

bool value_number(struct permit_reader *reader, struct group_reader *parent, const char *key, bool required,
                  double min, double max, double *out)
{
    struct reading reading;
    if (!open(reader, parent, key, required, &reading))
        return false;
    bool good = reading.fill ? fill_number(&reading, min, max, out)
                             : group_number(&reading.group, "value", READER_REQUIRED, min, max, out);
    char text[64];
    snprintf(text, sizeof text, "%.10g", *out);
    close_reading(&reading, text);
    return good;
}

bool value_flag(struct permit_reader *reader, struct group_reader *parent, const char *key, bool required,
                bool *out)
{
    static const char *const words[] = {"false", "true"};
    struct reading reading;
    if (!open(reader, parent, key, required, &reading))
        return false;
    bool good = true;
    if (!reading.fill)
        good = group_flag(&reading.group, "value", READER_REQUIRED, out);
    else if (strcmp(reading.fill->text, words[0]) == 0 || strcmp(reading.fill->text, words[1]) == 0)
        *out = strcmp(reading.fill->text, words[1]) == 0;
    else
        good = fill_problem(&reading, "true, false");
    close_reading(&reading, words[*out]);
    return good;
}

static bool fill_word(struct reading *reading, const char *const *words, unsigned n, unsigned *out)
{
    char allowed[PERMIT_TEXT_SIZE] = "";
    size_t used = 0;
    for (unsigned i = 0; i < n; i++) {
        if (!words[i])
            continue;
        if (strcmp(words[i], reading->fill->text) == 0) {
            *out = i;
            return true;
        }
        if (used < sizeof allowed)
            used +=
                (size_t)snprintf(allowed + used, sizeof allowed - used, "%s%s", used ? ", " : "", words[i]);
    }
    return fill_problem(reading, allowed);
}

static bool read_word(struct reading *reading, const char *const *words, unsigned n, unsigned *out)
{
    return reading->fill ? fill_word(reading, words, n, out)
                         : group_word(&reading->group, "value", READER_REQUIRED, words, n, out);
}

bool value_word(struct permit_reader *reader, struct group_reader *parent, const char *key, bool required,
                const char *const *words, unsigned n, unsigned *out)
{
    struct reading reading;
    if (!open(reader, parent, key, required, &reading))
        return false;
    bool good = read_word(&reading, words, n, out);
    close_reading(&reading, good ? words[*out] : "");
    return good;
}

bool value_text(struct permit_reader *reader, struct group_reader *parent, const char *key, bool required,
                char *out, size_t size)
{
    struct reading reading;
    if (!open(reader, parent, key, required, &reading))
        return false;
    bool good = true;
    if (!reading.fill)
        good = group_string(&reading.group, "value", READER_REQUIRED, out, size);
    else if (strlen(reading.fill->text) < size)
        memcpy(out, reading.fill->text, strlen(reading.fill->text) + 1);
    else
        good = fill_problem(&reading, "a shorter text");
    close_reading(&reading, out);
    return good;
}

/* The i-th name of the value; false after the last. */
static bool name_at(struct reading *reading, unsigned i, char *out, size_t size)
{
    if (!reading->fill)
        return group_text_at(&reading->group, "value", i, out, size);
    const char *at = reading->fill->text;
    for (unsigned k = 0; k < i && at; k++)
        at = (at = strstr(at, ", ")) != NULL ? at + 2 : NULL;
    if (!at || *at == '\0')
        return false;
    const char *end = strstr(at, ", ");
    snprintf(out, size, "%.*s", end ? (int)(end - at) : (int)strlen(at), at);
    return true;
}

static void join(char text[PERMIT_TEXT_SIZE], const char *name)
{
    size_t used = strlen(text);
    snprintf(text + used, PERMIT_TEXT_SIZE - used, "%s%s", used ? ", " : "", name);
}

unsigned value_texts(struct permit_reader *reader, struct group_reader *parent, const char *key,
                     bool required, char *out, size_t size, unsigned max_count)
{
    struct reading reading;
    if (!open(reader, parent, key, required, &reading))
        return 0;
    char text[PERMIT_TEXT_SIZE] = "", name[PERMIT_NAME_SIZE];
    unsigned n = 0;
    for (; name_at(&reading, n, name, size < sizeof name ? size : sizeof name); n++) {
        if (n == max_count) {
            group_problem(&reading.group, "value", "has too many texts; allowed: at most %u", max_count);
            break;
        }
        snprintf(out + n * size, size, "%s", name);
        join(text, name);
    }
    if (n == 0)
        group_problem(&reading.group, "value", "names nothing; allowed: [\"...\", ...]");
    close_reading(&reading, text);
    return n;
}

static uint32_t groups_of(const struct permit_reader *reader, const char *name)
{
    enum group group;
    if (group_from_text(name, &group))
        return PERMIT_GROUP_BIT(group);
    for (uint32_t i = 0; i < reader->n_sets; i++)
        if (strcmp(reader->sets[i].name, name) == 0)
            return reader->sets[i].groups;
    return 0;
}

static uint32_t add_groups(struct permit_reader *reader, struct group_reader *group, const char *key,
                           const char *name)
{
    uint32_t groups = groups_of(reader, name);
    if (!groups)
        group_problem(group, key,
                      "has no group \"%s\"; allowed: unknown, baleen whale, sperm whale, beaked whale, "
                      "delphinid, porpoise, phocid, otariid, sirenian, sea otter, turtle, and the sets that "
                      "the file names",
                      name);
    return groups;
}

uint32_t group_names(struct permit_reader *reader, struct group_reader *group, const char *key)
{
    char name[PERMIT_NAME_SIZE];
    uint32_t groups = 0;
    for (unsigned i = 0; group_text_at(group, key, i, name, sizeof name); i++)
        groups |= add_groups(reader, group, key, name);
    if (!groups)
        group_problem(group, key, "names no group; allowed: [\"baleen whale\", ...]");
    return groups;
}

bool value_groups(struct permit_reader *reader, struct group_reader *parent, const char *key, bool required,
                  uint32_t *out)
{
    struct reading reading;
    if (!open(reader, parent, key, required, &reading))
        return false;
    char text[PERMIT_TEXT_SIZE] = "", name[PERMIT_NAME_SIZE];
    uint32_t groups = 0;
    for (unsigned i = 0; name_at(&reading, i, name, sizeof name); i++) {
        groups |= add_groups(reader, &reading.group, "value", name);
        join(text, name);
    }
    if (groups)
        *out = groups;
    else
        group_problem(&reading.group, "value", "names no group; allowed: [\"baleen whale\", ...]");
    close_reading(&reading, text);
    return groups != 0;
}

bool value_part(struct group_reader *root, const char *key, struct group_reader *group,
                char clause[PERMIT_TEXT_SIZE])
{
    if (!group_child(root, key, READER_OPTIONAL, group))
        return false;
    group_string(group, "clause", READER_REQUIRED, clause, PERMIT_TEXT_SIZE);
    return true;
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

void value_action(struct permit_reader *reader, const struct group_reader *group,
                  enum permit_action action[PHASE_COUNT])
{
    static const char *const words[] = {"log", "prepare", "delay", "hold", "reduce", "stop"};
    struct reading reading;
    unsigned word = ACTION_LOG;
    if (!start(reader, group, &reading)) {
        group_know(&reading.group, "phases");
        group_done(&reading.group);
        return;
    }
    struct permit_fill bare; /* a ledger keeps the action with its phases */
    if (reading.fill) {
        bare = *reading.fill;
        bare.text[strcspn(bare.text, " ")] = '\0';
        reading.fill = &bare;
    }
    read_word(&reading, words, 6, &word);
    char name[PERMIT_NAME_SIZE], phases[PERMIT_TEXT_SIZE] = "", text[PERMIT_TEXT_SIZE];
    for (unsigned i = 0; group_text_at(&reading.group, "phases", i, name, sizeof name); i++) {
        enum phase phase;
        if (phase_from_text(name, &phase))
            action[phase] = (enum permit_action)word;
        else
            group_problem(&reading.group, "phases", "has no phase \"%s\"", name);
        join(phases, name);
    }
    snprintf(text, sizeof text, "%s in %.240s", words[word], phases);
    close_reading(&reading, text);
}

/* A value of the settings as text: numbers, flags and texts as they are, names of an array joined. */
static bool fill_text(struct group_reader *group, char text[PERMIT_TEXT_SIZE])
{
    char name[PERMIT_NAME_SIZE];
    text[0] = '\0';
    if (group_scalar(group, "value", text, PERMIT_TEXT_SIZE))
        return true;
    for (unsigned i = 0; group_text_at(group, "value", i, name, sizeof name); i++)
        join(text, name);
    return *text != '\0';
}

void permit_read_fills(struct group_reader *settings, struct permit_fills *out)
{
    unsigned n = group_count_to(settings, "permit_values", READER_OPTIONAL, PERMIT_MAX_FILLS);
    for (unsigned i = 0; i < n; i++) {
        struct group_reader group;
        struct permit_fill *fill = &out->fills[out->n++];
        group_at(settings, "permit_values", i, &group);
        if (group.setting)
            snprintf(fill->where, sizeof fill->where, "%.230s:%u", group.reader->path,
                     (unsigned)config_setting_source_line(group.setting));
        group_string(&group, "key", READER_REQUIRED, fill->key, sizeof fill->key);
        group_string(&group, "who", READER_REQUIRED, fill->who, sizeof fill->who);
        group_string(&group, "source", READER_REQUIRED, fill->source, sizeof fill->source);
        if (!fill_text(&group, fill->text))
            group_problem(&group, "value", "is missing; allowed: a number, true or false, a text, names");
        for (uint32_t k = 0; k + 1 < out->n; k++)
            if (strcmp(out->fills[k].key, fill->key) == 0)
                group_problem(&group, "key", "states \"%s\" a second time", fill->key);
        group_done(&group);
    }
}
