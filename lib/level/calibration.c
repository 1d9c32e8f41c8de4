/* From full-scale samples to pascals. */
#include "level/calibration.h"
#include "base/units.h"
#include <math.h>

double calibration_pa_per_unit(const struct calibration *calibration)
{
    if (!calibration->known)
        return 1e-6;
    /* sensitivity is volts per micropascal, so volts / sensitivity is micropascals. */
    double volts = calibration->full_scale_v * units_amplitude_ratio(-calibration->gain_db);
    return volts / units_amplitude_ratio(calibration->sensitivity_db) * 1e-6;
}

double calibration_clip_db(const struct calibration *calibration)
{
    return units_peak_db(calibration_pa_per_unit(calibration));
}

double calibration_sensitivity_db(const struct calibration *calibration, double hz)
{
    const double *at = calibration->point_hz, *db = calibration->point_db;
    const uint32_t n = calibration->n_points;
    if (n == 0)
        return calibration->sensitivity_db;
    if (hz <= at[0])
        return db[0];
    for (uint32_t i = 1; i < n; i++)
        if (hz <= at[i])
            return db[i - 1] + (db[i] - db[i - 1]) * log(hz / at[i - 1]) / log(at[i] / at[i - 1]);
    return db[n - 1];
}

double calibration_band_offset_db(const struct calibration *calibration, int n)
{
    if (!calibration->known || calibration->n_points == 0)
        return 0;
    return calibration->sensitivity_db - calibration_sensitivity_db(calibration, 1000 * pow(10, n / 10.0));
}

bool calibration_has_room(const struct calibration *calibration)
{
    if (!calibration->known || isnan(calibration->expected_peak_db))
        return true;
    return calibration_clip_db(calibration) >= calibration->expected_peak_db + CALIBRATION_ROOM_DB;
}
