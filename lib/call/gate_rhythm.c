/* The rhythm of an own source's impulses; see gate_rhythm.h. */
#include "call/gate_rhythm.h"
#include <math.h>

#define FITS 0.15         /* of the interval: a blow of a hammer that is not timed is within that */
#define FIRST_SPREAD 0.05 /* of the interval */
#define INTERVAL_GAIN 0.3
#define SPREAD_GAIN 0.25
#define LOCKED 2 /* intervals that fitted the one before them */
#define MOST_BEATS 3
#define OFF_ADDS                                                                                             \
    2 /* against the 1 that one in time takes away: two of three between the beats are a new rhythm */
#define OFF_MOST 3
#define DEVIATIONS 4.0
#define LEAST_TOLERANCE_S 0.02
#define MOST_TOLERANCE_S 0.5

static void begin(struct gate_rhythm *rhythm, double onset_s)
{
    rhythm->interval_s = onset_s - rhythm->previous_s;
    rhythm->spread_s = FIRST_SPREAD * rhythm->interval_s;
    rhythm->last_s = onset_s;
    rhythm->n_fitting = rhythm->n_off = 0;
}

/* Beats since the last one in time, and how far the time is from that beat. */
static double nearest_beat(const struct gate_rhythm *rhythm, double time_s, double *out_error_s)
{
    double beats = fmax(1, round((time_s - rhythm->last_s) / rhythm->interval_s));
    *out_error_s = time_s - rhythm->last_s - beats * rhythm->interval_s;
    return beats;
}

void gate_rhythm_take(struct gate_rhythm *rhythm, double onset_s)
{
    if (rhythm->n_heard++ == 0) {
        rhythm->last_s = rhythm->previous_s = onset_s;
        return;
    }
    double error_s = 0, beats = rhythm->interval_s > 0 ? nearest_beat(rhythm, onset_s, &error_s) : 0;
    if (rhythm->interval_s > 0 && beats <= MOST_BEATS && fabs(error_s) <= FITS * rhythm->interval_s) {
        rhythm->interval_s += INTERVAL_GAIN * error_s / beats;
        rhythm->spread_s += SPREAD_GAIN * (fabs(error_s) - rhythm->spread_s);
        rhythm->last_s = onset_s;
        rhythm->n_fitting++;
        rhythm->n_off -= rhythm->n_off > 0;
    } else {
        rhythm->n_off += OFF_ADDS;
        if (rhythm->interval_s <= 0 || beats > MOST_BEATS || rhythm->n_off >= OFF_MOST)
            begin(rhythm, onset_s);
    }
    rhythm->previous_s = onset_s;
}

bool gate_rhythm_expects(const struct gate_rhythm *rhythm, double time_s)
{
    if (rhythm->n_fitting < LOCKED || time_s <= rhythm->last_s)
        return false;
    double error_s, beats = nearest_beat(rhythm, time_s, &error_s);
    double most_s = fmin(MOST_TOLERANCE_S, FITS * rhythm->interval_s);
    double tolerance_s = fmin(most_s, fmax(LEAST_TOLERANCE_S, DEVIATIONS * rhythm->spread_s));
    return beats <= MOST_BEATS && fabs(error_s) <= tolerance_s;
}
