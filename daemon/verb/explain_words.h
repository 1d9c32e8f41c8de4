/* What an entry says, in words, as SQL over its `body`. */
#ifndef VERB_EXPLAIN_WORDS_H
#define VERB_EXPLAIN_WORDS_H

#include "base/text.h"

/* Appends an SQL expression that gives the sentence of an entry of that kind; '' for a kind that has none. */
void explain_words(const char *kind, struct text *sql);

#endif
