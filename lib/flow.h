/* What travels between stages, and nothing else: block, event, outcome.
 *
 *   input -> block -> listen -> event -> watch -> outcome -> record -> ledger and pages
 *          notes, positions, run marks --^
 *
 * Every event has a place in one order, (known_ns, stream, kind, counter), in which the watch takes it. */
#ifndef FLOW_H
#define FLOW_H

#include "call/call.h"
#include "level/impulse.h"
#include "level/level.h"
#include "place/position.h"
#include "place/whereabouts.h"
#include "rule/note.h"
#include <stdbool.h>
#include <stdint.h>

#define FLOW_MAX_CHANNELS 16
#define FLOW_MAX_BLOCK_FRAMES 4096

/* Frames of one stream, aligned to the sample number. Frame numbers count lost frames too. */
struct block {
    uint32_t stream;      /* from 1 */
    uint64_t first_frame; /* number of the first frame; everything before it is over */
    uint64_t lost_before; /* frames lost directly before first_frame */
    uint32_t n_frames;    /* 0: a gap block, which only says that lost_before frames are gone */
    uint32_t n_channels;
    const float *samples; /* [n_frames * n_channels], interleaved, 1.0 = full scale; borrowed for the call */
};

/* Frames in a full block: the largest power of two that is at most 4096 and at most 50 ms at the rate. */
static inline uint32_t flow_block_frames(double rate_hz)
{
    uint32_t n = FLOW_MAX_BLOCK_FRAMES;
    while (n > 1 && n > 0.05 * rate_hz)
        n /= 2;
    return n;
}

enum unheard_cause {
    UNHEARD_GAP,
    UNHEARD_CLIPPING,
    UNHEARD_OWN_SOURCE,
    UNHEARD_DEAD_CHANNEL,
    UNHEARD_TOO_QUIET
};

/* Time in which the watch could not hear: of one channel (0: all of the stream) and one band. */
struct unheard {
    uint32_t channel;
    double low_hz, high_hz;
    int64_t start_ns, end_ns; /* at most 10 s; longer ones come in adjoining pieces */
    enum unheard_cause cause;
};

/* The run that begins: watch time goes on over the outage before it. */
struct run_mark {
    int64_t outage_start_ns; /* equal to outage_end_ns in a ledger's first run */
    int64_t outage_end_ns;
};

enum event_kind {
    EVENT_RUN,
    EVENT_UNHEARD,
    EVENT_LEVEL,
    EVENT_IMPULSE,
    EVENT_CALL,
    EVENT_NOTE,
    EVENT_POSITION
};

struct event {
    enum event_kind kind;
    uint32_t stream;  /* 0 for what did not come from a stream: notes, positions, run marks */
    uint32_t run;     /* from 1 */
    uint64_t counter; /* per run, stream and kind, from 1: with them it makes the entry's id */
    int64_t known_ns; /* watch time at which it became known: the last sample needed to emit it */
    union {
        struct run_mark run_mark;
        struct unheard unheard;
        struct level level;
        struct impulse impulse;
        struct call call;
        struct note note;
        struct position position;
    } as;
};

/* Where listen puts its events; called in order of known_ns. */
struct event_sink {
    void (*take)(void *context, const struct event *event);
    void *context;
};

#define FLOW_ID_SIZE 48 /* "run.stream.kind.counter" */
#define FLOW_MAX_CAUSES 16
#define FLOW_TEXT_SIZE 256

enum phase {
    PHASE_OFF,
    PHASE_PRE_WATCH,
    PHASE_READY,
    PHASE_DELAY,
    PHASE_DETERRENT,
    PHASE_SOFT_START,
    PHASE_HOLD,
    PHASE_FULL_POWER,
    PHASE_REDUCED,
    PHASE_VIBRO,
    PHASE_DRILLING,
    PHASE_LINE_TURN,
    PHASE_TEST,
    PHASE_BREAK,
    PHASE_SHUTDOWN,
    PHASE_POST_WATCH,
    PHASE_COUNT
};

/* In rising strength within each half: what the crew should do now. */
enum advice_word {
    ADVICE_CARRY_ON,
    ADVICE_MAY_START,
    ADVICE_RESUME,
    ADVICE_NEW_SOFT_START,
    ADVICE_DO_NOT_START,
    ADVICE_PREPARE_TO_STOP,
    ADVICE_HOLD_POWER,
    ADVICE_REDUCE_POWER,
    ADVICE_STOP,
    ADVICE_WORD_COUNT
};

enum contact_grade { GRADE_NONE, GRADE_LOOK, GRADE_ACT };
enum contact_state { CONTACT_OPEN, CONTACT_LEFT, CONTACT_CLEARED, CONTACT_DISMISSED };

struct contact_outcome {
    uint32_t contact; /* its number in the ledger, from 1 */
    enum group group;
    enum contact_grade grade;
    enum contact_state state;
    uint32_t n_calls;
    struct whereabouts whereabouts;
    double bearing_deg, mirror_deg; /* NAN where none */
    enum bearing_from bearing_from;
    double p_inside;       /* of the strongest zone that counts; NAN when unknown */
    uint32_t n_taken_back; /* calls that proved to be sounds of no animal; n_calls is without them */
    double against;        /* log-odds that such sounds took from it so far */
};

struct phase_outcome {
    enum phase phase;
    char reason[FLOW_TEXT_SIZE]; /* in words */
    char clause[FLOW_TEXT_SIZE];
    char job[IMPULSE_JOB_SIZE];
    uint32_t n_causes;
    char causes[FLOW_MAX_CAUSES][FLOW_ID_SIZE];
};

struct advice_outcome {
    enum advice_word advice;
    char station[NOTE_NAME_SIZE]; /* "observer", "crew": whom it is for */
    bool confirmed;               /* false: 'not yet confirmed' by an observer */
    char reason[FLOW_TEXT_SIZE];
    char clause[FLOW_TEXT_SIZE];
    char job[IMPULSE_JOB_SIZE];
    int64_t until_ns;              /* earliest end by the rule; -1 where the rule gives none */
    char requires[FLOW_TEXT_SIZE]; /* what the end needs, in words */
    uint32_t n_causes;
    char causes[FLOW_MAX_CAUSES][FLOW_ID_SIZE];
};

/* What a finding rests on: what people entered, what was heard, or both. What rests on sound alone is to be
 * explained. */
enum finding_basis { BASIS_ENTRY, BASIS_SOUND, BASIS_BOTH };

struct finding_outcome {
    enum finding_basis basis;
    char code[NOTE_NAME_SIZE];
    char clause[FLOW_TEXT_SIZE];
    char job[IMPULSE_JOB_SIZE];
    char grade[NOTE_NAME_SIZE]; /* "firm" or "indicative" */
    char detail[FLOW_TEXT_SIZE];
    uint32_t n_causes;
    char causes[FLOW_MAX_CAUSES][FLOW_ID_SIZE];
};

/* How the source's sound stands against one criterion, for a receiver that stays or flees as the criterion
 * says. Levels that are not known are NAN. */
struct exposure_outcome {
    uint32_t stream, channel;
    char job[IMPULSE_JOB_SIZE];
    char set[NOTE_NAME_SIZE], criterion[NOTE_NAME_SIZE]; /* the criterion's document and name */
    char metric[NOTE_NAME_SIZE], weighting[NOTE_NAME_SIZE], window[NOTE_NAME_SIZE];
    char reference[NOTE_NAME_SIZE];                     /* of its levels: "1 uPa2 s" ... */
    char effect[NOTE_NAME_SIZE];                        /* "injury", "limit" ... */
    double limit_range_m;                               /* where a limit must be kept; NAN for others */
    double value_db;                                    /* the criterion's; NAN for a positive impulse */
    double level_db;                                    /* received: summed over the window, or the loudest */
    double value_pa_s, level_pa_s;                      /* of a positive impulse; NAN for all others */
    double at_750_m_db;                                 /* the same at 750 m */
    double distance_m, distance_low_m, distance_high_m; /* where the value is just met; 0: nowhere; INFINITY:
                                                           beyond what is computed; NAN: unknown */
    char distance[NOTE_NAME_SIZE];                      /* the same in words */
    uint32_t n;                                         /* sounds in the window */
    uint32_t n_clipped, n_quiet;                        /* of them: lower bounds; below effective quiet */
    uint32_t n_unweighted;    /* of them: without bands, so missing from a weighted sum */
    uint32_t n_without_range; /* of them: missing from what is said of distances */
    bool reached;             /* level_db is at or above value_db */
    double left;              /* impulses like the last until the value is met at the zone's edge */
    int64_t start_ns;         /* of the window's first sound */
    bool unverified;          /* some number of the criterion is from memory */
    /* The same of all sources that are set to work at the time, energy-summed; NAN, "" where none is set */
    double together_m, together_low_m, together_high_m; /* farthest point that has the value, from ours */
    char together[NOTE_NAME_SIZE];                      /* the same in words */
    double together_middle_m, together_bearing_deg;     /* the same from the middle of them all; from ahead */
    uint32_t islands;                                   /* parts of it that do not touch */
};

#define FLOW_MAX_REDUCTIONS 16

/* What a quieting measure takes off the SEL as a hearing group hears it. */
struct source_reduction {
    char weighting[NOTE_NAME_SIZE]; /* with its guidance; "none" */
    double db, low_db, high_db;     /* the bounds: every band at its bound at once */
};

/* Three numbers about the source that are never mixed, of the job's median impulse so far; of continuous
 * sound, of its median second while the source was said to sound. */
struct source_outcome {
    uint32_t stream, channel;
    char job[IMPULSE_JOB_SIZE];
    uint32_t n_impulses;
    uint32_t n_seconds; /* of continuous sound; 0 for impulses */
    double range_m;     /* to the channel; NAN where unknown */
    double sel_db;      /* received, median; NAN for continuous sound */
    double spl_db;      /* received, median of the seconds; NAN for impulses */
    double peak_db;     /* received, highest */
    double at_750_m_db, at_750_m_low_db, at_750_m_high_db; /* SEL or SPL, with its 90 % interval */
    double back_db, back_low_db,
        back_high_db; /* energy source level, or source level of an SPL; NAN where it has no meaning */
    char model[NOTE_NAME_SIZE];       /* the loss law */
    double n_db, n_low_db, n_high_db; /* with its 90 % interval: fitted, or as unsure as it was set */
    bool fitted;                      /* to the job's blows, and not set */
    double range_low_m, range_high_m; /* of the fit; NAN where it was set */
    double insertion_db, insertion_low_db,
        insertion_high_db; /* broadband, of the quieting measure; NAN where unknown */
    bool quieting_on;
    uint32_t n_quieting_off, n_quieting_on; /* impulses without and with it */
    uint32_t n_insertion_bands;             /* decidecades from LEVEL_FIRST_BAND up; 0: unknown */
    double insertion_band_db[LEVEL_MAX_BANDS], insertion_band_low_db[LEVEL_MAX_BANDS],
        insertion_band_high_db[LEVEL_MAX_BANDS]; /* 90 % interval; NAN where not known */
    uint32_t n_reductions;
    struct source_reduction reductions[FLOW_MAX_REDUCTIONS];
    double quieting_falls_db;     /* how much less it takes off than at first; NAN where it does not fall */
    char warning[FLOW_TEXT_SIZE]; /* early warning of the soft start, in words; empty: none */
    uint32_t n_clipped, n_overlapped, n_weak;           /* of the n_impulses */
    uint32_t n_other, n_unknown, n_relative, n_refused; /* left out of every sum of the job */
    char reason[FLOW_TEXT_SIZE];                        /* why a number is missing */
};

#define FLOW_MAX_CORRECTED 64

/* A person has said whose these impulses are: of one run, stream and channel, by their counters. */
struct correction_outcome {
    uint32_t run, stream, channel;
    enum impulse_whose whose; /* now */
    char job[IMPULSE_JOB_SIZE];
    char note[FLOW_ID_SIZE]; /* that says so */
    uint32_t n;
    uint64_t counters[FLOW_MAX_CORRECTED];
    uint32_t n_following; /* corrections by the same note that come directly after */
};

enum outcome_kind {
    OUTCOME_EVENT,
    OUTCOME_CONTACT,
    OUTCOME_PHASE,
    OUTCOME_ADVICE,
    OUTCOME_FINDING,
    OUTCOME_EXPOSURE,
    OUTCOME_SOURCE,
    OUTCOME_CORRECTION
};

/* What the watch says: the event it took, completed (an impulse's job and whose, a note's known time), or a
 * conclusion of its own. */
struct outcome {
    enum outcome_kind kind;
    uint32_t run;
    uint32_t stream;  /* 0 for conclusions */
    uint64_t counter; /* per run, stream and kind, from 1 */
    int64_t watch_ns;
    union {
        struct event event;
        struct contact_outcome contact;
        struct phase_outcome phase;
        struct advice_outcome advice;
        struct finding_outcome finding;
        struct exposure_outcome exposure;
        struct source_outcome source;
        struct correction_outcome correction;
    } as;
};

/* Where the watch puts its outcomes, in order of watch_ns. */
struct outcome_sink {
    void (*take)(void *context, const struct outcome *outcome);
    void *context;
};

/* Writes "run.stream.kind.counter"; kind is the entry's kind: "call", "advice" ... */
void flow_id(uint32_t run, uint32_t stream, const char *kind, uint64_t counter, char out[FLOW_ID_SIZE]);
/* The entry kind of an event or outcome: "call", "impulse", "note", "phase" ...; never NULL. */
const char *flow_event_kind_text(enum event_kind kind);
const char *flow_outcome_kind_text(const struct outcome *outcome);

/* Section 1's words, as pages and entries show them; never NULL. */
const char *phase_text(enum phase phase);
const char *advice_text(enum advice_word advice);
const char *grade_text(enum contact_grade grade); /* "look", "act", "" */
const char *contact_state_text(enum contact_state state);
const char *unheard_cause_text(enum unheard_cause cause);
const char *impulse_whose_text(enum impulse_whose whose);
const char *bearing_from_text(enum bearing_from from); /* "true", "ahead", "" */
const char *call_form_text(enum call_form form);
const char *finding_basis_text(enum finding_basis basis); /* "by entry", "by sound", "by both" */

#endif
