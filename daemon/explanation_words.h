/* What an entry says, in words, as SQL over its `body`. */
#ifndef EXPLANATION_WORDS_H
#define EXPLANATION_WORDS_H

#include "base/text.h"

/* Appends an SQL expression that gives the sentence of an entry of that kind; '' for a kind that has none. */
void explanation_words(const char *kind, struct text *sql);

#endif
