/* A criterion: a level of sound that means something, as data. config/criteria holds them in sets, one a
 * document; daemon/settings/criteria.c loads them. Terms of ISO 18405:2017. */
#ifndef LEVEL_CRITERION_H
#define LEVEL_CRITERION_H

#include "base/mark.h"
#include "base/status.h"
#include "level/weighting.h"
#include <stdbool.h>
#include <stdint.h>

#define CRITERION_NAME_SIZE 64
#define CRITERION_TEXT_SIZE 256
#define CRITERIA_MAX 192
#define CRITERIA_MAX_SETS 16

enum criterion_metric {
    METRIC_PEAK,             /* zero-to-peak, dB re 1 uPa; never weighted */
    METRIC_PEAK_TO_PEAK,     /* dB re 1 uPa; never weighted */
    METRIC_SEL_SINGLE,       /* of one impulse, dB re 1 uPa2 s */
    METRIC_SEL_CUMULATIVE,   /* over a window, dB re 1 uPa2 s */
    METRIC_SPL,              /* dB re 1 uPa, over `average` */
    METRIC_POSITIVE_IMPULSE, /* of a charge: pressure integrated over its first positive part, Pa s */
    METRIC_COUNT
};

/* Over what a cumulative SEL is summed. */
enum criterion_window {
    ACCUMULATE_NOTHING,
    ACCUMULATE_JOB,
    ACCUMULATE_DAY,
    ACCUMULATE_24_H,
    ACCUMULATE_COUNT
};

/* Over what an SPL is a mean. */
enum criterion_average { AVERAGE_NOTHING, AVERAGE_T90, AVERAGE_125_MS, AVERAGE_1_S, AVERAGE_COUNT };

/* Which sounds it judges. Which of the two a job makes is set, never guessed. */
enum criterion_sound { SOUND_IMPULSIVE, SOUND_CONTINUOUS, SOUND_ANY, SOUND_COUNT };

enum criterion_effect {
    EFFECT_MORTALITY,
    EFFECT_INJURY, /* of hearing: permanent threshold shift, auditory injury */
    EFFECT_RECOVERABLE_INJURY,
    EFFECT_TTS, /* temporary threshold shift */
    EFFECT_BEHAVIOUR,
    EFFECT_LIMIT, /* a level that an authority allows at a range, whatever it means for animals */
    EFFECT_COUNT
};

/* Where a number comes from. */
struct basis {
    enum value_mark mark;
    char source[CRITERION_TEXT_SIZE];
};

struct criterion {
    char set[CRITERION_NAME_SIZE]; /* the id of its file */
    char name[CRITERION_NAME_SIZE];
    enum criterion_effect effect;
    char meaning[CRITERION_TEXT_SIZE];
    enum criterion_sound sound;
    enum criterion_metric metric;
    const struct weighting *weighting; /* NULL: unweighted */
    enum criterion_window window;
    enum criterion_average average;
    double value; /* dB re criterion_reference, or Pa s */
    struct basis basis;

    bool disputed; /* sources disagree on the metric: it may be other_metric */
    enum criterion_metric other_metric;
    struct basis disputed_basis;

    double quiet_db; /* effective quiet: what is below is not accumulated. SEL of one impulse, SPL of
                        continuous sound, with the criterion's weighting, at the receiver; NAN: none */
    struct basis quiet_basis;

    double limit_range_m;    /* where the level must be kept; NAN where a distance is asked for instead */
    double limit_exceedance; /* the part of impulses that may exceed it, 0.05 for SEL05; 0: none */
    struct basis limit_basis;

    double flee_m_s; /* speed at which the receiver swims away; 0: it stays */
    struct basis flee_basis;
};

struct criteria_set {
    char id[CRITERION_NAME_SIZE];
    char title[CRITERION_TEXT_SIZE];
    char document[CRITERION_TEXT_SIZE];
    uint32_t year;
};

struct criteria {
    uint32_t n_sets;
    struct criteria_set sets[CRITERIA_MAX_SETS];
    uint32_t n;
    struct criterion items[CRITERIA_MAX];
};

/* The n-th thing that makes a criterion unusable (a weighted peak, a cumulative SEL without a window, an SPL
 * without an average, a group that hears in air ...): STATUS_OUT_OF_RANGE, a sentence and the key it is
 * about; STATUS_OK when there are no more. */
enum status criterion_check(const struct criterion *criterion, uint32_t n, const char **out_key,
                            char out_problem[CRITERION_TEXT_SIZE]);

/* Whether it judges sounds of this kind. */
bool criterion_applies(const struct criterion *criterion, enum criterion_sound sound);
/* Whether any of its numbers is from memory: nobody has checked it against the document. */
bool criterion_unverified(const struct criterion *criterion);

/* "dB" or "Pa s"; the reference of its level, "1 uPa", "1 uPa2 s" or "none"; never NULL. */
const char *criterion_unit(enum criterion_metric metric);
const char *criterion_reference(enum criterion_metric metric);
/* Words of the file and of pages; never NULL. */
const char *criterion_metric_text(enum criterion_metric metric);    /* "peak", "SEL cumulative" ... */
const char *criterion_window_text(enum criterion_window window);    /* "none", "job", "day", "24 h" */
const char *criterion_average_text(enum criterion_average average); /* "none", "T90", "125 ms", "1 s" */
const char *criterion_sound_text(enum criterion_sound sound);       /* "impulsive", "continuous", "any" */
const char *criterion_effect_text(enum criterion_effect effect);    /* "mortality", "injury" ... */

#endif
