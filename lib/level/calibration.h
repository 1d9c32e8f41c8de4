/* Calibration of one channel: from full-scale samples to pascals (IEC 60565 sensitivity conventions). */
#ifndef LEVEL_CALIBRATION_H
#define LEVEL_CALIBRATION_H

#include <stdbool.h>
#include <stdint.h>

#define CALIBRATION_MAX_POINTS 32
#define CALIBRATION_ROOM_DB 6.0 /* of the clip level over the expected peak */

enum channel_role { ROLE_LISTEN, ROLE_MEASURE, ROLE_BOTH };

struct calibration {
    bool known;            /* false: levels are relative, in dB re full scale */
    double sensitivity_db; /* hydrophone sensitivity level, dB re 1 V/uPa, e.g. -180 */
    double gain_db;        /* of everything between hydrophone and converter */
    double full_scale_v;   /* zero-to-peak volts that read as 1.0 */
    uint32_t n_points;     /* of a sensitivity against frequency, in rising frequency; 0: one value for all */
    double point_hz[CALIBRATION_MAX_POINTS], point_db[CALIBRATION_MAX_POINTS]; /* dB re 1 V/uPa */
    double
        expected_peak_db; /* of the source at the channel, zero-to-peak, dB re 1 uPa; NAN where not stated */
    double self_noise_db; /* broadband self-noise SPL of the channel, dB re 1 uPa; NAN where not stated */
    enum channel_role role;
};

/* Pascals for a sample of 1.0 (full scale). An uncalibrated channel gives 1e-6 Pa, so that its "dB re 1 uPa"
 * are dB re full scale; every such level is marked relative. */
double calibration_pa_per_unit(const struct calibration *calibration);

/* Zero-to-peak level at which the channel clips, dB re 1 uPa (0 when uncalibrated). */
double calibration_clip_db(const struct calibration *calibration);

/* Sensitivity level at a frequency, dB re 1 V/uPa: linear in lg f between the points, constant beyond them.
 */
double calibration_sensitivity_db(const struct calibration *calibration, double hz);
/* What to add to a decidecade's level (n: level/level.h), which was measured with sensitivity_db alone. */
double calibration_band_offset_db(const struct calibration *calibration, int n);
/* Whether the channel can measure the source: its clip level is at least CALIBRATION_ROOM_DB over the
 * expected peak, or nothing is known of either. */
bool calibration_has_room(const struct calibration *calibration);

#endif
