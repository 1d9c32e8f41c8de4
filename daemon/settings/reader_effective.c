/* From effective settings, "streams[0].channels[1].role = \"both\"" a line, back to what a file would say. */
#include "settings/reader.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define MAX_NAME 256

/* The group's member of that type, made where it is not there yet. */
static config_setting_t *member(config_setting_t *group, const char *name, int type)
{
    config_setting_t *found = config_setting_get_member(group, name);
    return found ? found : config_setting_add(group, name, type);
}

/* The i-th group of a list. */
static config_setting_t *item(config_setting_t *list, unsigned i)
{
    while (list && (unsigned)config_setting_length(list) <= i)
        if (!config_setting_add(list, NULL, CONFIG_TYPE_GROUP))
            return NULL;
    return list ? config_setting_get_elem(list, i) : NULL;
}

/* One step of "streams[0].channels[1].role": the group that it names, and what is left. */
static config_setting_t *step(config_setting_t *group, const char **name)
{
    char part[MAX_NAME];
    const char *dot = strchr(*name, '.');
    snprintf(part, sizeof part, "%.*s", (int)(dot - *name), *name);
    *name = dot + 1;
    char *bracket = strchr(part, '[');
    if (!bracket)
        return member(group, part, CONFIG_TYPE_GROUP);
    *bracket = '\0';
    unsigned long i = strtoul(bracket + 1, NULL, 10);
    return i < 1000 ? item(member(group, part, CONFIG_TYPE_LIST), (unsigned)i) : NULL;
}

static bool set_number(config_setting_t *setting, const char *text)
{
    char *end;
    double number = strtod(text, &end);
    return setting && end != text && *end == '\0' && config_setting_set_float(setting, number);
}

static bool set_text(config_setting_t *setting, const char *text)
{
    char value[2048];
    size_t length = strlen(text);
    if (length < 2 || text[length - 1] != '"')
        return false;
    snprintf(value, sizeof value, "%.*s", (int)(length - 2), text + 1);
    return setting && config_setting_set_string(setting, value);
}

static bool is_number(const char *text)
{
    char *end;
    strtod(text, &end);
    return end != text && *end == '\0';
}

static bool set_value(config_setting_t *parent, const char *name, const char *text)
{
    if (*text == '"')
        return set_text(config_setting_add(parent, name, CONFIG_TYPE_STRING), text);
    if (strcmp(text, "true") == 0 || strcmp(text, "false") == 0) {
        config_setting_t *flag = config_setting_add(parent, name, CONFIG_TYPE_BOOL);
        return flag && config_setting_set_bool(flag, *text == 't');
    }
    if (is_number(text))
        return set_number(config_setting_add(parent, name, CONFIG_TYPE_FLOAT), text);
    config_setting_t *word = config_setting_add(parent, name, CONFIG_TYPE_STRING);
    return word && config_setting_set_string(word, text);
}

/* "[2] 14" of an array: its members come in order. */
static bool add_to_array(config_setting_t *parent, const char *name, const char *text)
{
    const char *value = strchr(text, ' ');
    config_setting_t *list = member(parent, name, CONFIG_TYPE_LIST);
    return value && list && set_value(list, NULL, value + 1);
}

static bool take_line(config_t *config, char *line)
{
    static const char by_default[] = "  # default";
    size_t length = strlen(line), tail = sizeof by_default - 1;
    if (length >= tail && strcmp(line + length - tail, by_default) == 0)
        return true;
    char *equals = strstr(line, " = ");
    if (!equals || equals - line >= MAX_NAME)
        return false;
    *equals = '\0';
    const char *name = line, *value = equals + 3;
    config_setting_t *group = config_root_setting(config);
    while (group && strchr(name, '.'))
        group = step(group, &name);
    if (!group)
        return false;
    return *value == '[' ? add_to_array(group, name, value) : set_value(group, name, value);
}

enum status reader_open_effective(struct reader *reader, const char *name, const char *text, size_t length,
                                  struct problems *problems, struct text *effective)
{
    *reader = (struct reader){.path = name, .problems = problems, .effective = effective, .open = true};
    config_init(&reader->config);
    char *copy = strndup(text, length), *rest = copy;
    if (!copy)
        return STATUS_NO_MEMORY;
    bool good = true;
    for (unsigned number = 1; good && *rest; number++) {
        char *line = rest, *end = strchr(rest, '\n');
        rest = end ? end + 1 : rest + strlen(rest);
        if (end)
            *end = '\0';
        if (*line && !(good = take_line(&reader->config, line)))
            problems_add(problems, name, number, "", "is no effective setting");
    }
    free(copy);
    return good ? STATUS_OK : STATUS_BAD_FORMAT;
}
