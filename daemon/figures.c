/* What a watch came to in numbers; see figures.h. */
#include "figures.h"
#include <stdio.h>
#include <string.h>

static void take_advice(struct figures *figures, const struct advice_outcome *advice, int64_t watch_ns)
{
    if (strcmp(advice->station, "crew") != 0 || (figures->told && figures->word == advice->advice))
        return;
    if (figures->told)
        figures->advice[figures->word].ns += watch_ns - figures->word_ns;
    figures->told = true;
    figures->word = advice->advice;
    figures->word_ns = watch_ns;
    figures->advice[advice->advice].n++;
}

static void take_phase(struct figures *figures, enum phase phase, int64_t watch_ns)
{
    if (figures->has_phase && figures->phase == phase)
        return;
    figures->phases[figures->phase].ns += watch_ns - figures->phase_ns; /* off at first */
    figures->has_phase = true;
    figures->phase = phase;
    figures->phase_ns = watch_ns;
    figures->phases[phase].n++;
}

static void take_finding(struct figures *figures, const char *code)
{
    uint32_t i = 0;
    while (i < figures->n_codes && strcmp(figures->codes[i].code, code) != 0)
        i++;
    if (i == FIGURES_MAX_CODES)
        return;
    if (i == figures->n_codes)
        snprintf(figures->codes[figures->n_codes++].code, NOTE_NAME_SIZE, "%s", code);
    figures->codes[i].n++;
}

void figures_take(struct figures *figures, const struct outcome *outcome)
{
    if (outcome->kind == OUTCOME_ADVICE)
        take_advice(figures, &outcome->as.advice, outcome->watch_ns);
    else if (outcome->kind == OUTCOME_PHASE)
        take_phase(figures, outcome->as.phase.phase, outcome->watch_ns);
    else if (outcome->kind == OUTCOME_FINDING && outcome->stream == 0)
        take_finding(figures, outcome->as.finding.code);
}

void figures_finish(struct figures *figures, int64_t watch_ns)
{
    if (figures->told)
        figures->advice[figures->word].ns += watch_ns - figures->word_ns;
    figures->phases[figures->phase].ns += watch_ns - figures->phase_ns;
    figures->word_ns = figures->phase_ns = watch_ns;
}

uint32_t figures_findings(const struct figures *figures, const char *code)
{
    for (uint32_t i = 0; i < figures->n_codes; i++)
        if (strcmp(figures->codes[i].code, code) == 0)
            return figures->codes[i].n;
    return 0;
}
