/* An impulse: one blow, shot or detonation with its measures (ISO 18406:2017 for piles; ISO 18405 terms). */
#ifndef LEVEL_IMPULSE_H
#define LEVEL_IMPULSE_H

#include "level/level.h"
#include "place/position.h"
#include <stdbool.h>
#include <stdint.h>

#define IMPULSE_JOB_SIZE 32

enum impulse_whose { IMPULSE_OURS, IMPULSE_OTHERS, IMPULSE_UNKNOWN };

struct impulse {
    uint32_t channel;                    /* from 1 */
    int64_t time_ns;                     /* watch time of the 5 % energy point */
    double sel_db;                       /* dB re 1 uPa2 s, background energy subtracted */
    double peak_db;                      /* zero-to-peak, dB re 1 uPa */
    double peak_to_peak_db;              /* dB re 1 uPa */
    double rms90_db;                     /* SPL over T90, dB re 1 uPa: 90 % of the energy over T90 */
    double t90_s;                        /* 5 to 95 % energy window */
    double background_db;                /* SPL of the background just before, dB re 1 uPa */
    double effective_s;                  /* effective signal duration; NAN where the background hides it */
    double kurtosis, window_s;           /* of the window that was measured, and how long it is */
    double positive_impulse_pa_s;        /* of the greatest positive phase; NAN on a relative channel */
    uint32_t n_bands;                    /* decidecades from n = LEVEL_FIRST_BAND up */
    double band_sel_db[LEVEL_MAX_BANDS]; /* dB re 1 uPa2 s; NAN where less than 3 dB above the background */
    bool refused;    /* the channel clips too near the expected peak: no level is given, all are NAN */
    bool relative;   /* channel uncalibrated: dB re full scale */
    bool clipped;    /* measures are lower bounds */
    bool overlapped; /* another impulse began inside its window */
    bool weak;       /* energy less than 10 dB above the background in the window */
    bool beside; /* heard beside the channel of the stream that counts (listen/measuring.h): one blow counts
                    once */
    enum impulse_whose whose;   /* set by the watch */
    char job[IMPULSE_JOB_SIZE]; /* set by the watch; empty where no job is open */
    double range_m; /* slant, from the source to the channel; set by the watch; NAN where unknown */
    enum range_from range_from; /* set by the watch: how the range is known, or why not */
};

/* Takes away every level, since the channel cannot be trusted with them: times and durations stay. */
void impulse_refuse_levels(struct impulse *impulse);

#endif
