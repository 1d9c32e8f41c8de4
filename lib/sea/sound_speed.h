/* Speed of sound in sea water. */
#ifndef SEA_SOUND_SPEED_H
#define SEA_SOUND_SPEED_H

/* m/s, from temperature (degree Celsius, -1 to 30), practical salinity (0 to 42), depth (m, 0 to 12000) and
 * latitude (degrees, the sign does not matter). Leroy, Robinson and Goldsmith, "A new equation for the
 * accurate calculation of sound speed in all oceans", J. Acoust. Soc. Am. 124, 2774 (2008): within 0.2 m/s of
 * the reference equations, and unlike Mackenzie (1981) also good for brackish water. */
double sea_sound_speed_m_s(double temperature_c, double salinity, double depth_m, double latitude_deg);

/* Mackenzie, "Nine-term equation for sound speed in the oceans", J. Acoust. Soc. Am. 70, 807 (1981): -2 to 30
 * degree Celsius, salinity 25 to 40, depth 0 to 8000 m. Not for brackish water. */
double sea_sound_speed_mackenzie_m_s(double temperature_c, double salinity, double depth_m);

/* Coppens, "Simple equations for the speed of sound in Neptunian waters", J. Acoust. Soc. Am. 69, 862 (1981):
 * 0 to 35 degree Celsius, salinity 0 to 45, depth 0 to 4000 m. */
double sea_sound_speed_coppens_m_s(double temperature_c, double salinity, double depth_m);

#endif
