/* Coates (1990) after Wenz (1962); frequencies in kHz as printed. */
#include "sea/noise.h"
#include "base/units.h"
#include <math.h>

double sea_noise_db(double frequency_hz, double wind_m_s, double shipping)
{
    double f = frequency_hz / 1e3, lg_f = log10(f);
    double turbulence = 17.0 - 30.0 * lg_f;
    double ships = 40.0 + 20.0 * (shipping - 0.5) + 26.0 * lg_f - 60.0 * log10(f + 0.03);
    double wind = 50.0 + 7.5 * sqrt(wind_m_s) + 20.0 * lg_f - 40.0 * log10(f + 0.4);
    double thermal = -15.0 + 20.0 * lg_f;
    return units_sum_db(units_sum_db(turbulence, ships), units_sum_db(wind, thermal));
}
