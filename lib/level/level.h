/* The level of one second on one channel. */
#ifndef LEVEL_LEVEL_H
#define LEVEL_LEVEL_H

#include "level/moments.h"
#include "place/position.h"
#include <stdbool.h>
#include <stdint.h>

#define LEVEL_FIRST_BAND (-20) /* decidecade n of 10 Hz (IEC 61260-1 base ten, b = 3, fr = 1 kHz) */
#define LEVEL_MAX_BANDS 47     /* n = -20 .. 26; 26 is the last below 0.94 Nyquist at 1 MHz */

struct level {
    uint32_t channel;                /* from 1 */
    int64_t start_ns;                /* watch time of the first frame */
    double seconds;                  /* sound in it: 1, or less where some was lost */
    double spl_db;                   /* dB re 1 uPa, from the time-domain sum */
    double peak_db;                  /* zero-to-peak, dB re 1 uPa */
    double sel_db;                   /* of the sound in it, dB re 1 uPa2 s */
    double fast_max_db, slow_max_db; /* greatest SPL under fast and slow time weighting, dB re 1 uPa */
    struct moments moments;          /* of the samples, pascals, over 0 Hz to high_hz less the offset */
    double high_hz;                  /* half the sampling rate */
    uint32_t n_bands;                /* bands that the rate carries, from n = LEVEL_FIRST_BAND up */
    double band_db[LEVEL_MAX_BANDS]; /* SPL of each decidecade, dB re 1 uPa; NAN where not measured */
    bool relative;                   /* channel uncalibrated: dB re full scale */
    double range_m;                  /* slant, from the source; set by the watch; NAN where unknown */
    enum range_from range_from;      /* set by the watch: how the range is known, or why not */
};

#endif
