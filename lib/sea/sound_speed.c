/* Leroy, Robinson and Goldsmith (2008), equation for all oceans; Mackenzie (1981); Coppens (1981). */
#include "sea/sound_speed.h"
#include <math.h>

double sea_sound_speed_m_s(double temperature_c, double salinity, double depth_m, double latitude_deg)
{
    double t = temperature_c, s = salinity, z = depth_m, latitude = fabs(latitude_deg);
    double at_surface = 1402.5 + 5.0 * t - 5.44e-2 * t * t + 2.1e-4 * t * t * t + 1.33 * s - 1.23e-2 * s * t +
                        8.7e-5 * s * t * t;
    double by_depth = 1.56e-2 * z + 2.55e-7 * z * z - 7.3e-12 * z * z * z + 1.2e-6 * z * (latitude - 45.0);
    double mixed = -9.5e-13 * t * z * z * z + 3e-7 * t * t * z + 1.43e-5 * s * z;
    return at_surface + by_depth + mixed;
}

double sea_sound_speed_mackenzie_m_s(double temperature_c, double salinity, double depth_m)
{
    double t = temperature_c, s = salinity - 35.0, d = depth_m;
    return 1448.96 + 4.591 * t - 5.304e-2 * t * t + 2.374e-4 * t * t * t + 1.340 * s + 1.630e-2 * d +
           1.675e-7 * d * d - 1.025e-2 * t * s - 7.139e-13 * t * d * d * d;
}

double sea_sound_speed_coppens_m_s(double temperature_c, double salinity, double depth_m)
{
    double t = temperature_c / 10.0, s = salinity - 35.0, d_km = depth_m / 1e3;
    double at_surface =
        1449.05 + 45.7 * t - 5.21 * t * t + 0.23 * t * t * t + (1.333 - 0.126 * t + 0.009 * t * t) * s;
    return at_surface + (16.23 + 0.253 * t) * d_km + (0.213 - 0.1 * t) * d_km * d_km +
           (0.016 + 0.0002 * s) * s * t * d_km;
}
