/* Francois and Garrison (1982), Ainslie and McColm (1998); their equations are in kHz and dB/km. */
#include "sea/absorption.h"
#include <math.h>

#define DB_M_PER_HZ_FROM_KM_KHZ 1e-6
#define DB_M_PER_HZ2_FROM_KM_KHZ2 1e-9

static double pure_water(double t)
{
    if (t <= 20.0)
        return 4.937e-4 - 2.59e-5 * t + 9.11e-7 * t * t - 1.5e-8 * t * t * t;
    return 3.964e-4 - 1.146e-5 * t + 1.45e-7 * t * t - 6.5e-10 * t * t * t;
}

struct absorption absorption_of(double temperature_c, double salinity, double depth_m, double ph)
{
    double t = temperature_c, s = salinity, z = depth_m;
    double c = 1412.0 + 3.21 * t + 1.19 * s + 0.0167 * z;
    double boric = 8.86 / c * pow(10.0, 0.78 * ph - 5.0);
    double sulphate = 21.44 * s / c * (1.0 + 0.025 * t) * (1.0 - 1.37e-4 * z + 6.2e-9 * z * z);
    double water = pure_water(t) * (1.0 - 3.83e-5 * z + 4.9e-10 * z * z);
    double kelvin = t + 273.0; /* as printed in the paper, not 273.15 */
    return (struct absorption){
        .boric_hz = 1e3 * 2.8 * sqrt(s / 35.0) * pow(10.0, 4.0 - 1245.0 / kelvin),
        .boric_db_m_hz = boric * DB_M_PER_HZ_FROM_KM_KHZ,
        .sulphate_hz = 1e3 * 8.17 * pow(10.0, 8.0 - 1990.0 / kelvin) / (1.0 + 0.0018 * (s - 35.0)),
        .sulphate_db_m_hz = sulphate * DB_M_PER_HZ_FROM_KM_KHZ,
        .water_db_m_hz2 = water * DB_M_PER_HZ2_FROM_KM_KHZ2,
    };
}

struct absorption absorption_simplified(double temperature_c, double salinity, double depth_m, double ph)
{
    double t = temperature_c, s = salinity, z_km = depth_m / 1e3;
    return (struct absorption){
        .boric_hz = 1e3 * 0.78 * sqrt(s / 35.0) * exp(t / 26.0),
        .boric_db_m_hz = 0.106 * exp((ph - 8.0) / 0.56) * DB_M_PER_HZ_FROM_KM_KHZ,
        .sulphate_hz = 1e3 * 42.0 * exp(t / 17.0),
        .sulphate_db_m_hz = 0.52 * (1.0 + t / 43.0) * (s / 35.0) * exp(-z_km / 6.0) * DB_M_PER_HZ_FROM_KM_KHZ,
        .water_db_m_hz2 = 0.00049 * exp(-(t / 27.0 + z_km / 17.0)) * DB_M_PER_HZ2_FROM_KM_KHZ2,
    };
}

static double relaxation(double strength, double at_hz, double f2)
{
    return at_hz > 0.0 ? strength * at_hz * f2 / (at_hz * at_hz + f2) : 0.0;
}

double absorption_db_m(const struct absorption *water, double frequency_hz)
{
    double f2 = frequency_hz * frequency_hz;
    return relaxation(water->boric_db_m_hz, water->boric_hz, f2) +
           relaxation(water->sulphate_db_m_hz, water->sulphate_hz, f2) + water->water_db_m_hz2 * f2;
}
