/* The watch: takes events in order and says what follows from them under the permit. Pure and deterministic:
 * the same events give the same outcomes, at sea, in a scan and in a rerun years later.
 *
 * Call order: create; then any mix of push and advance with non-decreasing times; get at any time; destroy.
 */
#ifndef RULE_WATCH_H
#define RULE_WATCH_H

#include "base/status.h"
#include "flow.h"
#include "place/ranges.h"
#include "rule/permit.h"
#include <stdbool.h>
#include <stdint.h>

#define WATCH_MAX_PEOPLE 16
#define WATCH_MAX_TIMERS 20
#define WATCH_MAX_CONTACTS 64
#define WATCH_MAX_ADVICE 32
#define WATCH_MAX_STREAMS 8
#define WATCH_MAX_ACKNOWLEDGEMENTS                                                                           \
    18 /* of one advice: a station's newest replaces its former, as does voice */
#define WATCH_MAX_CHECKS 20

struct watch_setup {
    const struct permit *permit; /* borrowed for the life of the watch */
    double contact_gap_s;        /* calls of one group closer in time than this are one contact */
    double look_evidence;        /* log-odds at which a contact is graded look */
    double act_evidence;         /* log-odds at which a contact is graded act */
    double evidence_decay_s;     /* time constant with which log-odds fade */
    double sighting_log_spread;  /* doubt of a distance that a person gives */
    double silence_s; /* no impulse for this long, and nothing said: the source is heard as silent */
    /* The channels (bit 0: channel 1) of streams 1, 2 ... that listen. Time is unheard for the acoustic watch
     * when none of them hears. All 0: channel 1 of stream 1. */
    uint32_t listening[WATCH_MAX_STREAMS];
    /* Slant ranges of the channels from the source, m (NAN or 0: unknown), and the speed of sound: a blow
     * that two streams hear at different ranges is one (rule/blows.h). All 0: what arrives together is one.
     */
    double range_m[WATCH_MAX_STREAMS][FLOW_MAX_CHANNELS];
    double sound_speed_m_s;
    /* Where source and channels are, and what moves; all zeros: the watch says nothing of ranges, and those
     * above hold. */
    struct ranges_setup ranges;
    double depth_m; /* of the water at the source until a note says another; 0: unknown */
};

struct watch;

/* STATUS_BAD_ARGUMENT when the permit fails permit_check; STATUS_NO_MEMORY. The caller owns *out. */
enum status watch_create(const struct watch_setup *setup, struct watch **out);
void watch_destroy(struct watch *watch);

/* Another permit or other settings hold from now on; the permit is borrowed instead of the former. What was
 * done, heard and said stays: people, the pre-watch that was kept, contacts, jobs. What the settings say of
 * places is taken anew only where it differs. Before the `run` event of the run that brings them.
 * STATUS_BAD_ARGUMENT as watch_create; nothing is changed then. */
enum status watch_change(struct watch *watch, const struct watch_setup *setup);
/* A copy of the setup in force. */
void watch_get_setup(const struct watch *watch, struct watch_setup *out);

/* The UTC of watch time zero, before the first event: without it nobody knows when the sun is up. */
void watch_set_clock(struct watch *watch, int64_t zero_unix_ns);

/* Takes one event whose known_ns is not before the watch's time; first lets time pass to it. The event itself
 * goes out as the first outcome of its time, completed. STATUS_BAD_ARGUMENT: time would run backwards. A note
 * that makes no sense now (a verdict on an unknown contact, a release with nothing to release) is recorded
 * all the same, and answered by a finding or ignored with a reason: never an error. */
enum status watch_push(struct watch *watch, const struct event *event, const struct outcome_sink *sink);

/* Whether a position should be pushed, or is too like the last one: what is not pushed is not recorded. */
bool watch_wants_position(const struct watch *watch, const struct position *position);

/* Says of an impulse or a level how far away the source is now, unless that was said before: an impulse from
 * a ledger has its range, and settings that changed since rewrite nothing. watch_push does it by itself. */
void watch_set_range(const struct watch *watch, struct event *event);

/* A finding of the tally's (a limit is passed, such a finding is answered; others change nothing): what the
 * permit asks for then follows. From inside a callback of push or advance (sink NULL) at the end of the push
 * in progress, or of the next; else at once. */
void watch_take_finding(struct watch *watch, const struct outcome *finding, const struct outcome_sink *sink);

/* Lets time pass: timers that are due run in order, each at its own due time. */
enum status watch_advance(struct watch *watch, int64_t watch_ns, const struct outcome_sink *sink);

struct watch_timer {
    char name[NOTE_NAME_SIZE]; /* "pre-watch", "clearance of contact 2", "soft start" ... */
    int64_t elapsed_ns, needed_ns;
    bool running;
    char held_by[FLOW_TEXT_SIZE]; /* why it does not run; empty while it runs */
};

struct watch_person {
    char name[NOTE_NAME_SIZE];
    char watch[NOTE_NAME_SIZE]; /* "visual", "acoustic", "crew" */
    char station[NOTE_NAME_SIZE];
    int64_t since_ns;
};

struct watch_contact {
    struct contact_outcome contact;
    int64_t first_ns, last_ns; /* of its calls and sightings */
    int64_t clears_at_ns;      /* -1 where it holds nothing back */
    double evidence;           /* log-odds now */
    bool seen;                 /* a person has sighted it */
    int64_t countdown_ends_ns; /* -1 where no verdict is awaited */
};

struct watch_acknowledgement {
    char station[NOTE_NAME_SIZE];
    char person[NOTE_NAME_SIZE];
    char answer[NOTE_NAME_SIZE]; /* "seen", "passed", "stopped", "declined" */
    int64_t known_ns;
};

struct watch_advice {
    struct advice_outcome advice;
    char id[FLOW_ID_SIZE];
    int64_t since_ns;
    bool in_force;
    bool acknowledged; /* by anybody; the newest: */
    char acknowledged_by[NOTE_NAME_SIZE];
    char answer[NOTE_NAME_SIZE];
    uint32_t n_acknowledgements; /* of a station one of its own and one of the observer's voice */
    struct watch_acknowledgement acknowledgements[WATCH_MAX_ACKNOWLEDGEMENTS];
};

/* Puts an acknowledgement into what is shown of its advice. */
void watch_advice_answer(struct watch_advice *advice, const struct note *note, int64_t now_ns);

/* Of the start of a watch: what was checked last, by whom. */
struct watch_check {
    char check[NOTE_NAME_SIZE], station[NOTE_NAME_SIZE], person[NOTE_NAME_SIZE];
    bool good;
    int64_t known_ns;
};

/* Puts a check into the list of WATCH_MAX_CHECKS, in place of the former one of its kind and station. */
void watch_check_put(struct watch_check *checks, uint32_t *n, const struct note *note, int64_t now_ns);

#define PLAN_MAX_STEPS 12

/* Something that must be done, or that happens, before a planned start. */
struct watch_plan_step {
    char name[NOTE_NAME_SIZE]; /* "pre-watch begins", "deterrent on", "day ends", "watch of Ann ends" ... */
    int64_t earliest_ns, latest_ns; /* watch time; -1: none. Of a fact, latest_ns is when it happens */
    bool fact;                      /* it happens by itself */
    bool done;                      /* it is done, or under way */
    bool late;                      /* the planned time cannot be kept for it */
    char text[FLOW_TEXT_SIZE];
};

struct watch_plan {
    int64_t planned_ns;  /* when somebody means to start; -1: nobody does, or the source sounds */
    int64_t earliest_ns; /* when a start is possible as things stand; -1: nobody can tell */
    int64_t slips_ns;    /* how much later than planned */
    uint32_t n_steps;
    struct watch_plan_step steps[PLAN_MAX_STEPS];
};

/* A copy of all that people may see; plain data. */
struct watch_view {
    int64_t watch_ns;
    enum phase phase;
    int64_t phase_since_ns;
    char phase_reason[FLOW_TEXT_SIZE];
    char phase_clause[FLOW_TEXT_SIZE];
    char job[IMPULSE_JOB_SIZE];
    bool source_heard;      /* impulses are being heard */
    enum phase source_said; /* what the crew last entered */
    bool release_possible;  /* the pre-watch is complete and nothing holds the start back */
    char released_by[NOTE_NAME_SIZE];
    uint32_t n_timers;
    struct watch_timer timers[WATCH_MAX_TIMERS];
    uint32_t n_people;
    struct watch_person people[WATCH_MAX_PEOPLE];
    uint32_t n_checks; /* the last of each check and station */
    struct watch_check checks[WATCH_MAX_CHECKS];
    uint32_t n_contacts; /* newest first */
    struct watch_contact contacts[WATCH_MAX_CONTACTS];
    uint32_t n_advice; /* newest first; the one in force for a station is its first with in_force */
    struct watch_advice advice[WATCH_MAX_ADVICE];
    uint32_t n_impulses; /* ours, of the job */
    struct watch_plan plan;
};

void watch_get_view(const struct watch *watch, struct watch_view *out);

#endif
