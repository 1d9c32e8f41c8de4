/* A call: one vocalisation, a tone (traced contour) or a train (pulses tied by rhythm and shape). What is
 * recognised and is no animal's (a sonar's ping, a ship's line, rain) travels as a call too, with n_sounds
 * above 0 and group unknown: it is recorded and counted, is part of no contact, and may speak against calls.
 */
#ifndef CALL_CALL_H
#define CALL_CALL_H

#include <stdbool.h>
#include <stdint.h>

#define CALL_CLASS_SIZE 32
#define CALL_MAX_AGAINST 8
#define CALL_MEASURES 7

/* What a call can tell about who made it; a permit's own groups are predicates over these. */
enum group {
    GROUP_UNKNOWN,
    GROUP_BALEEN_WHALE,
    GROUP_SPERM_WHALE,
    GROUP_BEAKED_WHALE,
    GROUP_DELPHINID,
    GROUP_PORPOISE,
    GROUP_PHOCID,
    GROUP_OTARIID,
    GROUP_SIRENIAN,
    GROUP_SEA_OTTER,
    GROUP_TURTLE,
    GROUP_COUNT
};

enum call_form { CALL_TONE, CALL_TRAIN, CALL_NOISE }; /* noise: of what is no animal's only */
enum bearing_from { BEARING_NONE, BEARING_TRUE, BEARING_AHEAD };

struct call {
    uint32_t channel; /* from 1: the channel that heard it best */
    char class_name[CALL_CLASS_SIZE];
    enum group group;
    enum call_form form;
    int64_t start_ns, end_ns; /* watch time */
    double low_hz, high_hz;
    uint32_t n_pulses;  /* 0 for a tone */
    double interval_s;  /* median between pulses; NAN for a tone */
    double snr_db;      /* tone: mean over the contour of cell power over background; train: median pulse peak
                           power over background power in the class's band */
    double level_db;    /* SPL of the call in its band, dB re 1 uPa */
    bool relative;      /* channel uncalibrated: dB re full scale */
    double bearing_deg; /* NAN where none */
    double mirror_deg;  /* NAN where none */
    enum bearing_from bearing_from;
    double certainty; /* 0..1: how often a call like this is right */
    double evidence;  /* log-odds it adds to a contact of its group; of what is no animal's 0 or less: the
                         log-odds that it takes from each call that it covers, at most what that call has */
    double measures[CALL_MEASURES]; /* what its certainty rests on (call/certainty.h); not recorded */
    uint32_t n_sounds;  /* 0: an animal's call; else how many sounds of a class that is no animal's */
    uint32_t n_against; /* earlier calls of the same run and stream that it covers and speaks against ... */
    uint64_t against[CALL_MAX_AGAINST]; /* ... by their counters */
};

/* "baleen whale", "delphinid" ...; never NULL. */
const char *group_text(enum group group);
/* The group of that name; false, and *out untouched, when there is none. */
bool group_from_text(const char *text, enum group *out);

#endif
