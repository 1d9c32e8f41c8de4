/* The typed line; see mark_line.h. */
#include "rule/mark_line.h"
#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define MAX_WORDS 48
#define WORD_SIZE 24
#define METRES_A_NAUTICAL_MILE 1852.0

struct line {
    char words[MAX_WORDS][WORD_SIZE]; /* in small letters */
    unsigned n, at;
    struct note note;
    bool has_group;
    char *sentence;
};

__attribute__((format(printf, 3, 4))) static enum status refuse(struct line *line, enum status status,
                                                                const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(line->sentence, MARK_LINE_SENTENCE_SIZE, format, arguments);
    va_end(arguments);
    return status;
}

/* Cuts the text into words, as far as a colon. */
static enum status split(const char *text, struct line *line)
{
    while (*text && *text != ':') {
        size_t length = strcspn(text, " ,;:");
        if (length == 0) {
            text++;
            continue;
        }
        if (length >= WORD_SIZE || line->n == MAX_WORDS)
            return refuse(line, STATUS_BAD_FORMAT,
                          "'%.30s' is too long; allowed: a line like 'porpoise 320 m 045 closing'", text);
        char *word = line->words[line->n++];
        for (size_t i = 0; i < length; i++)
            word[i] = (char)(text[i] >= 'A' && text[i] <= 'Z' ? text[i] - 'A' + 'a' : text[i]);
        text += length;
    }
    return STATUS_OK;
}

static const char *word_at(const struct line *line, unsigned i)
{
    return i < line->n ? line->words[i] : "";
}

static bool is_one_of(const char *word, const char *const *list)
{
    for (; *list; list++)
        if (strcmp(word, *list) == 0)
            return true;
    return false;
}

/* The field in the note's own way, so that its limits hold. */
static enum status set(struct line *line, const char *field, const char *value, const char *word)
{
    const char *allowed = "";
    enum status status = note_set(&line->note, field, value, &allowed);
    return status == STATUS_OK
               ? status
               : refuse(line, status, "'%.24s' is not allowed; allowed: %.120s", word, allowed);
}

static enum status set_number(struct line *line, const char *field, double *member, double value,
                              const char *word)
{
    char text[40];
    if (!isnan(*member))
        return refuse(line, STATUS_BAD_FORMAT, "'%.24s' is a second %s; allowed: one", word, field);
    snprintf(text, sizeof text, "%.6f", value);
    return set(line, field, text, word);
}

/* ---- groups */

static bool singular_is(const char *word, const char *name)
{
    size_t n = strlen(name);
    return strncmp(word, name, n) == 0 && (word[n] == '\0' || strcmp(word + n, "s") == 0);
}

/* How many words name a group here, 0 where none does. */
static unsigned find_group(const struct line *line, enum group *out)
{
    static const struct {
        const char *word;
        enum group group;
    } others[] = {{"dolphin", GROUP_DELPHINID}, {"seal", GROUP_PHOCID}};
    const char *first = word_at(line, line->at), *second = word_at(line, line->at + 1);
    for (unsigned g = 0; g < GROUP_COUNT; g++) {
        const char *name = group_text((enum group)g), *space = strchr(name, ' ');
        size_t length = space ? (size_t)(space - name) : 0;
        *out = (enum group)g;
        if (!space && singular_is(first, name))
            return 1;
        if (space && strlen(first) == length && strncmp(first, name, length) == 0 &&
            singular_is(second, space + 1))
            return 2;
    }
    for (size_t i = 0; i < sizeof others / sizeof others[0]; i++)
        if (singular_is(first, others[i].word)) {
            *out = others[i].group;
            return 1;
        }
    return 0;
}

static enum status take_group(struct line *line, enum group group, unsigned n)
{
    if (line->has_group)
        return refuse(line, STATUS_BAD_FORMAT,
                      "'%.24s' is a second group; allowed: one, and another line for another",
                      word_at(line, line->at));
    line->has_group = true;
    line->note.group = group;
    line->at += n;
    return STATUS_OK;
}

/* ---- numbers */

/* A plain number at the word's beginning; false where there is none. */
static bool read_number(const char *word, double *out, const char **out_rest)
{
    size_t n = strspn(word, "0123456789.");
    char digits[WORD_SIZE];
    if (n == 0 || word[0] == '.')
        return false;
    memcpy(digits, word, n);
    digits[n] = '\0';
    char *end;
    *out = strtod(digits, &end);
    *out_rest = word + n;
    return *end == '\0';
}

static double metres_in(const char *unit)
{
    return strcmp(unit, "m") == 0    ? 1
           : strcmp(unit, "km") == 0 ? 1000
           : strcmp(unit, "nm") == 0 ? METRES_A_NAUTICAL_MILE
                                     : 0;
}

static bool is_degrees(const char *unit)
{
    static const char *const words[] = {"deg", "degree", "degrees", "\xc2\xb0", NULL};
    return is_one_of(unit, words);
}

static bool is_calf(const char *word)
{
    static const char *const words[] = {"calf", "calves", NULL};
    return is_one_of(word, words);
}

static enum status take_calves(struct line *line, double n, const char *word)
{
    line->note.calf = true;
    return set_number(line, "calves", &line->note.calves, n, word);
}

/* "2-5" */
static enum status take_range(struct line *line, double low, const char *rest, const char *word)
{
    double high;
    const char *end;
    if (!read_number(rest + 1, &high, &end) || *end != '\0' || high < low)
        return refuse(line, STATUS_BAD_FORMAT, "'%.24s' is no range of numbers; allowed: 2-5", word);
    line->at++;
    enum status status = set_number(line, "number_low", &line->note.number_low, low, word);
    return status == STATUS_OK ? set_number(line, "number_high", &line->note.number_high, high, word)
                               : status;
}

/* The unit of a number is joined to it, or is the next word, or its three digits are a bearing. */
static enum status take_number(struct line *line, double value, const char *rest)
{
    const char *word = word_at(line, line->at), *next = word_at(line, line->at + 1);
    const char *unit = *rest ? rest : next;
    unsigned used = *rest ? 1 : 2;
    bool whole = !strchr(word, '.');
    if (*rest == '-')
        return take_range(line, value, rest, word);
    if (metres_in(unit) > 0) {
        line->at += used;
        return set_number(line, "distance_m", &line->note.distance_m, value * metres_in(unit), word);
    }
    if (is_degrees(unit)) {
        line->at += used;
        return set_number(line, "bearing_deg", &line->note.bearing_deg, value, word);
    }
    if (*rest != '\0')
        return refuse(line, STATUS_BAD_FORMAT, "'%.24s' has no unit that is known; allowed: m, km, nm, deg",
                      word);
    if (is_calf(next) && whole) {
        line->at += 2;
        return take_calves(line, value, word);
    }
    line->at++;
    if (whole && strlen(word) == 3)
        return set_number(line, "bearing_deg", &line->note.bearing_deg, value, word);
    if (whole && strlen(word) < 3)
        return set_number(line, "number", &line->note.number, value, word);
    return refuse(line, STATUS_BAD_FORMAT,
                  "'%.24s' has no unit; allowed: 320 m, 1.2 km, 045 (a bearing, three digits), 3 "
                  "(animals)",
                  word);
}

/* "bearing 45", "contact 2" */
static enum status take_named(struct line *line, const char *name)
{
    const char *word = word_at(line, line->at + 1), *rest = "";
    double value = 0;
    if (!read_number(word, &value, &rest) || *rest != '\0')
        return refuse(line, STATUS_BAD_FORMAT, "'%s' needs a number behind it; allowed: %s", name,
                      strcmp(name, "bearing") == 0 ? "bearing 45" : "contact 2");
    line->at += 2;
    if (strcmp(name, "bearing") == 0)
        return set_number(line, "bearing_deg", &line->note.bearing_deg, value, word);
    return set(line, "contact", word, word);
}

/* ---- words */

/* One of the words of a field, of one or two words; STATUS_NOT_FOUND. */
static enum status take_word(struct line *line, const char *field, const char *member)
{
    char both[2 * WORD_SIZE + 2];
    const char *first = word_at(line, line->at);
    const char *const *words = note_words(field);
    snprintf(both, sizeof both, "%s %s", first, word_at(line, line->at + 1));
    bool two = is_one_of(both, words);
    if (!two && !is_one_of(first, words))
        return STATUS_NOT_FOUND;
    if (*member)
        return refuse(line, STATUS_BAD_FORMAT, "'%.24s' is a second %s; allowed: one", first, field);
    line->at += two ? 2 : 1;
    return set(line, field, two ? both : first, first);
}

static enum status take_other(struct line *line)
{
    static const char *const silent[] = {"at", "of", "and", "with", "a", "animals", NULL};
    const char *word = word_at(line, line->at);
    enum status status = take_word(line, "behaviour", line->note.behaviour);
    if (status == STATUS_NOT_FOUND)
        status = take_word(line, "certainty", line->note.certainty);
    if (status != STATUS_NOT_FOUND)
        return status;
    if (is_calf(word) || strcmp(word, "leaving") == 0 || is_one_of(word, silent)) {
        line->note.calf |= is_calf(word);
        line->note.leaving |= strcmp(word, "leaving") == 0;
        line->at++;
        return STATUS_OK;
    }
    if (strcmp(word, "whale") == 0 || strcmp(word, "whales") == 0)
        return refuse(line, STATUS_BAD_FORMAT,
                      "'%s' may be of several groups; allowed: baleen whale, sperm whale, beaked "
                      "whale, unknown",
                      word);
    return refuse(
        line, STATUS_BAD_FORMAT,
        "'%.24s' is no word of this line; allowed: a group, 320 m, 045, 3, calf, closing, probable, or text "
        "behind a colon",
        word);
}

static enum status take_next(struct line *line)
{
    const char *word = word_at(line, line->at), *rest;
    enum group group;
    double value;
    unsigned n = find_group(line, &group);
    if (n > 0)
        return take_group(line, group, n);
    if (read_number(word, &value, &rest))
        return take_number(line, value, rest);
    if (strcmp(word, "bearing") == 0 || strcmp(word, "contact") == 0)
        return take_named(line, word);
    return take_other(line);
}

enum status mark_line_read(const char *text, struct note *note, char out_sentence[MARK_LINE_SENTENCE_SIZE])
{
    struct line line = {.note = *note, .sentence = out_sentence};
    line.note.distance_m = line.note.bearing_deg = line.note.number = line.note.calves = NAN;
    line.note.number_low = line.note.number_high = NAN;
    line.note.behaviour[0] = line.note.certainty[0] = '\0';
    enum status status = split(text, &line);
    if (status == STATUS_OK && line.n == 0)
        status = refuse(&line, STATUS_BAD_FORMAT,
                        "the line is empty; allowed: a line like 'porpoise 320 m 045 closing'");
    while (status == STATUS_OK && line.at < line.n)
        status = take_next(&line);
    if (status == STATUS_OK)
        status = set(&line, "text", text, "the line");
    if (status == STATUS_OK)
        *note = line.note;
    return status;
}
