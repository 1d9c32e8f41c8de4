/* What was found against what was there; see match.h. */
#include "bench/calls/match.h"
#include <math.h>
#include <stdlib.h>

#define REACH_S 0.0005 /* an arrival is known to less than this; a click reaches as long as it lasts */

static double common_s(const struct truth_call *truth, const struct chain_call *call)
{
    return fmin(truth->end_s, call->end_s) - fmax(truth->start_s, call->start_s);
}

static bool is_of(const struct truth_call *truth, const struct chain_call *call)
{
    return truth->group == call->group && truth->form == call->form;
}

static void match_tones(struct match *match)
{
    for (uint32_t t = 0; t < match->n_truths; t++) {
        struct truth_call *truth = &match->truths[t];
        double best_s = 0.5 * (truth->end_s - truth->start_s);
        uint32_t best = UINT32_MAX;
        for (uint32_t c = 0; truth->form == CALL_TONE && c < match->chain->n_calls; c++) {
            const struct chain_call *call = &match->chain->calls[c];
            if (!is_of(truth, call))
                continue;
            match->of_group[c] =
                match->of_group[c] || common_s(truth, call) >= 0.5 * (call->end_s - call->start_s);
            if (!match->right[c] && common_s(truth, call) >= best_s) {
                best_s = common_s(truth, call);
                best = c;
            }
        }
        truth->found = best != UINT32_MAX;
        if (truth->found)
            match->right[best] = true;
    }
}

/* The click of the call's group that the arrival belongs to, and whether it is a first. */
static bool give_pulse(struct match *match, const struct chain_call *call, double arrival_s)
{
    for (uint32_t t = 0; t < match->n_truths; t++) {
        struct truth_call *truth = &match->truths[t];
        if (!is_of(truth, call) || arrival_s < truth->start_s - REACH_S || arrival_s > truth->end_s + REACH_S)
            continue;
        for (uint32_t i = 0; i < truth->n_pulses; i++)
            if (arrival_s >= truth->pulse_s[i] - REACH_S &&
                arrival_s <= truth->pulse_s[i] + truth->pulse_length_s + REACH_S) {
                truth->n_given += !truth->is_given[i];
                truth->is_given[i] = true;
                return true;
            }
    }
    return false;
}

/* How many of the train's pulses are clicks of its group. */
static uint32_t match_train(struct match *match, const struct chain_call *call)
{
    const double *arrivals = chain_get_arrivals(match->chain, call);
    uint32_t n = 0;
    for (uint32_t i = 0; arrivals && i < call->n_pulses; i++)
        n += give_pulse(match, call, arrivals[i]);
    return n;
}

bool match_make(struct match *match)
{
    uint32_t n = match->chain->n_calls;
    match->right = calloc(n + 1, sizeof *match->right);
    match->of_group = calloc(n + 1, sizeof *match->of_group);
    match->n_right_pulses = calloc(n + 1, sizeof *match->n_right_pulses);
    if (!match->right || !match->of_group || !match->n_right_pulses)
        return false;
    match_tones(match);
    for (uint32_t c = 0; c < n; c++) {
        const struct chain_call *call = &match->chain->calls[c];
        if (call->form == CALL_TRAIN) {
            match->n_right_pulses[c] = match_train(match, call);
            match->right[c] = match->of_group[c] = 2 * match->n_right_pulses[c] >= call->n_pulses;
        }
    }
    for (uint32_t t = 0; t < match->n_truths; t++)
        if (match->truths[t].form == CALL_TRAIN)
            match->truths[t].found = match->truths[t].n_given > 0;
    return true;
}

void match_free(struct match *match)
{
    free(match->right);
    free(match->of_group);
    free(match->n_right_pulses);
}

struct sums {
    uint32_t n, n_found, n_pulses, n_given; /* of the voice */
    uint32_t n_calls, n_right, n_of_group;  /* of its group and form */
    uint32_t n_call_pulses, n_right_pulses; /* of its group and form */
};

static struct sums sum_voice(const struct match *match, uint32_t voice)
{
    struct sums sums = {0};
    const struct truth_call *some = NULL;
    for (uint32_t t = 0; t < match->n_truths; t++)
        if (match->truths[t].voice == voice) {
            some = &match->truths[t];
            sums.n++;
            sums.n_found += some->found;
            sums.n_pulses += some->n_pulses;
            sums.n_given += some->n_given;
        }
    for (uint32_t c = 0; some && c < match->chain->n_calls; c++)
        if (is_of(some, &match->chain->calls[c])) {
            sums.n_calls++;
            sums.n_right += match->right[c];
            sums.n_of_group += match->of_group[c];
            sums.n_call_pulses += match->chain->calls[c].n_pulses;
            sums.n_right_pulses += match->n_right_pulses[c];
        }
    return sums;
}

static json_t *share(uint32_t n, uint32_t of)
{
    return calls_number(of > 0 ? (double)n / of : NAN);
}

json_t *match_rows(const struct match *match)
{
    json_t *rows = json_array();
    for (uint32_t v = 0; v < match->n_voices; v++) {
        struct sums sums = sum_voice(match, v);
        bool train = sums.n_pulses > 0;
        json_array_append_new(
            rows,
            json_pack("{s:s, s:f, s:i, s:i, s:i, s:i, s:o, s:i, s:i, s:o, s:o}", "voice",
                      match->voices[v].kind, "snr_db", match->voices[v].snr_db, "calls", (int)sums.n, "found",
                      (int)sums.n_found, "pulses", (int)sums.n_pulses, "pulses_given", (int)sums.n_given,
                      "recall", train ? share(sums.n_given, sums.n_pulses) : share(sums.n_found, sums.n),
                      "entries", (int)sums.n_calls, "entry_pulses", (int)sums.n_call_pulses, "precision",
                      train ? share(sums.n_right_pulses, sums.n_call_pulses)
                            : share(sums.n_right, sums.n_calls),
                      "right_group", share(sums.n_of_group, sums.n_calls)));
    }
    return rows;
}

/* What sounded longest during the call. */
static const char *truly(const struct match *match, const struct chain_call *call)
{
    double best_s = 0;
    const char *name = "nothing";
    for (uint32_t t = 0; t < match->n_truths; t++) {
        double common = common_s(&match->truths[t], call);
        double weight = common + (is_of(&match->truths[t], call) ? 1e6 : 0); /* its own group first */
        if (common > 0 && weight > best_s) {
            best_s = weight;
            name = match->voices[match->truths[t].voice].kind;
        }
    }
    return name;
}

json_t *match_confusion(const struct match *match)
{
    json_t *all = json_object();
    for (uint32_t c = 0; c < match->chain->n_calls; c++) {
        const struct chain_call *call = &match->chain->calls[c];
        const char *name = match->chain->catalogue->classes[call->class_index].name;
        json_t *row = json_object_get(all, name);
        const char *voice = match->of_group[c] || call->form == CALL_TONE ? truly(match, call) : "nothing";
        if (!row) {
            row = json_object();
            json_object_set_new(all, name, row);
        }
        json_object_set_new(row, voice, json_integer(json_integer_value(json_object_get(row, voice)) + 1));
    }
    return all;
}

json_t *match_judged(const struct chain *chain, const bool *right)
{
    json_t *all = json_array();
    for (uint32_t c = 0; c < chain->n_calls; c++) {
        const struct chain_call *call = &chain->calls[c];
        const struct call_class *class = &chain->catalogue->classes[call->class_index];
        if (!class->animal)
            continue; /* a machine's sound is no claim of an animal */
        json_t *row = json_pack("[s, s, i, f]", class->name, class->form == CALL_TONE ? "tone" : "train",
                                right && right[c], call->certainty);
        for (uint32_t m = 0; m < CALL_MEASURES; m++)
            json_array_append_new(row, calls_number(call->measures[m]));
        json_array_append_new(all, row);
    }
    return all;
}

json_t *match_delays(const struct match *match)
{
    const struct chain *chain = match->chain;
    double *delays = calloc(chain->n_calls + 1, sizeof *delays);
    json_t *rows = json_array();
    for (uint32_t k = 0; delays && k < chain->catalogue->n_classes; k++) {
        uint32_t n = 0;
        for (uint32_t c = 0; c < chain->n_calls; c++)
            if (chain->calls[c].class_index == k)
                delays[n++] = chain->calls[c].delay_s;
        if (n > 0)
            json_array_append_new(
                rows, json_pack("{s:s, s:i, s:f, s:o, s:o}", "class", chain->catalogue->classes[k].name, "n",
                                (int)n, "natural_delay_s", chain->catalogue->classes[k].natural_delay_s,
                                "p50_s", calls_number(calls_quantile(delays, n, 0.5)), "p99_s",
                                calls_number(calls_quantile(delays, n, 0.99))));
    }
    free(delays);
    return rows;
}
