/* What makes a criterion usable, and its words. */
#include "level/criterion.h"
#include <math.h>
#include <stdio.h>
#include <string.h>

#define WORD_OF(table, value)                                                                                \
    ((size_t)(value) < sizeof(table) / sizeof((table)[0]) ? (table)[(size_t)(value)] : "")

const char *criterion_metric_text(enum criterion_metric metric)
{
    static const char *const words[METRIC_COUNT] = {"peak",           "peak-to-peak", "SEL single",
                                                    "SEL cumulative", "SPL",          "positive impulse"};
    return WORD_OF(words, metric);
}

const char *criterion_window_text(enum criterion_window window)
{
    static const char *const words[ACCUMULATE_COUNT] = {"none", "job", "day", "24 h"};
    return WORD_OF(words, window);
}

const char *criterion_average_text(enum criterion_average average)
{
    static const char *const words[AVERAGE_COUNT] = {"none", "T90", "125 ms", "1 s"};
    return WORD_OF(words, average);
}

const char *criterion_sound_text(enum criterion_sound sound)
{
    static const char *const words[SOUND_COUNT] = {"impulsive", "continuous", "any"};
    return WORD_OF(words, sound);
}

const char *criterion_effect_text(enum criterion_effect effect)
{
    static const char *const words[EFFECT_COUNT] = {
        "mortality", "injury", "recoverable injury", "temporary threshold shift", "behaviour", "limit"};
    return WORD_OF(words, effect);
}

const char *criterion_unit(enum criterion_metric metric)
{
    return metric == METRIC_POSITIVE_IMPULSE ? "Pa s" : "dB";
}

const char *criterion_reference(enum criterion_metric metric)
{
    static const char *const words[METRIC_COUNT] = {"1 uPa",    "1 uPa", "1 uPa2 s",
                                                    "1 uPa2 s", "1 uPa", "none"};
    return WORD_OF(words, metric);
}

bool criterion_applies(const struct criterion *criterion, enum criterion_sound sound)
{
    return criterion->sound == SOUND_ANY || criterion->sound == sound;
}

static bool is_memory(enum value_mark mark)
{
    return mark != MARK_READ && mark != MARK_SECONDARY;
}

bool criterion_unverified(const struct criterion *c)
{
    return is_memory(c->basis.mark) || (c->weighting && is_memory(c->weighting->mark)) ||
           (c->disputed && is_memory(c->disputed_basis.mark)) ||
           (!isnan(c->quiet_db) && is_memory(c->quiet_basis.mark)) ||
           (!isnan(c->limit_range_m) && is_memory(c->limit_basis.mark)) ||
           (c->flee_m_s > 0 && is_memory(c->flee_basis.mark));
}

/* Nobody may rely on a low-confidence memory or an invention. */
static bool bad_basis(const struct basis *basis)
{
    return (unsigned)basis->mark >= MARK_MEMORY_LOW || !*basis->source;
}

struct rule_text {
    bool broken;
    const char *key, *text;
};

static bool is_sel(enum criterion_metric metric)
{
    return metric == METRIC_SEL_SINGLE || metric == METRIC_SEL_CUMULATIVE;
}

enum status criterion_check(const struct criterion *c, uint32_t n, const char **out_key,
                            char out_problem[CRITERION_TEXT_SIZE])
{
    bool is_impulse = c->metric == METRIC_POSITIVE_IMPULSE;
    bool has_window = c->window != ACCUMULATE_NOTHING, is_cumulative = c->metric == METRIC_SEL_CUMULATIVE;
    bool may_weigh = is_sel(c->metric) || c->metric == METRIC_SPL;
    bool has_limit = !isnan(c->limit_range_m), has_quiet = !isnan(c->quiet_db), flees = c->flee_m_s != 0;
    double low = is_impulse ? 1e-3 : 60, high = is_impulse ? 1e6 : 300;
    const struct rule_text rules[] = {
        {!*c->name, "name", "is empty"},
        {(unsigned)c->effect >= EFFECT_COUNT, "effect", "is none"},
        {(unsigned)c->sound >= SOUND_COUNT, "sound", "is none"},
        {(unsigned)c->metric >= METRIC_COUNT, "metric", "is none"},
        {!(c->value >= low && c->value <= high), "value",
         "is out of range; allowed: 60 to 300 dB, 0.001 to 1e6 Pa s"},
        {c->weighting && !may_weigh, "weighting", "is not \"none\"; only SEL and SPL are weighted"},
        {c->weighting && c->weighting->in_air, "weighting",
         "is of a group in air, re 20 uPa; levels here are in water"},
        {is_cumulative && !has_window, "window", "is \"none\"; allowed for SEL cumulative: job, day, 24 h"},
        {!is_cumulative && has_window, "window", "is given; only SEL cumulative has one"},
        {c->metric == METRIC_SPL && c->average == AVERAGE_NOTHING, "average",
         "is \"none\"; allowed for SPL: T90, 125 ms, 1 s"},
        {c->metric != METRIC_SPL && c->average != AVERAGE_NOTHING, "average", "is given; only SPL has one"},
        {c->average == AVERAGE_T90 && c->sound != SOUND_IMPULSIVE, "average",
         "is \"T90\", which only an impulse has"},
        {c->metric == METRIC_SEL_SINGLE && c->sound != SOUND_IMPULSIVE, "sound",
         "is not \"impulsive\"; only an impulse has a single SEL"},
        {is_impulse && c->sound != SOUND_IMPULSIVE, "sound",
         "is not \"impulsive\"; only a charge has a positive impulse"},
        {c->disputed && (c->other_metric == c->metric ||
                         strcmp(criterion_reference(c->other_metric), criterion_reference(c->metric)) != 0),
         "disputed", "is no other metric of the same reference"},
        {has_quiet && !is_cumulative, "quiet", "is given; only SEL cumulative has one"},
        {has_quiet && !(c->quiet_db >= 60 && c->quiet_db < c->value), "quiet",
         "is not from 60 dB to the value"},
        {has_limit && !(c->limit_range_m >= 1 && c->limit_range_m <= 100000), "limit",
         "has a range that is not from 1 to 100000 m"},
        {has_limit && !(c->limit_exceedance >= 0 && c->limit_exceedance < 1), "limit",
         "has an exceedance that is not from 0 to below 1"},
        {(c->effect == EFFECT_LIMIT) != has_limit, "effect",
         "is \"limit\" without the group `limit`, or another effect with it"},
        {flees && !(is_cumulative && c->flee_m_s > 0 && c->flee_m_s <= 20), "flee",
         "is not SEL cumulative with a speed up to 20 m/s"},
        {bad_basis(&c->basis), "value", "has no source, or rests on an invention or a low-confidence memory"},
        {c->disputed && bad_basis(&c->disputed_basis), "disputed",
         "has no source, or rests on a low-confidence memory"},
        {has_quiet && bad_basis(&c->quiet_basis), "quiet",
         "has no source, or rests on a low-confidence memory"},
        {has_limit && bad_basis(&c->limit_basis), "limit",
         "has no source, or rests on a low-confidence memory"},
        {flees && bad_basis(&c->flee_basis), "flee", "has no source, or rests on a low-confidence memory"},
    };
    for (size_t i = 0; i < sizeof rules / sizeof rules[0]; i++)
        if (rules[i].broken && n-- == 0) {
            *out_key = rules[i].key;
            snprintf(out_problem, CRITERION_TEXT_SIZE, "%s", rules[i].text);
            return STATUS_OUT_OF_RANGE;
        }
    return STATUS_OK;
}
