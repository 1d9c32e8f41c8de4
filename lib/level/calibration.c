/* From full-scale samples to pascals. */
#include "level/calibration.h"
#include "base/units.h"

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
