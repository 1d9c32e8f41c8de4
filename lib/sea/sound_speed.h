/* Speed of sound in sea water. */
#ifndef SEA_SOUND_SPEED_H
#define SEA_SOUND_SPEED_H

/* m/s, from temperature (degree Celsius, -1 to 30), practical salinity (0 to 42), depth (m, 0 to 12000) and
 * latitude (degrees, the sign does not matter). Leroy, Robinson and Goldsmith, "A new equation for the
 * accurate calculation of sound speed in all oceans", J. Acoust. Soc. Am. 124, 2774 (2008): within 0.2 m/s of
 * the reference equations, and unlike Mackenzie (1981) also good for brackish water. */
double sea_sound_speed_m_s(double temperature_c, double salinity, double depth_m, double latitude_deg);

#endif
