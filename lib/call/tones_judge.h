/* From contours to calls: which contours belong to one vocalisation, which class it is, and when it can be
 * told. Used by tones.c only. */
#ifndef CALL_TONES_JUDGE_H
#define CALL_TONES_JUDGE_H

#include "call/catalogue.h"
#include "call/found.h"
#include "call/tones_trace.h"

#define JUDGE_MAX_SOUNDS 48
#define JUDGE_MAX_MEMBERS 6
#define NO_TRACER UINT32_MAX

/* What the judge knows of a class. */
struct judged_class {
    const struct call_class *class; /* borrowed */
    uint32_t tracer;                /* that traces it, or NO_TRACER: not hearable, or a train */
    double threshold;               /* score that its false calls an hour need */
    double allowance;               /* how much it lets through: the smaller, the more a match says */
};

/* One vocalisation: contours tied by harmonics or by time. */
struct sound {
    bool used, given;
    double start_frame, end_frame, low_hz, high_hz;
    double open_end_frame;                /* of what was open of it when it was looked at */
    double snr_weight, weight, strongest; /* sums over its contours; the largest mean square */
    double energy[CATALOGUE_MAX_CLASSES]; /* by tracer: each hears all of the sound */
    double points[CATALOGUE_MAX_CLASSES];
    uint32_t n_members;
    struct contour members[JUDGE_MAX_MEMBERS];
};

struct judge {
    double rate_hz;
    double look_again; /* frame before which nothing is given */
    uint32_t n_classes;
    struct judged_class classes[CATALOGUE_MAX_CLASSES];
    uint32_t groups[CATALOGUE_MAX_CLASSES]; /* by tracer: a bit for each group of its classes ... */
    double delay_s[CATALOGUE_MAX_CLASSES];  /* ... and the shortest delay of them */
    uint64_t rejections[CATALOGUE_MAX_CLASSES][REJECT_COUNT];
    struct sound sounds[JUDGE_MAX_SOUNDS];
};

/* Takes what a tracer gave. */
void judge_take(struct judge *judge, uint32_t tracer, enum trace_end end, const struct contour *contour);
/* Whether a sound is due at the frame, so that open contours matter. */
bool judge_is_due(const struct judge *judge, double frame);
/* Gives the sounds that are due at known_frame, in order of their start, except those that an open contour
 * goes on with; `all` gives every one. Forgets what is long over. */
void judge_give(struct judge *judge, uint64_t known_frame, bool all, const struct contour *open,
                uint32_t n_open, const struct found_sink *sink);
/* Whether two contours are of one sound. */
bool judge_is_same_sound(const struct judge *judge, const struct contour *a, const struct contour *b);

#endif
