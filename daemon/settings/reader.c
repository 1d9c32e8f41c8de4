/* Reads one libconfig file; see reader.h. */
#include "settings/reader.h"
#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

static void add_line(struct problems *problems, const char *file, unsigned line, const char *key,
                     const char *format, va_list arguments)
{
    char what[768];
    vsnprintf(what, sizeof what, format, arguments);
    text_append(&problems->lines, file);
    if (line > 0)
        text_format(&problems->lines, ":%u", line);
    text_format(&problems->lines, ": %s%s%s\n", key, *key ? ": " : "", what);
    problems->count++;
}

void problems_add(struct problems *problems, const char *file, unsigned line, const char *key,
                  const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    add_line(problems, file, line, key, format, arguments);
    va_end(arguments);
}

void problems_destroy(struct problems *problems)
{
    if (problems)
        text_destroy(&problems->lines);
}

static enum status read_result(struct reader *reader, int good)
{
    if (good)
        return STATUS_OK;
    const char *file = config_error_file(&reader->config);
    problems_add(
        reader->problems, file ? file : reader->path, (unsigned)config_error_line(&reader->config), "", "%s",
        config_error_type(&reader->config) == CONFIG_ERR_PARSE ? config_error_text(&reader->config)
                                                               : "cannot be read as a settings file");
    return STATUS_BAD_FORMAT;
}

enum status reader_open(struct reader *reader, const char *path, struct problems *problems,
                        struct text *effective)
{
    *reader = (struct reader){.path = path, .problems = problems, .effective = effective, .open = true};
    config_init(&reader->config);
    if (access(path, R_OK) != 0) {
        problems_add(problems, path, 0, "", "cannot be read (%m)");
        return STATUS_NOT_FOUND;
    }
    return read_result(reader, config_read_file(&reader->config, path));
}

enum status reader_open_text(struct reader *reader, const char *name, const char *text,
                             struct problems *problems)
{
    *reader = (struct reader){.path = name, .problems = problems, .open = true};
    config_init(&reader->config);
    return read_result(reader, config_read_string(&reader->config, text));
}

void reader_close(struct reader *reader)
{
    if (reader && reader->open)
        config_destroy(&reader->config);
    if (reader)
        reader->open = false;
}

struct group_reader reader_root(struct reader *reader)
{
    return (struct group_reader){.reader = reader, .setting = config_root_setting(&reader->config)};
}

static void full_key(const struct group_reader *group, const char *key, char *out, size_t size)
{
    if (snprintf(out, size, "%s%s%s", group->name, *group->name ? "." : "", key) >= (int)size)
        out[size - 2] = '~'; /* cut, and seen to be cut */
}

void group_problem(struct group_reader *group, const char *key, const char *format, ...)
{
    char name[256];
    full_key(group, key, name, sizeof name);
    const config_setting_t *setting = group->setting ? config_setting_get_member(group->setting, key) : NULL;
    if (!setting)
        setting = group->setting;
    const char *file = setting ? config_setting_source_file(setting) : NULL;
    va_list arguments;
    va_start(arguments, format);
    add_line(group->reader->problems, file ? file : group->reader->path,
             setting ? (unsigned)config_setting_source_line(setting) : 0, name, format, arguments);
    va_end(arguments);
}

/* The member, or NULL after a problem where it is required. */
static config_setting_t *ask(struct group_reader *group, const char *key, bool required)
{
    bool known = false;
    for (unsigned i = 0; i < group->n_asked; i++)
        known = known || strcmp(group->asked[i], key) == 0;
    if (!known && group->n_asked < READER_MAX_KEYS)
        group->asked[group->n_asked++] = key;
    config_setting_t *member = group->setting ? config_setting_get_member(group->setting, key) : NULL;
    if (!member && required && group->setting)
        group_problem(group, key, "is missing");
    return member;
}

static void remember(struct group_reader *group, const char *key, bool from_file, const char *format, ...)
{
    if (!group->reader->effective)
        return;
    char name[256], value[2048];
    full_key(group, key, name, sizeof name);
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(value, sizeof value, format, arguments);
    va_end(arguments);
    for (char *c = value; *c; c++) /* one setting, one line */
        if ((unsigned char)*c < ' ')
            *c = ' ';
    text_format(group->reader->effective, "%s = %s%s\n", name, value, from_file ? "" : "  # default");
}

/* The shortest text that is read as the very same number: a run is derived from it again. */
static const char *number_text(double number, char out[32])
{
    for (int digits = 10; digits <= 17; digits++) {
        snprintf(out, 32, "%.*g", digits, number);
        if (!(strtod(out, NULL) < number) && !(strtod(out, NULL) > number))
            break;
    }
    return out;
}

static bool is_number(const config_setting_t *setting, double *out)
{
    switch (config_setting_type(setting)) {
    case CONFIG_TYPE_INT:
        *out = config_setting_get_int(setting);
        return true;
    case CONFIG_TYPE_INT64:
        *out = (double)config_setting_get_int64(setting);
        return true;
    case CONFIG_TYPE_FLOAT:
        *out = config_setting_get_float(setting);
        return true;
    default:
        return false;
    }
}

static bool number_in_range(struct group_reader *group, const char *key, const config_setting_t *setting,
                            double min, double max, double *out)
{
    double number;
    if (!is_number(setting, &number))
        group_problem(group, key, "is not a number; allowed: %g to %g", min, max);
    else if (!(number >= min && number <= max))
        group_problem(group, key, "is %g; allowed: %g to %g", number, min, max);
    else {
        *out = number;
        return true;
    }
    return false;
}

bool group_number(struct group_reader *group, const char *key, bool required, double min, double max,
                  double *value)
{
    config_setting_t *member = ask(group, key, required);
    bool good = member && number_in_range(group, key, member, min, max, value);
    char text[32];
    remember(group, key, good, "%s", number_text(*value, text));
    return good;
}

bool group_flag(struct group_reader *group, const char *key, bool required, bool *value)
{
    config_setting_t *member = ask(group, key, required);
    bool good = member && config_setting_type(member) == CONFIG_TYPE_BOOL;
    if (good)
        *value = config_setting_get_bool(member);
    else if (member)
        group_problem(group, key, "is not a yes or no; allowed: true, false");
    remember(group, key, good, "%s", *value ? "true" : "false");
    return good;
}

static bool text_fits(struct group_reader *group, const char *key, const config_setting_t *setting,
                      char *value, size_t size)
{
    const char *text = config_setting_get_string(setting);
    if (!text)
        group_problem(group, key, "is not a text; allowed: \"...\" of at most %zu bytes", size - 1);
    else if (strlen(text) >= size)
        group_problem(group, key, "is %zu bytes long; allowed: at most %zu", strlen(text), size - 1);
    else {
        memcpy(value, text, strlen(text) + 1);
        return true;
    }
    return false;
}

bool group_string(struct group_reader *group, const char *key, bool required, char *value, size_t size)
{
    config_setting_t *member = ask(group, key, required);
    bool good = member && text_fits(group, key, member, value, size);
    remember(group, key, good, "\"%s\"", value);
    return good;
}

bool group_word(struct group_reader *group, const char *key, bool required, const char *const *words,
                unsigned n, unsigned *value)
{
    config_setting_t *member = ask(group, key, required);
    const char *text = member ? config_setting_get_string(member) : NULL;
    bool good = false;
    for (unsigned i = 0; i < n && text && !good; i++) {
        good = words[i] && strcmp(text, words[i]) == 0;
        if (good)
            *value = i;
    }
    if (member && !good) {
        char allowed[2048] = "";
        for (unsigned i = 0; i < n; i++)
            if (words[i] && strlen(allowed) + strlen(words[i]) + 4 < sizeof allowed) {
                strcat(allowed, *allowed ? ", " : "");
                strcat(allowed, words[i]);
            }
        group_problem(group, key, "is %s%s%s; allowed: %s", text ? "\"" : "not a text", text ? text : "",
                      text ? "\"" : "", allowed);
    }
    remember(group, key, good, "\"%s\"", *value < n && words[*value] ? words[*value] : "");
    return good;
}

unsigned group_numbers(struct group_reader *group, const char *key, bool required, double min, double max,
                       double *values, unsigned max_count)
{
    config_setting_t *member = ask(group, key, required);
    if (!member)
        return 0;
    if (!config_setting_is_array(member) && !config_setting_is_list(member)) {
        group_problem(group, key, "is not an array of numbers; allowed: [a, b, ...] of %g to %g", min, max);
        return 0;
    }
    unsigned n = (unsigned)config_setting_length(member);
    if (n > max_count) {
        group_problem(group, key, "has %u numbers; allowed: at most %u", n, max_count);
        return 0;
    }
    for (unsigned i = 0; i < n; i++)
        if (!number_in_range(group, key, config_setting_get_elem(member, i), min, max, &values[i]))
            return 0;
    char text[32];
    for (unsigned i = 0; i < n; i++)
        remember(group, key, true, "[%u] %s", i, number_text(values[i], text));
    return n;
}

bool group_text_at(struct group_reader *group, const char *key, unsigned i, char *value, size_t size)
{
    config_setting_t *member = ask(group, key, READER_OPTIONAL);
    if (member && !config_setting_is_array(member) && !config_setting_is_list(member)) {
        if (i == 0)
            group_problem(group, key, "is not an array of texts; allowed: [\"...\", ...]");
        return false;
    }
    if (!member || i >= (unsigned)config_setting_length(member))
        return false;
    bool good = text_fits(group, key, config_setting_get_elem(member, i), value, size);
    if (good)
        remember(group, key, true, "[%u] \"%s\"", i, value);
    return good;
}

bool group_child(struct group_reader *group, const char *key, bool required, struct group_reader *out)
{
    config_setting_t *member = ask(group, key, required);
    *out = (struct group_reader){.reader = group->reader};
    full_key(group, key, out->name, sizeof out->name);
    if (member && !config_setting_is_group(member)) {
        group_problem(group, key, "is not a group; allowed: { ... }");
        return false;
    }
    out->setting = member;
    return member != NULL;
}

unsigned group_count(struct group_reader *group, const char *key, bool required)
{
    config_setting_t *member = ask(group, key, required);
    if (!member)
        return 0;
    bool list = config_setting_is_list(member);
    for (int i = 0; list && i < config_setting_length(member); i++)
        list = config_setting_is_group(config_setting_get_elem(member, (unsigned)i));
    if (!list) {
        group_problem(group, key, "is not a list of groups; allowed: ( { ... }, { ... } )");
        return 0;
    }
    return (unsigned)config_setting_length(member);
}

unsigned group_count_to(struct group_reader *group, const char *key, bool required, unsigned most)
{
    unsigned n = group_count(group, key, required);
    if (n <= most)
        return n;
    group_problem(group, key, "has %u; allowed: at most %u", n, most);
    return most;
}

void group_at(struct group_reader *group, const char *key, unsigned i, struct group_reader *out)
{
    config_setting_t *member = ask(group, key, READER_OPTIONAL);
    char name[256];
    full_key(group, key, name, sizeof name);
    *out = (struct group_reader){.reader = group->reader, .setting = config_setting_get_elem(member, i)};
    snprintf(out->name, sizeof out->name, "%.100s[%u]", name, i);
}

/* Numbers, flags and texts as text; empty after a problem. */
static void scalar_text(struct group_reader *group, const char *key, const config_setting_t *setting,
                        char *value, size_t size)
{
    double number;
    if (is_number(setting, &number))
        snprintf(value, size, "%.15g", number);
    else if (config_setting_type(setting) == CONFIG_TYPE_BOOL)
        snprintf(value, size, "%s", config_setting_get_bool(setting) ? "true" : "false");
    else {
        *value = '\0';
        text_fits(group, key, setting, value, size);
    }
}

bool group_scalar(struct group_reader *group, const char *key, char *value, size_t size)
{
    config_setting_t *member = ask(group, key, READER_OPTIONAL);
    if (!member || config_setting_is_aggregate(member))
        return false;
    scalar_text(group, key, member, value, size);
    remember(group, key, true, "%s", value);
    return *value != '\0';
}

void group_know(struct group_reader *group, const char *key)
{
    ask(group, key, READER_OPTIONAL);
}

bool group_pair(struct group_reader *group, unsigned i, char *key, size_t key_size, char *value,
                size_t value_size)
{
    if (!group->setting || i >= (unsigned)config_setting_length(group->setting))
        return false;
    const config_setting_t *member = config_setting_get_elem(group->setting, i);
    snprintf(key, key_size, "%s", config_setting_name(member));
    scalar_text(group, key, member, value, value_size);
    return true;
}

/* Edit distance (Levenshtein 1965), for the suggestion. */
static unsigned edit_distance(const char *a, const char *b)
{
    unsigned row[65];
    size_t n = strlen(b) < 64 ? strlen(b) : 64;
    for (size_t j = 0; j <= n; j++)
        row[j] = (unsigned)j;
    for (size_t i = 1; *a && i <= 64; i++, a++) {
        unsigned diagonal = row[0];
        row[0] = (unsigned)i;
        for (size_t j = 1; j <= n; j++) {
            unsigned change = diagonal + (*a != b[j - 1]);
            diagonal = row[j];
            unsigned best = row[j - 1] < row[j] ? row[j - 1] + 1 : row[j] + 1;
            row[j] = change < best ? change : best;
        }
    }
    return row[n];
}

void group_done(struct group_reader *group)
{
    for (int i = 0; group->setting && i < config_setting_length(group->setting); i++) {
        const char *key = config_setting_name(config_setting_get_elem(group->setting, (unsigned)i));
        const char *nearest = NULL;
        unsigned distance = 1000;
        for (unsigned k = 0; k < group->n_asked; k++) {
            unsigned d = edit_distance(key, group->asked[k]);
            if (d < distance) {
                distance = d;
                nearest = group->asked[k];
            }
        }
        if (distance == 0)
            continue;
        if (nearest && distance <= 1 + strlen(key) / 3)
            group_problem(group, key, "is not a known key; did you mean \"%s\"?", nearest);
        else
            group_problem(group, key, "is not a known key");
    }
}
