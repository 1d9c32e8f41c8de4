/* The conditions in force, as data. A permit is one file in config/permits; daemon/settings/permit.c loads
 * it. Every value carries its mark (base/mark.h) and its source. */
#ifndef RULE_PERMIT_H
#define RULE_PERMIT_H

#include "base/mark.h"
#include "base/status.h"
#include "flow.h"
#include <stdbool.h>
#include <stdint.h>

#define PERMIT_NAME_SIZE 64
#define PERMIT_TEXT_SIZE 256
#define PERMIT_MAX_ZONES 8
#define PERMIT_MAX_CLEARANCES 8
#define PERMIT_MAX_VALUES 96
#define PERMIT_GROUP_BIT(group) (UINT32_C(1) << (unsigned)(group))
#define PERMIT_ALL_GROUPS (PERMIT_GROUP_BIT(GROUP_COUNT) - 1)

enum permit_activity { ACTIVITY_PILING, ACTIVITY_SEISMIC, ACTIVITY_EXPLOSIVES };
enum zone_origin { ORIGIN_PILE, ORIGIN_ARRAY_CENTRE, ORIGIN_ARRAY_EDGE, ORIGIN_CHARGE, ORIGIN_VESSEL };

/* Rising strength; the strongest for the present phase wins. */
enum permit_action { ACTION_LOG, ACTION_PREPARE, ACTION_DELAY, ACTION_HOLD, ACTION_REDUCE, ACTION_STOP };

/* What a call of a group means when nobody knows its distance. There is no default: the permit must say. */
enum unknown_policy { UNKNOWN_NOT_STATED, UNKNOWN_INSIDE, UNKNOWN_ASK_OBSERVER, UNKNOWN_IGNORE };

/* What a watch that was kept through a break is worth afterwards. */
enum break_watch {
    BREAK_WATCH_NOTHING, /* the pre-watch begins anew when the break has become too long */
    BREAK_WATCH_COUNTS,  /* the watch kept since the source fell silent counts towards it */
    BREAK_WATCH_STANDS   /* a watch kept without a hole through work and break stands for it */
};

struct permit_value {
    char key[PERMIT_NAME_SIZE];
    char text[PERMIT_TEXT_SIZE]; /* the value as written */
    char source[PERMIT_TEXT_SIZE];
    enum value_mark mark;
};

struct permit_zone {
    char name[PERMIT_NAME_SIZE];
    double radius_m; /* INFINITY: any distance */
    enum zone_origin origin;
    uint32_t groups; /* bit (1u << enum group); the unknown group has its own bit */
    bool calf_only;
    enum permit_action action[PHASE_COUNT]; /* ACTION_LOG where the permit asks for nothing */
    char clause[PERMIT_TEXT_SIZE];
};

struct permit_clearance {
    uint32_t groups;
    double minutes;    /* since the last detection inside a zone */
    bool leaving_ends; /* seen leaving ends it at once */
    char clause[PERMIT_TEXT_SIZE];
};

struct permit {
    char id[PERMIT_NAME_SIZE];
    char title[PERMIT_TEXT_SIZE];
    char document[PERMIT_TEXT_SIZE];
    uint32_t year;
    bool demonstration; /* shortened for tests and demonstrations: never for work */
    enum permit_activity activity;

    double pre_watch_minutes;
    bool pre_watch_visual, pre_watch_acoustic; /* which watches must be kept for it to accrue */
    double pre_watch_hole_minutes; /* a longer hole in the watch starts it anew; 0: as long as a break */
    char pre_watch_clause[PERMIT_TEXT_SIZE];

    uint32_t n_zones;
    struct permit_zone zones[PERMIT_MAX_ZONES];
    uint32_t n_clearances;
    struct permit_clearance clearances[PERMIT_MAX_CLEARANCES];
    enum unknown_policy unknown[GROUP_COUNT];
    char unknown_clause[PERMIT_TEXT_SIZE];

    double soft_start_min_minutes;
    double soft_start_max_minutes; /* INFINITY where the permit sets none */
    char soft_start_clause[PERMIT_TEXT_SIZE];
    bool stop_if_possible_else_hold; /* during soft start: 'stop if possible, otherwise do not increase' */

    double break_minutes;     /* longer silence is a break that needs pre-watch and soft start again */
    bool break_limit_resumes; /* after silence of exactly this length the source may still resume */
    enum break_watch break_watch;
    char break_clause[PERMIT_TEXT_SIZE];

    double confirm_countdown_s; /* 0 where the text says immediate */
    double p_inside_prepare;    /* from this probability inside: delay or ask */
    double p_inside_act;        /* from this probability inside: the zone's action */

    uint32_t n_values;
    struct permit_value values[PERMIT_MAX_VALUES]; /* every value with its mark, for people and the ledger */
};

/* The first thing that makes the permit unusable (no zone, a group without unknown policy, a timer without
 * bound ...): STATUS_OUT_OF_RANGE and a sentence in out_problem; call with n = 0, 1, 2 ... for the n-th
 * problem; STATUS_OK when there are no more. */
enum status permit_check(const struct permit *permit, uint32_t n, char out_problem[PERMIT_TEXT_SIZE]);

/* Words of the file and of pages; never NULL. */
const char *permit_action_text(enum permit_action action);
const char *permit_activity_text(enum permit_activity activity); /* "piling", "seismic", "explosives" */
const char *permit_origin_text(enum zone_origin origin);         /* "pile", "array centre" ... */
const char *permit_unknown_text(enum unknown_policy policy);     /* "inside", "ask observer", "ignore" */
const char *permit_break_watch_text(enum break_watch worth);     /* "nothing", "counts", "stands" */
const char *permit_mark_text(enum value_mark mark);              /* "read", "secondary", "memory, high" ... */

#endif
