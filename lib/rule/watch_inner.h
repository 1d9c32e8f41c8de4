/* What the files of the watch share; nobody else includes it.
 *
 *   watch.c          create, push, advance: time, and what is due when
 *   watch_note.c     what people enter
 *   watch_contact.c  calls, sightings, verdicts: contacts and their episodes
 *   watch_whose.c    what a person says of whose impulses these are
 *   watch_chain.c    the train of an impulse that a person names
 *   watch_source.c   what the source does, as said and as heard, and what departs from the permit
 *   watch_effort.c   who is on watch, what was heard, how much of the pre-watch is done
 *   watch_phase.c    the table of phases and triggers, and the reasons
 *   watch_advice.c   what each station is told
 *   watch_conditions.c  the conditions beside pre-watch and zones, each a file condition_NAME.c
 *   watch_say.c      outcomes and their ids
 *   watch_view.c     what people see
 */
#ifndef RULE_WATCH_INNER_H
#define RULE_WATCH_INNER_H

#include "rule/blows.h"
#include "rule/contact.h"
#include "rule/spans.h"
#include "rule/surroundings.h"
#include "rule/watch.h"
#include "rule/whose.h"

#define WATCH_MAX_CHANNELS (WATCH_MAX_STREAMS * FLOW_MAX_CHANNELS)

/* Why something is so, and the entries that it rests on. */
struct why {
    char text[FLOW_TEXT_SIZE];
    char clause[FLOW_TEXT_SIZE];
    uint32_t n_causes;
    char causes[FLOW_MAX_CAUSES][FLOW_ID_SIZE];
};

/* Who is on watch, and how much of the pre-watch is done. */
struct effort {
    uint32_t n_people;
    struct watch_person people[WATCH_MAX_PEOPLE];
    uint32_t n_checks;
    struct watch_check checks[WATCH_MAX_CHECKS];
    bool outage;       /* the program is not running */
    bool accruing;     /* since from_ns */
    int64_t from_ns;   /* of the present stretch */
    struct spans kept; /* the stretches before it */
    int64_t credit_ns; /* at mark_ns */
    int64_t mark_ns;
    int64_t hole_ns;                          /* since when the watch is not kept; -1 while it is */
    struct spans missed;                      /* the stretches of that before, lately */
    struct spans unheard[WATCH_MAX_CHANNELS]; /* of each channel, lately */
    struct spans deaf;                        /* when no listening channel heard, lately */
    char deaf_id[FLOW_ID_SIZE];
};

/* What the source does. */
struct source {
    enum phase said; /* PHASE_OFF, PHASE_BREAK for 'stopped', else the phase that the crew entered */
    int64_t said_ns; /* -1: never */
    char said_id[FLOW_ID_SIZE];
    bool heard;         /* impulses are being heard */
    int64_t impulse_ns; /* the last one */
    struct blows blows; /* those that were counted: one blow is heard by several streams */
    struct blows reference[WATCH_MAX_STREAMS]; /* by each stream's reference channel */
    double reference_m[WATCH_MAX_STREAMS];     /* its range; 0 before its first blow */
    char impulse_id[FLOW_ID_SIZE];
    uint32_t n_unsaid;   /* impulses since the last silence that nobody has spoken for */
    bool heard_in_phase; /* since the source began to sound */
    bool contradicted;   /* a finding about the present contradiction has been made */
    char contradiction[FLOW_ID_SIZE],
        contradicting[FLOW_ID_SIZE]; /* the last such finding, and its impulse */
    bool too_long;                   /* a finding about the present soft start has been made */
    int64_t soft_start_ns, quiet_ns; /* when the soft start began, when silence did; -1 */
    enum phase before_break;
    enum permit_action unallowed; /* what a start that was not allowed calls for */
    char unallowed_why[FLOW_TEXT_SIZE];
    uint32_t unallowed_contact; /* whose stop was not followed; 0 for none */
    char job[IMPULSE_JOB_SIZE];
    uint32_t n_impulses;
    int64_t on_ns; /* when it was last said to sound after silence; -1 */
    struct whose whose[WATCH_MAX_CHANNELS];
};

#define WATCH_MAX_HEARD 65536u /* impulses that a person may speak of */

/* An impulse that was heard. */
struct heard {
    int64_t time_ns, struck_ns; /* struck: when its sound left the source (rule/blows.h) */
    uint64_t counter;
    uint32_t run;
    float level_db; /* NAN where it has none */
    uint8_t stream, channel, whose;
    bool beside; /* of the reference channel */
    bool named;  /* it is of the train that a note is about, which is being taken */
};

/* condition_deterrent.c: when it was last switched on, and off since; -1 */
struct deterrent {
    int64_t on_ns, off_ns;
    bool too_long; /* a finding about the present time has been made */
    char id[FLOW_ID_SIZE];
};

/* condition_job.c: how long the source has sounded in the job, and since when it does; -1 */
struct job_state {
    int64_t sounded_ns, since_ns;
    bool too_long; /* a finding about it has been made */
    char name[NOTE_NAME_SIZE];
};

/* condition_quieting.c */
struct quieting_state {
    bool on;
    char id[FLOW_ID_SIZE];
};

#define START_MAX_ORDERS 100 /* as many as a permit can speak of */

/* condition_start.c */
struct start_state {
    struct spans good;     /* stretches of watch by day in good conditions */
    int64_t good_since_ns; /* -1: not now */
    uint32_t n_orders;     /* the newest, oldest first */
    int64_t order_ns[START_MAX_ORDERS];
    char id[FLOW_ID_SIZE]; /* of the newest word on the weather */
};

/* condition_outage.c */
struct outage_state {
    int64_t since_ns; /* -1: somebody listens */
    struct spans past;
    int64_t heard_ns; /* when an animal was last only heard; -1 */
};

/* condition_turn.c */
struct turn_state {
    double expected_minutes;
    int64_t last_ns; /* of the newest impulse in a turn or of a small source; -1 */
    int64_t soft_ns; /* when the soft start began that leads to a line; -1 */
    int64_t up_ns;   /* when the power went up in a turn; -1 */
    bool said_apart;
    char id[FLOW_ID_SIZE];
};

/* condition_override.c */
struct override_state {
    bool on, allowed;
    char id[FLOW_ID_SIZE];
};

#define STAFF_MAX 32

/* condition_staff.c */
struct shift {
    char name[NOTE_NAME_SIZE];
    int64_t on_ns, off_ns; /* -1 */
    int64_t stretch_ns;    /* on watch before without a rest that was long enough */
    bool full;             /* the stretch was as long as it may be */
    bool said_long, said_day;
    struct spans past;
    char id[FLOW_ID_SIZE];
};
struct staff_state {
    uint32_t n;
    struct shift all[STAFF_MAX];
};

/* Impulses since something was said; -1: it was not. */
struct stop_count {
    int64_t since_ns;
    uint32_t n_impulses;
};

/* condition_stop.c: the stop that the crew was told, until the source is silent */
struct stop_state {
    char id[FLOW_ID_SIZE]; /* empty: none */
    char clause[FLOW_TEXT_SIZE];
    struct stop_count given, passed, acknowledged;
    int64_t last_ns; /* of the impulses after it; -1 */
    char impulse_id[FLOW_ID_SIZE];
};

/* condition_charge.c: the charge of the job */
struct charge_state {
    double charge_kg, donor_kg; /* NAN or 0: nobody has said */
    int64_t due_ns;             /* when it is judged; -1: it has not gone off */
    bool judged, clipped;
    double peak_db, range_m; /* of its loudest blow */
    double largest_kg;       /* that has gone off since the last pre-watch; 0 */
    char id[FLOW_ID_SIZE], impulse_id[FLOW_ID_SIZE];
};

/* condition_quality.c: since when the watch is less than the permit needs; -1 */
struct quality_state {
    int64_t since_ns;
    bool found;
};

#define LIMIT_MAX_PENDING 4

/* A finding of the tally's: a limit is passed, or such a finding is answered. */
struct limit_finding {
    bool answered; /* what was passed is not, since a person has said whose impulses these are */
    char id[FLOW_ID_SIZE];
    char job[IMPULSE_JOB_SIZE], text[FLOW_TEXT_SIZE], clause[FLOW_TEXT_SIZE];
};

/* condition_limit.c */
struct limit_state {
    bool on; /* a limit is passed, and the permit asks for something */
    struct limit_finding passed;
    uint32_t n_pending; /* until the end of the push in progress, or of the next */
    struct limit_finding pending[LIMIT_MAX_PENDING];
};

#define RISE_LEVELS 10

/* condition_soft_start.c: how the present soft start rises */
struct rise {
    bool on, said_step;
    double planned_kj, number; /* number: of the present stage, NAN before the first */
    uint32_t n_stages, n_bursts, n_first, n_levels;
    int64_t stage_ns, shortest_ns, longest_ns;           /* the present stage's begin; the stages before it */
    int64_t last_ns;                                     /* the newest impulse; -1 */
    double first_db[RISE_LEVELS], level_db[RISE_LEVELS]; /* the first; the newest, a ring */
};

/* watch_plan.c */
struct plan_state {
    int64_t planned_ns; /* -1: nothing is planned */
    char id[FLOW_ID_SIZE];
};

enum station { STATION_OBSERVER, STATION_CREW, STATION_COUNT };

/* Why an advice is given; with word, contact and confirmed it says whether it is the same advice. */
enum advice_ground {
    GROUND_NONE,
    GROUND_OFF,
    GROUND_PRE_WATCH,
    GROUND_RELEASE,
    GROUND_RELEASED,
    GROUND_CONTACT,
    GROUND_DEAF,
    GROUND_UNWATCHED,
    GROUND_SOUND,
    GROUND_UNALLOWED,
    GROUND_BREAK,
    GROUND_STOPPED,
    GROUND_ENDED,
    GROUND_CONDITION
};

struct advice_key {
    enum advice_word word;
    enum advice_ground ground;
    uint32_t contact;   /* 0: none */
    uint32_t condition; /* its number; 0: none */
    bool confirmed;
};

struct watch {
    struct watch_setup setup;
    const struct permit *permit;
    const struct outcome_sink *sink; /* of the call in progress */
    int64_t now_ns;
    uint32_t run;
    uint64_t counters[OUTCOME_CORRECTION + 1];

    enum phase phase;
    int64_t phase_since_ns;
    struct why phase_why;
    char phase_id[FLOW_ID_SIZE];
    unsigned phase_on;             /* whether it rests on entries, on sound (watch_say.c) */
    char finding_id[FLOW_ID_SIZE]; /* the last one's */
    char released_by[NOTE_NAME_SIZE];
    char release_id[FLOW_ID_SIZE];
    struct why recent; /* the event that is being taken, as a reason; empty when a timer is */
    struct why let_go; /* why the last contact no longer holds anything back */
    int64_t let_go_ns; /* and since when */

    struct ranges ranges;
    struct effort effort;
    struct source source;
    struct heard *heard; /* [WATCH_MAX_HEARD], a ring, owned */
    uint64_t n_heard;    /* in all */
    uint64_t job_heard;  /* of them before the job */
    struct contacts contacts;
    struct surroundings surroundings;
    struct deterrent deterrent;
    struct quieting_state quieting;
    struct job_state job;
    struct start_state start;
    struct outage_state outage;
    struct turn_state turn;
    struct override_state override;
    struct staff_state staff;
    struct rise rise;
    struct stop_state stop;
    struct charge_state charge;
    struct limit_state limit;
    struct quality_state quality;
    struct plan_state plan;
    char unanswered[FLOW_ID_SIZE]; /* the advice that nobody answered and that was found so */

    struct advice_key keys[STATION_COUNT];
    uint32_t n_advice; /* newest first */
    struct watch_advice advice[WATCH_MAX_ADVICE];
};

/* watch_say.c: outcomes, their counters and ids */
void why_reset(struct why *why, const char *clause, const char *format, ...)
    __attribute__((format(printf, 3, 4)));
/* The same with a text as it is. */
void why_set(struct why *why, const char *clause, const char *text);
/* Empty ids and ids that are there already are left out, as are those beyond the room. */
void why_add_cause(struct why *why, const char *id);
void why_add_contact(struct why *why, const struct contact *contact);
void watch_say_event(struct watch *watch, const struct event *event);
void watch_say_contact(struct watch *watch, struct contact *contact);
void watch_say_phase(struct watch *watch, enum phase phase, const struct why *why);
void watch_say_correction(struct watch *watch, const struct correction_outcome *correction);
void watch_say_finding(struct watch *watch, const char *code, const char *grade, const struct why *why);
/* Gives the advice to the station; it becomes the station's newest. */
void watch_say_advice(struct watch *watch, const struct advice_outcome *advice);

/* watch_effort.c */
bool effort_on_watch(const struct watch *watch, const char *person); /* as visual or acoustic observer */
bool effort_anybody(const struct watch *watch);                      /* any observer at all */
/* Whether all whom the permit needs are on watch; if not, who is missing, in words. */
bool effort_kept(const struct watch *watch, const char **out_missing);
/* Whether that watch alone ("visual", "acoustic") is kept, by as many as the permit wants. */
bool effort_kept_as(const struct watch *watch, const char *as);
/* Where it is not: that nobody, or too few, are on watch, in words. */
const char *effort_missing_as(const struct watch *watch, const char *as);
void effort_sign_on(struct watch *watch, const struct note *note);
void effort_sign_off(struct watch *watch, const struct note *note);
void effort_unheard(struct watch *watch, const struct event *event);
/* Whether nothing has been heard for so long that nothing can be said, where the permit needs ears. */
bool effort_deaf(const struct watch *watch);
/* The row of the pre-watch that is in force: by the depth. */
const struct permit_pre_watch *effort_pre_watch(const struct watch *watch);
int64_t effort_needed_ns(const struct watch *watch);
bool effort_complete(const struct watch *watch);
void effort_accrue(struct watch *watch, int64_t to_ns); /* lets time pass */
void effort_update(struct watch *watch);                /* after anything has changed */
void effort_begin_anew(struct watch *watch);
void effort_outage(struct watch *watch, bool outage);
int64_t effort_due_ns(const struct watch *watch); /* INT64_MAX: nothing */
/* When the pre-watch will be complete if nothing changes; -1 where it does not accrue. */
int64_t effort_ready_ns(const struct watch *watch);
/* "Ann (visual), Bo (acoustic)". */
void effort_names(const struct watch *watch, char out[FLOW_TEXT_SIZE]);

/* watch_source.c */
void source_reset(struct source *source);
bool source_sounds(enum phase phase);
void source_note(struct watch *watch, const struct note *note);
void source_job(struct watch *watch, const struct note *note);
/* Whose impulse it is, and of which job: before the event goes out. */
void source_mark_impulse(struct watch *watch, struct event *event);
/* How far away the source is from the channel, NAN where nobody knows. */
double watch_range_m(const struct watch *watch, uint32_t stream, const struct impulse *impulse);
void source_take_impulse(struct watch *watch, const struct event *event);
void source_settle(struct watch *watch); /* silence, and a soft start that is too long */
int64_t source_due_ns(const struct watch *watch);
/* The longest silence after which no pre-watch is needed, by day or in the dark. */
const struct permit_break *source_break(const struct watch *watch);
/* The row of the breaks that the present silence is in; the longest beyond it. */
const struct permit_break *source_break_row(const struct watch *watch);
/* The first moment at which silence has been too long for a break. */
int64_t source_break_over_ns(const struct watch *watch);
/* A stop for a contact ends by time while the source still sounds: it stays, until the source stops. */
void source_keep_stop(struct watch *watch, const struct contact *contact);
void source_enter_phase(struct watch *watch, enum phase from, enum phase to); /* findings, times */

/* watch_conditions.c */
/* The first condition after number `after` (0: of all) that holds a start back now: its number, from 1; why,
 * and until when at the earliest (-1: unknown). 0 where there is none. */
unsigned conditions_hold(const struct watch *watch, unsigned after, struct why *why, int64_t *until_ns);
/* The strongest that they ask for while the source sounds, and why; ACTION_LOG for nothing. */
enum permit_action conditions_ask(const struct watch *watch, struct why *why);
int64_t conditions_due_ns(const struct watch *watch);
void conditions_take_note(struct watch *watch, const struct note *note);
void conditions_take_impulse(struct watch *watch, const struct event *event);
void conditions_enter_phase(struct watch *watch, enum phase from, enum phase to);
void conditions_settle(struct watch *watch);
void conditions_follow(struct watch *watch);
/* The source begins to sound: a finding for each that holds it back. */
void conditions_judge_start(struct watch *watch);
/* Whether the source may enter that phase only after a pre-watch (condition_test.c). */
bool conditions_need_pre_watch(const struct watch *watch, enum phase to);
/* What is left of an action while an override is in force (condition_override.c). */
enum permit_action override_limit(const struct watch *watch, enum permit_action action);
/* A finding of the tally's waits (condition_limit.c); whether any waited, and is taken. */
void limit_keep(struct watch *watch, const struct outcome *finding);
bool limit_take_pending(struct watch *watch);
/* The program stops running: a stretch of watch in good conditions ends (condition_start.c). */
void start_end_stretch(struct watch *watch);
void conditions_show(const struct watch *watch, struct watch_view *view);

/* watch_whose.c */
/* The place of a channel among all; unknown ones share the first's. */
size_t whose_place(uint32_t stream, uint32_t channel);
void whose_keep(struct watch *watch, const struct event *event, double level_db, int64_t struck_ns);
/* watch_chain.c: names the impulses of the same channel that keep the rhythm and the level of that one, as
 * far back and on as they can be followed. */
void whose_name_train(struct watch *watch, uint64_t token);
/* An impulse in the ring, and the oldest that it holds. */
struct heard *whose_heard(const struct watch *watch, uint64_t token);
uint64_t whose_oldest(const struct watch *watch);
void whose_note(struct watch *watch, const struct note *note);

/* watch_contact.c */
void contact_take_call(struct watch *watch, const struct event *event);
void contact_take_sighting(struct watch *watch, const struct note *note);
void contact_take_distance(struct watch *watch, const struct note *note);
void contact_take_verdict(struct watch *watch, const struct note *note);
void contact_expire(struct watch *watch);  /* clearance times that are over, contacts that have gone quiet */
void contact_present(struct watch *watch); /* puts new ones to the observer, passes others to the crew */
int64_t contact_due_ns(const struct watch *watch);
/* What the contact asks for in the present phase. */
enum permit_action contact_wanted(const struct watch *watch, const struct contact *contact);
/* Whether the permit could ask for something of an animal that is heard or seen in this phase. */
bool contact_phase_asks(const struct watch *watch);
/* Whether an observer on watch has confirmed it, or put it inside. */
bool contact_is_vouched(const struct contact *contact);
/* The contact that asks for most: of those that went to the crew, or of all that were put to the observer; of
 * several a confirmed one. */
const struct contact *contact_lead(const struct watch *watch, bool crew);
/* The first that holds the start back; `questions` says whether open questions count. NULL for none. */
const struct contact *contact_holder(const struct watch *watch, bool questions);
/* When the last of them is clear of all zones, or of those that hold a start back; -1 for none. */
int64_t contact_all_clear_ns(const struct watch *watch, bool of_starts);
/* The zone of the contact's newest detection inside; of several the one that asks for most. NULL: none. */
const struct permit_zone *contact_last_zone(const struct watch *watch, const struct contact *contact);

/* watch_phase.c */
enum trigger {
    TRIGGER_SAID_SOUND,   /* the crew says that the source sounds, and how */
    TRIGGER_SAID_STOPPED, /* ... that it has stopped for now */
    TRIGGER_SAID_OFF,     /* ... that the work is over */
    TRIGGER_HEARD,        /* impulses of the job are heard though nobody said that the source sounds */
    TRIGGER_SILENT,       /* no impulse for silence_s, and nothing said */
    TRIGGER_BREAK_OVER,   /* the silence is longer than a break may be */
    TRIGGER_HELD,         /* a contact holds the start back */
    TRIGGER_FREE,         /* none does any more */
    TRIGGER_ALONE,        /* no observer is on watch */
    TRIGGER_WATCH,        /* look again: who is on watch, the pre-watch, the contacts */
    TRIGGER_COUNT
};
/* Changes the phase as the table says; a reason is made where why is NULL. */
void phase_take(struct watch *watch, enum trigger trigger, const struct why *why);
/* The triggers that hold now, until none changes anything. */
void phase_settle(struct watch *watch);

/* watch_advice.c */
void advice_settle(struct watch *watch);
void advice_acknowledge(struct watch *watch, const struct note *note);

/* When a start is possible as things stand; -1: nobody can tell. */
int64_t advice_earliest_start_ns(const struct watch *watch);

/* watch_plan.c */
void plan_take(struct watch *watch, const struct note *note);
void plan_get(const struct watch *watch, struct watch_plan *out);

/* watch_note.c */
void note_take(struct watch *watch, const struct note *note);
/* A note that makes no sense now: a finding says so. */
void note_without_effect(struct watch *watch, const char *format, ...) __attribute__((format(printf, 2, 3)));

/* watch_view.c: all is ready, and a release would be taken. */
bool view_release_possible(const struct watch *watch);

#endif
