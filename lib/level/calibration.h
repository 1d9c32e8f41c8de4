/* Calibration of one channel: from full-scale samples to pascals (IEC 60565 sensitivity conventions). */
#ifndef LEVEL_CALIBRATION_H
#define LEVEL_CALIBRATION_H

#include <stdbool.h>

enum channel_role { ROLE_LISTEN, ROLE_MEASURE, ROLE_BOTH };

struct calibration {
    bool known;            /* false: levels are relative, in dB re full scale */
    double sensitivity_db; /* hydrophone sensitivity level, dB re 1 V/uPa, e.g. -180 */
    double gain_db;        /* of everything between hydrophone and converter */
    double full_scale_v;   /* zero-to-peak volts that read as 1.0 */
    double self_noise_db;  /* broadband self-noise SPL of the channel, dB re 1 uPa; NAN where not stated */
    enum channel_role role;
};

/* Pascals for a sample of 1.0 (full scale). An uncalibrated channel gives 1e-6 Pa, so that its "dB re 1 uPa"
 * are dB re full scale; every such level is marked relative. */
double calibration_pa_per_unit(const struct calibration *calibration);

/* Zero-to-peak level at which the channel clips, dB re 1 uPa (0 when uncalibrated). */
double calibration_clip_db(const struct calibration *calibration);

#endif
