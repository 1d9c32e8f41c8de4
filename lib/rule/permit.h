/* The conditions in force, as data. A permit is one file in config/permits; daemon/settings/permit.c loads
 * it. Every value carries its mark (base/mark.h) and its source. What a permit does not state is absent: each
 * part below says how. */
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
#define PERMIT_MAX_PRE_WATCHES 4
#define PERMIT_MAX_BREAKS 4
#define PERMIT_MAX_SPECIES 24
#define PERMIT_MAX_RECORDS 8
#define PERMIT_MAX_CRITERIA 8
#define PERMIT_MAX_VALUES 160
#define PERMIT_GROUP_BIT(group) (UINT32_C(1) << (unsigned)(group))
#define PERMIT_ALL_GROUPS (PERMIT_GROUP_BIT(GROUP_COUNT) - 1)
/* How an animal was found. */
#define PERMIT_SEEN 1U
#define PERMIT_HEARD 2U

enum permit_activity { ACTIVITY_PILING, ACTIVITY_SEISMIC, ACTIVITY_EXPLOSIVES };
enum zone_origin { ORIGIN_PILE, ORIGIN_ARRAY_CENTRE, ORIGIN_ARRAY_EDGE, ORIGIN_CHARGE, ORIGIN_VESSEL };

/* Rising strength; the strongest for the present phase wins. */
enum permit_action { ACTION_LOG, ACTION_PREPARE, ACTION_DELAY, ACTION_HOLD, ACTION_REDUCE, ACTION_STOP };

/* What a call of a group means when nobody knows its distance. There is no default: the permit must say. */
enum unknown_policy { UNKNOWN_NOT_STATED, UNKNOWN_INSIDE, UNKNOWN_ASK_OBSERVER, UNKNOWN_IGNORE };

/* Whether an animal whose species nobody has said counts where a zone names species. */
enum species_policy { SPECIES_NOT_STATED, SPECIES_LISTED, SPECIES_OTHER };

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
    char who[PERMIT_NAME_SIZE]; /* of a value that the site states: who says so; empty for all others */
    enum value_mark mark;
};

/* The pre-watch where the water is deeper than that. An unknown depth takes the longest. */
struct permit_pre_watch {
    double deeper_than_m; /* 0: any depth; the rows are in rising order */
    double minutes;
    bool visual, acoustic; /* which watches must be kept for it to accrue */
};

struct permit_zone {
    char name[PERMIT_NAME_SIZE];
    double radius_m; /* from its origin; INFINITY: any distance */
    enum zone_origin origin;
    double edge_m; /* of the source from its middle, where the origin is the edge: permit_set_edge; else 0 */
    uint32_t groups; /* bit (1u << enum group); the unknown group has its own bit */
    uint32_t found;  /* PERMIT_SEEN, PERMIT_HEARD: how an animal must be found to count */
    bool calf_only;
    double least_number; /* a party of at least so many; 0: any */
    uint32_t n_species;  /* 0: any; else only these, and who is unknown by species_unknown */
    char species[PERMIT_MAX_SPECIES][NOTE_NAME_SIZE];
    enum species_policy species_unknown;
    enum permit_action action[PHASE_COUNT]; /* ACTION_LOG where the permit asks for nothing */
    char clause[PERMIT_TEXT_SIZE];
};

/* A row that names species holds for these in place of their group's row; it stands after that row. */
struct permit_clearance {
    uint32_t groups;
    uint32_t n_species; /* 0: any */
    char species[PERMIT_MAX_SPECIES][NOTE_NAME_SIZE];
    enum species_policy species_unknown;
    double minutes;                       /* since the last detection inside a zone */
    double deeper_than_m, deeper_minutes; /* in place of them where the water is deeper; 0: not stated */
    bool leaving_ends;                    /* seen leaving ends it at once */
    char clause[PERMIT_TEXT_SIZE];
};

/* What the source may do after silence of at most `minutes`; the rows are in rising order, and after the
 * last of them it needs the pre-watch and the soft start. */
struct permit_break {
    double minutes;
    bool limit_included; /* of exactly this length too */
    bool soft_start;     /* by a soft start, without a pre-watch; else as before the silence */
    bool daylight;       /* only by day; in the dark as after the last row */
};

/* A deterrent before the first impulse. */
struct permit_deterrent {
    bool stated;            /* false: the permit requires none */
    double least_minutes;   /* it must have worked so long */
    double longest_minutes; /* and at most so long; INFINITY */
    double gap_minutes;     /* from its end to the first impulse at most; INFINITY */
    double again_minutes;   /* not again before so long after its end; 0 */
    char clause[PERMIT_TEXT_SIZE];
};

struct permit_quieting {
    bool stated; /* a quieting measure must be at work before the first impulse and until the last */
    char clause[PERMIT_TEXT_SIZE];
};

enum step_rule {
    STEP_NONE,
    STEP_DOUBLING, /* the number of active elements at most doubles */
    STEP_LEVEL     /* the level rises by at most largest_step_db from stage to stage */
};

struct permit_soft_start {
    double least_minutes;
    double longest_minutes;         /* INFINITY where the permit sets none */
    double longest_to_line_minutes; /* from its begin to the line's; INFINITY */
    enum step_rule step;
    double largest_step_db;
    double first_energy_percent; /* of the planned energy, at most, at first; 100 */
    uint32_t least_stages;       /* 0: not stated */
    uint32_t bursts; /* 0, or so many bursts of burst_s, each followed by pause_s of silence, stand
                        for the soft start */
    double burst_s, pause_s;
    bool stop_if_possible_else_hold; /* 'stop if possible, otherwise do not increase' */
    bool equal_stages;               /* its stages are of about equal length */
    bool smallest_charge_first;      /* of several charges */
    char clause[PERMIT_TEXT_SIZE];
};

/* Working on between lines. */
struct permit_turn {
    bool stated;
    double longest_minutes;    /* a turn that is expected to last longer: stop at the end of the line */
    bool reduced;              /* it may go on reduced until then; false: stop in every turn */
    double longest_interval_s; /* between two shots; a longer one is silence */
    double step_up_minutes;    /* up again within the last of the turn; 0: not stated */
    char clause[PERMIT_TEXT_SIZE];
};

/* A single small source that works on through a break instead of silence. */
struct permit_mitigation_source {
    bool stated;
    double longest_minutes;
    double longest_interval_s;
    bool soft_start_after; /* full power again by a soft start */
    char clause[PERMIT_TEXT_SIZE];
};

struct permit_test {
    bool stated;
    bool pre_watch;  /* a test needs the pre-watch */
    bool soft_start; /* at full power by a soft start */
    char clause[PERMIT_TEXT_SIZE];
};

/* Vibro piling and relief drilling, and the impact piling that follows directly. */
struct permit_steady {
    bool stated;
    bool pre_watch;  /* they need the pre-watch themselves */
    bool stands;     /* they stand for the pre-watch of what follows */
    bool soft_start; /* what follows needs a soft start */
    char clause[PERMIT_TEXT_SIZE];
};

/* How long the source may sound in one job, breaks not counted. */
struct permit_job {
    bool stated;
    double longest_minutes;
    char clause[PERMIT_TEXT_SIZE];
};

enum dark_start { DARK_START_ALLOWED, DARK_START_ACOUSTIC, DARK_START_NEVER };

/* When a start is allowed at all. What is begun may go on. */
struct permit_start {
    bool stated;
    enum dark_start dark; /* in the dark, or seeing less than least_visibility_m, or a rougher sea */
    double after_sunrise_minutes, before_sunset_minutes; /* day begins and ends so; negative: in twilight */
    double least_visibility_m;                           /* 0: not stated */
    double most_sea_state;                               /* INFINITY */
    double good_watch_minutes;      /* in the dark only after so much good watch ... 0: not stated */
    double good_watch_within_hours; /* ... within so long before, without an order for an animal */
    uint32_t most_orders; /* ... and fewer than this many stops and reductions in 24 h; 0: not stated */
    uint32_t closed_from, closed_to; /* month * 100 + day, both included; 0: no closed season */
    char clause[PERMIT_TEXT_SIZE];
};

/* Working on while the acoustic watch cannot hear. */
struct permit_outage {
    bool stated;
    double diagnose_minutes; /* at first, whatever the conditions */
    double extra_minutes;    /* then, while the conditions hold */
    double day_minutes;      /* in 24 h altogether; INFINITY */
    bool daylight;           /* the conditions: by day; */
    double most_sea_state;   /* a sea no rougher; INFINITY */
    double quiet_minutes;    /* nothing heard alone inside a zone for so long before */
    char clause[PERMIT_TEXT_SIZE];
};

#define OVERRIDE_LIFE 1U
#define OVERRIDE_REFUSAL 2U
#define OVERRIDE_INSTABILITY 4U

/* Working on for the sake of safety against an order. */
struct permit_override {
    uint32_t reasons;          /* OVERRIDE_* that the permit allows; life always is */
    enum permit_action leaves; /* what is asked for then instead of a stop: ACTION_REDUCE, ACTION_LOG */
    char clause[PERMIT_TEXT_SIZE];
};

struct permit_staff {
    uint32_t least_visual, least_acoustic; /* people, where that watch must be kept; 1 */
    double longest_hours;                  /* on watch at a stretch; INFINITY */
    double rest_hours;                     /* between two of them; 0 */
    double day_hours;                      /* in 24 h; INFINITY */
    char clause[PERMIT_TEXT_SIZE];
};

/* Something that is due to the authority. */
struct permit_record {
    char what[PERMIT_TEXT_SIZE];
    double within_hours; /* 0: at once */
};

struct permit {
    char id[PERMIT_NAME_SIZE];
    char title[PERMIT_TEXT_SIZE];
    char document[PERMIT_TEXT_SIZE];
    char revision[PERMIT_TEXT_SIZE];
    char document_sha256[65];       /* of the document that the values were checked against; empty */
    char applies[PERMIT_TEXT_SIZE]; /* where and to what, in words */
    char ended[32]; /* since when the guideline holds no more ("2026-04-19"); empty: in force */
    uint32_t year;
    bool demonstration; /* shortened for tests and demonstrations: never for work */
    enum permit_activity activity;

    uint32_t n_pre_watches;
    struct permit_pre_watch pre_watches[PERMIT_MAX_PRE_WATCHES];
    double pre_watch_hole_minutes; /* a longer hole in the watch starts it anew; 0: as long as a break */
    char pre_watch_clause[PERMIT_TEXT_SIZE];

    uint32_t n_zones;
    struct permit_zone zones[PERMIT_MAX_ZONES];
    uint32_t n_clearances;
    struct permit_clearance clearances[PERMIT_MAX_CLEARANCES];
    enum unknown_policy unknown[GROUP_COUNT];
    char unknown_clause[PERMIT_TEXT_SIZE];

    struct permit_soft_start soft_start;
    uint32_t n_breaks;
    struct permit_break breaks[PERMIT_MAX_BREAKS];
    enum break_watch break_watch;
    char break_clause[PERMIT_TEXT_SIZE];
    struct permit_deterrent deterrent;
    struct permit_quieting quieting;
    struct permit_turn turn;
    struct permit_mitigation_source mitigation_source;
    struct permit_test test;
    struct permit_steady steady;
    struct permit_job job;
    struct permit_start start;
    struct permit_outage outage;
    struct permit_override override;
    struct permit_staff staff;
    double post_watch_minutes; /* after the last impulse; 0: as long as a break */
    char post_watch_clause[PERMIT_TEXT_SIZE];
    uint32_t n_criteria; /* noise limits: ids of criteria files that the site must hold the source against */
    char criteria[PERMIT_MAX_CRITERIA][PERMIT_NAME_SIZE];
    enum permit_action limit_action; /* what is asked for where one is passed: log, hold, reduce, stop */
    uint32_t n_records;
    struct permit_record records[PERMIT_MAX_RECORDS];

    double confirm_countdown_s; /* 0 where the text says immediate */
    double p_inside_prepare;    /* from this probability inside: delay or ask */
    double p_inside_act;        /* from this probability inside: the zone's action */

    uint32_t n_values;
    struct permit_value values[PERMIT_MAX_VALUES]; /* every value with its mark, for people and the ledger */
};

/* The n-th thing that makes the permit unusable (no zone, a group without unknown policy, a timer without
 * bound, a phase that nobody can leave ...): STATUS_OUT_OF_RANGE and "KEY: a sentence" in out_problem, where
 * KEY is that of the permit file ("zones[0].radius_m", "break"); call with n = 0, 1, 2 ...; STATUS_OK when
 * there are no more. */
enum status permit_check(const struct permit *permit, uint32_t n, char out_problem[PERMIT_TEXT_SIZE]);

/* The n-th thing that the permit asks of people and that the watch does not look after, in words; false where
 * there are no more. */
bool permit_get_unwatched(const struct permit *permit, uint32_t n, char out[PERMIT_TEXT_SIZE]);

/* Distances are stated from the source's middle: says how far its edge is from there. */
void permit_set_edge(struct permit *permit, double half_length_m);
/* How far from the source's middle the zone reaches. */
double permit_zone_reach_m(const struct permit_zone *zone);
/* The clearance time at that depth; NAN: unknown, the longest. */
double permit_clearance_minutes(const struct permit_clearance *clearance, double depth_m);
/* The pre-watch at that depth; NAN: unknown, the longest. */
const struct permit_pre_watch *permit_pre_watch_at(const struct permit *permit, double depth_m);
/* Silence of up to this length is a break, after which no pre-watch is needed, by day or in the dark. */
const struct permit_break *permit_last_break(const struct permit *permit, bool dark);

/* Words of the file and of pages; never NULL. */
const char *permit_action_text(enum permit_action action);
const char *permit_activity_text(enum permit_activity activity); /* "piling", "seismic", "explosives" */
const char *permit_origin_text(enum zone_origin origin);         /* "pile", "array centre" ... */
const char *permit_unknown_text(enum unknown_policy policy);     /* "inside", "ask observer", "ignore" */
const char *permit_break_watch_text(enum break_watch worth);     /* "nothing", "counts", "stands" */
const char *permit_mark_text(enum value_mark mark);              /* "read", "secondary", "memory, high" ... */

#endif
