/* Leroy, Robinson and Goldsmith (2008), equation for all oceans. */
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
