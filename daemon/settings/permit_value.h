/* Values of a permit file: groups { value; mark; source }. The site's settings may state any of them in its
 * place, and must state those that are 'to be filled'. Shared by the parts of the permit loader only. */
#ifndef SETTINGS_PERMIT_VALUE_H
#define SETTINGS_PERMIT_VALUE_H

#include "rule/permit.h"
#include "settings/permit.h"
#include "settings/reader.h"

/* A set of groups that the file gives a name: predicates over what a call can tell. */
struct group_set {
    char name[PERMIT_NAME_SIZE];
    uint32_t groups;
};

#define PERMIT_MAX_SETS 8

/* What is being read. */
struct permit_reader {
    struct permit *permit;
    const struct permit_fills *fills; /* borrowed */
    bool used[PERMIT_MAX_FILLS];      /* which of them were asked for */
    uint32_t n_sets;
    struct group_set sets[PERMIT_MAX_SETS];
};

/* Each reads the value of that key of the parent, keeps it in permit->values, and sets *out where it is good.
 * They return whether it was. An optional value that is absent leaves *out alone and is not kept. */
bool value_number(struct permit_reader *reader, struct group_reader *parent, const char *key, bool required,
                  double min, double max, double *out);
bool value_flag(struct permit_reader *reader, struct group_reader *parent, const char *key, bool required,
                bool *out);
/* One of n words; NULLs among them stand for numbers that no word has. *out is its index. */
bool value_word(struct permit_reader *reader, struct group_reader *parent, const char *key, bool required,
                const char *const *words, unsigned n, unsigned *out);
bool value_text(struct permit_reader *reader, struct group_reader *parent, const char *key, bool required,
                char *out, size_t size);
/* Texts of an array, at most max_count of `size` bytes each; returns how many. */
unsigned value_texts(struct permit_reader *reader, struct group_reader *parent, const char *key,
                     bool required, char *out, size_t size, unsigned max_count);
/* Groups and sets of them, by name. */
bool value_groups(struct permit_reader *reader, struct group_reader *parent, const char *key, bool required,
                  uint32_t *out);

/* The file and line of a value that the settings state, for messages; never NULL. */
const char *permit_fill_where(const struct permit_fill *fill);

/* Opens a part that a permit may lack and reads its clause: whether it is there. */
bool value_part(struct group_reader *root, const char *key, struct group_reader *group,
                char clause[PERMIT_TEXT_SIZE]);
/* { phases = [...]; value; mark; source }, where `group` itself is the value: an action in some phases. */
void value_action(struct permit_reader *reader, const struct group_reader *group,
                  enum permit_action action[PHASE_COUNT]);
/* Groups and sets of an array of names that carries no mark of its own. */
uint32_t group_names(struct permit_reader *reader, struct group_reader *group, const char *key);

#endif
