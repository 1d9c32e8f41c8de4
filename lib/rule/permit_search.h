/* What the files of permit_check share; nobody else includes it. */
#ifndef RULE_PERMIT_SEARCH_H
#define RULE_PERMIT_SEARCH_H

#include "rule/permit.h"

#define PERMIT_LONGEST_MINUTES 1440.0

/* Counts problems and keeps the one that is wanted. */
struct permit_search {
    uint32_t wanted, seen;
    char *out;                  /* [PERMIT_TEXT_SIZE] */
    char key[PERMIT_NAME_SIZE]; /* of the permit file: what is being looked at */
};

void permit_look_at(struct permit_search *search, const char *format, ...)
    __attribute__((format(printf, 2, 3)));
/* Something is wrong with what is being looked at. */
void permit_problem(struct permit_search *search, const char *format, ...)
    __attribute__((format(printf, 2, 3)));

/* More than 0 and at most a day. */
void permit_need_minutes(struct permit_search *search, const char *name, double minutes);
/* At least `least`; at most a day, or INFINITY where it is not stated. */
void permit_need_limit(struct permit_search *search, const char *name, double minutes, double least);

/* permit_check_times.c: everything that is a time, and the conditions of starts, people and safety */
void permit_check_times(struct permit_search *search, const struct permit *permit);

#endif
