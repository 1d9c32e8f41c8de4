/* A note: anything a person enters, through one door whatever it came by (page, notes file, scene). */
#ifndef RULE_NOTE_H
#define RULE_NOTE_H

#include "base/status.h"
#include "call/call.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define NOTE_TEXT_SIZE 256
#define NOTE_NAME_SIZE 64

enum note_kind {
    NOTE_SIGN_ON,         /* person, watch (visual | acoustic | crew), station for crew */
    NOTE_SIGN_OFF,        /* person, watch */
    NOTE_SIGHTING,        /* person, group, [species number calf distance_m bearing_deg leaving contact,
                             and the fields from number_low on] */
    NOTE_DISTANCE,        /* person, contact, distance_m, [bearing_deg leaving] */
    NOTE_VERDICT,         /* person, contact, verdict (confirm | dismiss | left), text = reason */
    NOTE_RELEASE,         /* person: the named observer allows the start */
    NOTE_ACKNOWLEDGEMENT, /* person, station, advice (id), answer: seen, stopped or declined at the station
                             itself (declined: rank, text = reason); passed by the observer's voice (text: to
                             whom) */
    NOTE_SOURCE,  /* source_state (off | soft start | full power | hold | reduced | stopped | vibro ...) */
    NOTE_JOB,     /* job, answer (open | begin | end | close): begin and end of a line between open and close;
                     with open what it is: job_kind and the fields from leg on */
    NOTE_WEATHER, /* sea_state, visibility_m, depth_m: any of them */
    NOTE_QUIETING,  /* answer (on | off): a quieting measure is at work or not; text: which, e.g. bubble
                       curtain */
    NOTE_DETERRENT, /* answer (on | off): the deterrent works or not */
    NOTE_OVERRIDE,  /* person, answer (on | off), reason (life | refusal | instability), text: the crew works
                       on for safety against a stop */
    NOTE_PLAN,      /* planned_ns: when the next start is meant to be */
    NOTE_ANSWER,    /* person, finding (id), text: what there is to say of it */
    NOTE_WHOSE,     /* person, impulse (id), answer (ours | other): whose the train of that impulse is, from
                       occurred_ns on; all of it in the job where that is not given */
    NOTE_POSITION,  /* latitude_deg, longitude_deg of the source */
    NOTE_OTHER, /* text (name of another source in the settings), answer (on | off): whether it is at work */
    NOTE_CHECK, /* person, check (what of the watch was checked), answer (good | bad), [station text cable_m
                   hydrophone_depth_m offset_m] */
    NOTE_HAND_OVER, /* person, answer (gives | takes), [text]: the watch goes from one to another, both sign
                     */
    NOTE_MARK, /* nothing: a moment that somebody wants to keep; what it was is said by a later note whose
                  `mark` names it */
    NOTE_CORRECTION, /* corrects (id of the note that is taken back), text: why */
    NOTE_REMARK,     /* text */
    NOTE_KIND_COUNT
};

struct note {
    enum note_kind kind;
    int64_t occurred_ns; /* watch time, as the person says; equal to known_ns when nothing was said */
    int64_t planned_ns;  /* watch time of a planned start; 0: none */
    int64_t known_ns;    /* watch time, stamped when the watch accepts it */
    char account[NOTE_NAME_SIZE]; /* whose session entered it; empty: at the machine itself */
    char person[NOTE_NAME_SIZE];
    char watch[NOTE_NAME_SIZE];
    char station[NOTE_NAME_SIZE];
    char species[NOTE_NAME_SIZE];
    char verdict[NOTE_NAME_SIZE];
    char answer[NOTE_NAME_SIZE];
    char advice[NOTE_NAME_SIZE];
    char job[NOTE_NAME_SIZE];
    char impulse[NOTE_NAME_SIZE];
    char finding[NOTE_NAME_SIZE];
    char source_state[NOTE_NAME_SIZE];
    char reason[NOTE_NAME_SIZE];
    char rank[NOTE_NAME_SIZE];  /* of who declines */
    char check[NOTE_NAME_SIZE]; /* "clock", "array", "channels", "noise", "field check", "radio", "sound" */
    char text[NOTE_TEXT_SIZE];
    /* Of a job: a pile's leg, hammer and blows by the driver's count; a line's sequence and shot points; a
     * charge's and its donor's weight. energy_kj is the planned one. */
    char job_kind[NOTE_NAME_SIZE]; /* "pile", "line", "test", "charge" */
    char leg[NOTE_NAME_SIZE], hammer[NOTE_NAME_SIZE], sequence[NOTE_NAME_SIZE];
    double blows, first_point, last_point, charge_kg, donor_kg;
    bool refusal, restrike;
    enum group group;  /* GROUP_UNKNOWN where not given */
    uint32_t contact;  /* 0 where not given */
    double number;     /* animals; NAN where not given, as all numbers below */
    double distance_m; /* from the source */
    double bearing_deg;
    double sea_state;
    double visibility_m;
    double depth_m; /* of the water at the source */
    double cable_m, hydrophone_depth_m,
        offset_m;                       /* of the array: cable out, depth, distance from the source */
    double minutes;                     /* how long something is expected to last, or lasted */
    double energy_kj;                   /* of the hammer */
    double elements;                    /* of the array that are active */
    double latitude_deg, longitude_deg; /* WGS84, north and east positive */
    double number_low, number_high;     /* animals, at least and at most; `number` is the best */
    double calves;                      /* of them */
    double closest_m;                   /* least distance from the source */
    int64_t in_zone_ns, out_zone_ns;    /* watch time at which it came into and left the zone; 0: not said */
    char certainty[NOTE_NAME_SIZE];     /* "definite", "probable", "possible" */
    char behaviour[NOTE_NAME_SIZE];     /* "closing", "travelling" ... */
    char sighting[NOTE_NAME_SIZE];      /* id of another note of the same animals */
    char mark[NOTE_NAME_SIZE];          /* id of the mark that this note completes */
    char corrects[NOTE_NAME_SIZE];      /* id of the note that a correction takes back */
    bool calf;
    bool leaving; /* seen leaving the zone */
};

enum note_form {
    NOTE_FORM_TEXT,
    NOTE_FORM_WORD,
    NOTE_FORM_GROUP,
    NOTE_FORM_WHOLE,
    NOTE_FORM_NUMBER,
    NOTE_FORM_FLAG,
    NOTE_FORM_TIME
};

/* A field of a note: what it may hold, and where. Whatever writes, reads, rounds or asks for notes goes by
 * these, so that another field is one more of them. */
struct note_field {
    const char *name;
    enum note_form form;
    size_t offset, size;      /* of the member; size of texts */
    double min, max;          /* of numbers */
    int decimals;             /* of numbers: how they are rounded */
    const char *const *words; /* of NOTE_FORM_WORD, ended by NULL */
    const char *allowed;      /* in words, for people */
};

/* The i-th, in alphabetical order; NULL after the last. */
const struct note_field *note_field_at(unsigned i);

/* An empty note of a kind: texts "", numbers NAN, times 0. */
void note_reset(struct note *note, enum note_kind kind);

/* Sets one field from text, as it arrives from a page, a notes file or a scene: names are the member names
 * above ("person", "distance_m", "group" ...). STATUS_NOT_FOUND: no such field; STATUS_BAD_FORMAT or
 * STATUS_OUT_OF_RANGE: the value is not allowed; then out_allowed (if not NULL) points at static text that
 * says what is. */
enum status note_set(struct note *note, const char *field, const char *value, const char **out_allowed);

/* Whether the note has what its kind needs; if not STATUS_OK, *out_missing is the field's name (static). */
enum status note_check(const struct note *note, const char **out_missing);

/* What an entry calls a field of NOTE_FORM_TIME: "planned_ns" is written as "planned_s", in seconds. */
void note_time_key(const struct note_field *field, char out[NOTE_NAME_SIZE]);

/* The words of a field of NOTE_FORM_WORD, ended by NULL; NULL for any other. */
const char *const *note_words(const char *field);

const char *note_kind_text(enum note_kind kind); /* "sign-on", "sighting", "source state" ... */
bool note_kind_from_text(const char *text, enum note_kind *out);

#endif
