/* How certain a call is; see certainty.h. */
#include "call/certainty.h"
#include <math.h>
#include <stddef.h>

#define LEAST 0.01 /* no bench of some thousand calls knows more */
#define MOST 0.99

static const char *const tone_names[CALL_MEASURES] = {
    [TONE_LENGTH] = "length",       [TONE_BEND] = "bend",         [TONE_JUMP] = "jump",
    [TONE_OCCUPANCY] = "occupancy", [TONE_CONTRAST] = "contrast", [TONE_STRENGTH] = "strength"};

static const char *const train_names[CALL_MEASURES] = {
    [TRAIN_EXCESS] = "excess",     [TRAIN_STRAYS] = "strays", [TRAIN_JITTER] = "jitter",
    [TRAIN_LIKENESS] = "likeness", [TRAIN_LENGTH] = "length", [TRAIN_BANDWIDTH] = "bandwidth",
    [TRAIN_STRENGTH] = "strength"};

const char *certainty_measure_name(enum call_form form, uint32_t i)
{
    return i >= CALL_MEASURES ? NULL : form == CALL_TONE ? tone_names[i] : train_names[i];
}

const char *certainty_text(double certainty)
{
    return certainty >= 0.8 ? "probable" : certainty >= 0.5 ? "possible" : "doubtful";
}

static double log_odds(double p)
{
    p = fmin(MOST, fmax(LEAST, p));
    return log(p / (1 - p));
}

double certainty_find(const struct certainty_table *table, const struct call_class *call_class,
                      const double measures[CALL_MEASURES])
{
    const struct certainty_form *form = call_class->form == CALL_TONE ? &table->tone : &table->train;
    double sum = log_odds(call_class->certainty);
    for (uint32_t i = 0; i < CALL_MEASURES; i++)
        sum += form->weight[i] * (measures[i] - form->usual[i]);
    return fmin(MOST, fmax(LEAST, 1 / (1 + exp(-sum))));
}

double certainty_evidence(double certainty, const struct call_class *call_class)
{
    return fmin(call_class->evidence, fmax(0, log_odds(certainty)));
}
