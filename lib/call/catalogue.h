/* The call catalogue as data: what a call of each class must look like, and which group makes it.
 * Files in config/calls, one class each; daemon/settings/catalogue.c loads them. */
#ifndef CALL_CATALOGUE_H
#define CALL_CATALOGUE_H

#include "call/call.h"
#include <stdbool.h>
#include <stdint.h>

#define CATALOGUE_MAX_CLASSES 64
#define CATALOGUE_TEXT_SIZE 512

/* What a traced contour must be like to be a call of the class. */
struct tone_shape {
    double window_s;      /* spectrum window; classes with equal window_s share one tracer */
    double min_snr_db;    /* mean over the contour of cell power over background */
    double min_s, max_s;  /* duration */
    double min_extent_hz; /* highest less lowest frequency */
    double max_extent_hz;
    double min_sweep_hz; /* end less start; negative for a fall; -INFINITY where free */
    double max_sweep_hz;
    double max_rate_hz_s; /* steepest change that the tracer follows */
    /* Distance of lines that must run beside it, above and below: sidebands of what is pulsed, harmonics of a
     * pulse rate. 0 where free. */
    double min_sideband_hz, max_sideband_hz;
    /* Rms departure from a straight line: machines keep their frequency, or sweep at a constant rate; and
     * mean jump from frame to frame against the slope: modems hop. 0 where free. */
    double min_bend_hz, max_bend_hz;
    double min_jump_hz, max_jump_hz;
};

/* What pulses and their rhythm must be like. */
struct train_shape {
    double pulse_s;    /* duration at which the energy detector integrates */
    double min_snr_db; /* pulse peak power over background power in the class's band */
    double min_interval_s, max_interval_s;
    double max_jitter; /* largest standard deviation of ln(interval ratio) that is a train */
    double min_jitter; /* smallest: below it is a machine; 0 where free */
    uint32_t min_pulses;
    bool free_rhythm; /* tied by likeness alone (codas); the limits of jitter do not count */
    double guard_low_hz, guard_high_hz; /* a band that must be quieter ... 0, 0 where none */
    double min_guard_db;                /* ... by at least this much */
    double upper_low_hz, upper_high_hz; /* another, looked at where the rate carries it */
    double min_upper_db;
    double max_pulse_s; /* a pulse that lasts longer is none of the class */
    /* Medians over a train's pulses, of what lies in the class's band (call/pulse_shape.h); 0, INFINITY and
       -INFINITY where free. */
    double min_centroid_hz, max_centroid_hz;
    double min_bandwidth_hz, max_bandwidth_hz;
    double min_length_s, max_length_s;
    double min_sweep_hz_s, max_sweep_hz_s;
    double echo_s; /* what follows a pulse within this time is tied to it as its echo */
    double tail_s; /* and within this, what is 10 dB weaker */
};

/* What units of song must be like to say all of their class's evidence (listen/song.h). */
struct song_shape {
    uint32_t min_units; /* 0: the class states none */
    uint32_t min_kinds;
    double within_s, min_unit_s;
    double lone_evidence, lone_s, repeat_evidence; /* of units that are no song */
    uint32_t bout_units;          /* of one kind, within bout_s: an animal that calls alike ... */
    double bout_s, bout_evidence; /* ... says so much */
};

/* How a sound that is no animal's is recognised; call/others.h says each in full. */
enum manner {
    MANNER_NONE,    /* as a tone or a train: an animal's */
    MANNER_BURST,   /* a straight tone that comes again alike */
    MANNER_HOPS,    /* equal chips of tone, one after the other, that hop in frequency */
    MANNER_LINE,    /* a line that lasts */
    MANNER_PICK_UP, /* a line that all channels have at the same moment and equally loud */
    MANNER_FLOW,    /* steep low noise that each hydrophone has for itself */
    MANNER_BEATS,   /* noise that swells regularly */
    MANNER_HUMP,    /* steady noise that is louder in its band than below it */
    MANNER_GRUNTS,  /* short rows of pulses that come again alike */
    MANNER_SNAPS,   /* many sharp pulses in no rhythm */
    MANNER_RHYTHM,  /* pulses whose rhythm is too steady for an animal (call/trains.h) */
    MANNER_IMPULSE, /* an impulse that stands alone (level/impulses.h) */
    MANNER_COUNT
};

/* Limits of such a sound; 0 where a manner has no use for one. */
struct other_shape {
    enum manner manner;
    double min_snr_db;    /* over what is usual there */
    double min_s, max_s;  /* of one burst or chip; of an impulse T90; how long a line has lasted */
    double max_extent_hz; /* how far a burst may sweep, in a straight line */
    uint32_t min_repeats; /* bursts alike ... */
    double memory_s;      /* ... within so long; an impulse stands alone for so long; chips in a block */
    double low_rate_hz, high_rate_hz; /* swells, snaps or pulses a second */
    uint32_t min_harmonics;           /* of a line */
};

struct call_class {
    char name[CALL_CLASS_SIZE];
    enum group group;
    enum call_form form;
    bool animal;            /* false: a sound of the job or the sea that is counted and speaks against */
    double low_hz, high_hz; /* band of the fundamental (tone) or of the pulse (train) */
    double natural_delay_s; /* from the end of the call to what the class needs to be sure */
    double false_per_hour;  /* the rate in Gaussian noise that the thresholds are set for */
    double certainty;       /* 0..1: how often a usual call of the class is right */
    double evidence;        /* log-odds that one call adds to a contact of the group at most; of what is no
                               animal's 0 or less: what it takes from each call that it covers */
    char source[CATALOGUE_TEXT_SIZE]; /* where the figures come from, with their marks */
    struct song_shape song;           /* of a tone that is a unit of song */
    struct tone_shape tone;           /* of a tone */
    struct train_shape train;         /* of a train */
    struct other_shape sound;         /* of what is no animal's: instead of both */
};

/* What the measures of a call say about it (call/certainty.h); all 0: nothing. */
struct certainty_form {
    double weight[CALL_MEASURES]; /* log-odds, per unit of the measure */
    double usual[CALL_MEASURES];
};

/* From calls to grades of contacts. */
struct certainty_table {
    struct certainty_form tone, train;
    double look_evidence, act_evidence;            /* log-odds from which a contact has the grade ... */
    double look_false_per_hour, act_false_per_day; /* ... and the false contacts they were set for */
    double evidence_decay_s;                       /* time constant with which log-odds fade */
};

struct catalogue {
    struct certainty_table certainty;
    uint32_t n_classes;
    struct call_class classes[CATALOGUE_MAX_CLASSES];
};

#endif
