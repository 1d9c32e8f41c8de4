/* Reads one libconfig file and says everything that is wrong with it: file, line, key, what is allowed. Of
 * syntax the first error, of meaning all. Every key that is asked for is remembered with its value, so that
 * --print and the `run` entry show the effective settings, and every key that was never asked for is an error
 * with a suggestion. */
#ifndef SETTINGS_READER_H
#define SETTINGS_READER_H

#include "base/status.h"
#include "base/text.h"
#include <libconfig.h>
#include <stdbool.h>

#define READER_MAX_KEYS 64
#define READER_REQUIRED true
#define READER_OPTIONAL false

/* Collected over several files; one line each: "FILE:LINE: KEY: what is wrong; what is allowed". */
struct problems {
    struct text lines;
    unsigned count;
};

void problems_add(struct problems *problems, const char *file, unsigned line, const char *key,
                  const char *format, ...) __attribute__((format(printf, 5, 6)));
void problems_destroy(struct problems *problems);

struct reader {
    config_t config;
    const char *path;          /* borrowed */
    struct problems *problems; /* borrowed */
    struct text *effective;    /* borrowed; NULL where nobody wants it */
    bool open;
};

/* A group { } of the file, and which of its keys were asked for. */
struct group_reader {
    struct reader *reader;
    config_setting_t *setting; /* NULL: the group is absent, every optional value keeps its default */
    char name[128];            /* "streams[0].channels[1]" for messages; "" for the root */
    const char *asked[READER_MAX_KEYS];
    unsigned n_asked;
};

/* Opens a file. STATUS_NOT_FOUND or STATUS_BAD_FORMAT after adding the problem. `effective` may be NULL. */
enum status reader_open(struct reader *reader, const char *path, struct problems *problems,
                        struct text *effective);
/* The same from text; `name` stands for the path in messages. Both are borrowed until it is closed. */
enum status reader_open_text(struct reader *reader, const char *name, const char *text,
                             struct problems *problems);
/* The same from the effective settings of a file, as `effective` has them and a `run` entry keeps them: what
 * stood in the file is taken, what did not gets this program's default. length: how much of text. */
enum status reader_open_effective(struct reader *reader, const char *name, const char *text, size_t length,
                                  struct problems *problems, struct text *effective);
void reader_close(struct reader *reader);
struct group_reader reader_root(struct reader *reader);

/* Each leaves *value untouched (the default) when the key is absent and optional, and when it is wrong, which
 * adds a problem. They return whether a good value was read. Keys must be string literals: they are kept. */
bool group_number(struct group_reader *group, const char *key, bool required, double min, double max,
                  double *value);
bool group_flag(struct group_reader *group, const char *key, bool required, bool *value);
bool group_string(struct group_reader *group, const char *key, bool required, char *value, size_t size);
/* One of n words; *value is its index. */
bool group_word(struct group_reader *group, const char *key, bool required, const char *const *words,
                unsigned n, unsigned *value);
/* Numbers of an array [a, b, c]; returns how many were read (at most max_count). */
unsigned group_numbers(struct group_reader *group, const char *key, bool required, double min, double max,
                       double *values, unsigned max_count);
/* The i-th text of an array ["a", "b"]; false after the last. */
bool group_text_at(struct group_reader *group, const char *key, unsigned i, char *value, size_t size);

/* A sub-group { }; absent and optional gives a group whose values all keep their defaults, and false. */
bool group_child(struct group_reader *group, const char *key, bool required, struct group_reader *out);
/* How many groups a list ( { }, { } ) has; 0 when absent. Then the i-th of them. */
unsigned group_count(struct group_reader *group, const char *key, bool required);
/* The same where there is room for so many: more are a problem, and are not counted. */
unsigned group_count_to(struct group_reader *group, const char *key, bool required, unsigned most);
void group_at(struct group_reader *group, const char *key, unsigned i, struct group_reader *out);

/* The i-th member of a group whose keys are not known beforehand, its value as text (true and false for
 * flags); false after the last. Members read so need no group_done. */
bool group_pair(struct group_reader *group, unsigned i, char *key, size_t key_size, char *value,
                size_t value_size);

/* A number, flag or text as text; false where the key is absent or an array, a list or a group. */
bool group_scalar(struct group_reader *group, const char *key, char *value, size_t size);
/* The key may be there, whatever it holds. */
void group_know(struct group_reader *group, const char *key);

/* A problem about a key of this group, at the key's line. */
void group_problem(struct group_reader *group, const char *key, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

/* Adds a problem, with a suggestion, for every key that was never asked for. Call when done with a group. */
void group_done(struct group_reader *group);

#endif
