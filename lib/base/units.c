/* Decibel arithmetic; definitions of ISO 18405:2017. */
#include "base/units.h"
#include <math.h>

#define REFERENCE_PA 1e-6

double units_power_db(double power_ratio)
{
    return 10.0 * log10(power_ratio);
}

double units_amplitude_db(double amplitude_ratio)
{
    return 20.0 * log10(amplitude_ratio);
}

double units_power_ratio(double db)
{
    return pow(10.0, db / 10.0);
}

double units_amplitude_ratio(double db)
{
    return pow(10.0, db / 20.0);
}

double units_spl_db(double mean_square_pa2)
{
    return units_power_db(mean_square_pa2 / (REFERENCE_PA * REFERENCE_PA));
}

double units_sel_db(double exposure_pa2_s)
{
    return units_power_db(exposure_pa2_s / (REFERENCE_PA * REFERENCE_PA));
}

double units_peak_db(double peak_pa)
{
    return units_amplitude_db(peak_pa / REFERENCE_PA);
}

double units_sum_db(double a_db, double b_db)
{
    return units_power_db(units_power_ratio(a_db) + units_power_ratio(b_db));
}
