/* Our source together with others that are at work nearby, against a criterion: how far the whole reaches.
 *
 * Energies are summed (level/field.h). Ours comes in as what was measured, moved by the law of its exposure;
 * another's as a level that people set, moved by the same law of the sea, band by band:
 *
 *   metric           ours                         another, continuous        another, impulsive
 *   SEL cumulative   the window's sum             SPL + 10 lg s              SEL + 10 lg(rate s)
 *   SEL single       the job's loudest impulse    not added                  SEL
 *   SPL              the job's loudest            SPL                        SEL - 10 lg t, t the shorter of
 *                                                                            averaging time and interval
 *
 * s: seconds of the window so far, in all of which the others are taken to sound. Single sounds are taken to
 * fall together: on the safe side. T90 of another's sound is taken as 0.1 s (common practice, no source).
 * Peaks, positive impulses and a receiver that flees (from which of them?) have no answer.
 *
 * Which criteria apply is ours to say: the job's. Others of the other kind of sound are added as energy all
 * the same, which is on the safe side for an impulsive job only.
 *
 * Nearer than `inner_m` ours is taken as no louder than there: the law of a point does not hold within a
 * pile's own length. Deterministic; allocates in create only. */
#ifndef LEVEL_TOGETHER_H
#define LEVEL_TOGETHER_H

#include "base/status.h"
#include "level/exposure.h"
#include "level/field.h"
#include "level/level.h"
#include <stdbool.h>

#define TOGETHER_MAX_OTHERS 32
#define TOGETHER_NAME_SIZE 64

/* Another source as people set it. Places from our source's reference point. */
struct together_other {
    char name[TOGETHER_NAME_SIZE];
    double ahead_m, starboard_m;
    enum criterion_sound sound; /* continuous: levels are SPL; impulsive: SEL of one sound */
    double at_m;                /* range of the levels; 1 for a source level */
    double spread_db;           /* how unsure its level is, one standard deviation */
    double rate_per_s;          /* impulsive: sounds a second; above 0 */
    double level_db;            /* broadband */
    double
        band_db[LEVEL_MAX_BANDS]; /* decidecades from LEVEL_FIRST_BAND up; -INFINITY: none. Sum: level_db */
};

struct together_setup {
    uint32_t n_others;                   /* 1 to TOGETHER_MAX_OTHERS */
    const struct together_other *others; /* copied */
    struct exposure_loss loss;           /* of the sea; its context is borrowed */
    enum band_weighting how;
    double inner_m; /* EXPOSURE_NEAREST_M or more */
};

/* How far the whole reaches a criterion's value. 0: nowhere; INFINITY: beyond EXPOSURE_FARTHEST_M. */
struct together_reach {
    double distance_m, low_m, high_m; /* the farthest point, from our source; 90 % interval */
    double bearing_deg;               /* of that point, from ahead; NAN where none */
    double middle_m;                  /* the farthest point, from the middle of all sources */
    double middle_bearing_deg;        /* of that point, from ahead; NAN where none */
    double ours_m, ours_low_m;        /* distance_m and low_m of the island that our source is in */
    uint32_t islands;                 /* parts that do not touch */
};

struct together;

/* STATUS_BAD_ARGUMENT for a setup outside what is said above; STATUS_NO_MEMORY. The caller owns *out. */
enum status together_create(const struct together_setup *setup, struct together **out);
void together_destroy(struct together *together);
/* Another source of that name falls silent or sounds again, from a time that does not fall on; all sound at
 * first. A sum over time counts the seconds of the window in which it sounded, a level counts where it
 * sounded in it at all. Returns how many have the name. */
uint32_t together_switch(struct together *together, const char *name, bool on, int64_t at_ns);
/* Works out again how the others' bands fall: call when the law has changed. */
void together_set_loss(struct together *together, const struct exposure_loss *loss);

/* Against criterion `index` of the exposure, which is `criterion`. STATUS_NOT_FOUND where there is no answer
 * (see above, and exposure_get_at); *out is untouched then. */
enum status together_get(struct together *together, struct exposure *exposure, uint32_t index,
                         const struct criterion *criterion, int64_t now_ns, struct together_reach *out);

#endif
