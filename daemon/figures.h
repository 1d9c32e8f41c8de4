/* What a watch came to in numbers: how often the crew was told to stop, hold or reduce, delays, phases, and
 * for how long; findings by their code. */
#ifndef FIGURES_H
#define FIGURES_H

#include "flow.h"
#include <stdint.h>

#define FIGURES_MAX_CODES 64

struct figures_count {
    uint32_t n; /* how often it began */
    int64_t ns; /* how long it held, outages with it */
};

struct figures {
    struct figures_count advice[ADVICE_WORD_COUNT]; /* to the crew */
    struct figures_count phases[PHASE_COUNT];
    uint32_t n_codes;
    struct {
        char code[NOTE_NAME_SIZE];
        uint32_t n;
    } codes[FIGURES_MAX_CODES];
    bool told, has_phase;
    enum advice_word word;
    enum phase phase;
    int64_t word_ns, phase_ns; /* since when */
};

/* Start with {0}; takes the outcomes of a watch in order. Findings of the tally are left out. */
void figures_take(struct figures *figures, const struct outcome *outcome);
/* Ends what still holds at that time. */
void figures_finish(struct figures *figures, int64_t watch_ns);
uint32_t figures_findings(const struct figures *figures, const char *code);

#endif
