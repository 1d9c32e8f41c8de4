/* The measures of one impulse in a window of sound (terms of ISO 18405:2017; ISO 18406:2017 for piles).
 *
 * With p the pressure less the mean before the impulse, fs the rate and b the background's mean square:
 *   E       = sum(p^2 - b) / fs over the window          sound exposure, background energy subtracted
 *   SEL     = 10 lg(E / 1 uPa2 s)
 *   T90     = t95 - t5, where the running sum of E passes 5 % and 95 %
 *   rms90   = 10 lg(0.9 E / T90 / 1 uPa2)                90 % of the energy over T90
 *   peak    = 20 lg(max |p| / 1 uPa), peak to peak = 20 lg((max p - min p) / 1 uPa), of the samples
 *   effective duration = (sum s^2)^2 / (fs sum s^4), where s is the impulse without its background: with b
 *             Gaussian, sum s^4 = sum p^4 - 6 b sum s^2 - 3 b^2 n; "effective signal duration"
 *   kurtosis = mu4 / mu2^2 of the window as it is; means nothing without the window's length
 *   positive impulse = sum(p) / fs over the stretch of positive pressure that holds the greatest one, Pa s
 * Sample i stands for the time from i - 1/2 to i + 1/2; times between samples are interpolated linearly in
 * the running sum. t5 is its last passage of 5 % before it passes one half, t95 the first of 95 % after, so
 * that noise before the onset does not move them. */
#ifndef LEVEL_IMPULSE_MEASURE_H
#define LEVEL_IMPULSE_MEASURE_H

#include "base/status.h"
#include <stdbool.h>
#include <stddef.h>

struct impulse_window {
    const float *pascals; /* [n], borrowed */
    size_t n;
    double rate_hz;
    double mean_pa;        /* of the background */
    double background_pa2; /* its mean square about that mean */
    double full_scale_pa;  /* at which the channel clips; INFINITY where not known */
};

struct impulse_measures {
    double sel_db, peak_db, peak_to_peak_db, rms90_db, t90_s;
    double background_db;      /* SPL before the impulse; -INFINITY where there was silence */
    double exposure_pa2_s;     /* E */
    double effective_s;        /* NAN where the background hides it */
    double kurtosis, window_s; /* and the window it belongs to */
    double positive_impulse_pa_s;
    double t5_frame, t50_frame, t95_frame; /* in frames from the window's first */
    bool clipped;                          /* two samples in a row at full scale: measures are lower bounds */
    bool weak;                             /* energy less than 10 dB above the background's in T90 */
};

/* STATUS_NOT_FOUND when there is no energy above the background; the output is untouched then. */
enum status impulse_measure(const struct impulse_window *window, struct impulse_measures *out);

#endif
