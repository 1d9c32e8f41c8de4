/* Absorption of sound in sea water. */
#ifndef SEA_ABSORPTION_H
#define SEA_ABSORPTION_H

/* The water's part of an absorption equation, worked out once: relaxation frequencies and strengths of boric
 * acid and magnesium sulphate, and pure water. Plain data; copy freely. */
struct absorption {
    double boric_hz, boric_db_m_hz;       /* relaxation frequency; dB/m per Hz */
    double sulphate_hz, sulphate_db_m_hz; /* the same of magnesium sulphate */
    double water_db_m_hz2;                /* dB/m per Hz2 */
};

/* Francois and Garrison, "Sound absorption based on ocean measurements, part II", J. Acoust. Soc. Am. 72,
 * 1879 (1982): 10 Hz to 1 MHz, temperature -2 to 30 degree Celsius, salinity 30 to 35 (8 at less accuracy),
 * depth in m to 3500, pH 7.7 to 8.3. */
struct absorption absorption_of(double temperature_c, double salinity, double depth_m, double ph);

/* Ainslie and McColm, "A simplified formula for viscous and chemical absorption in sea water", J. Acoust.
 * Soc. Am. 103, 1671 (1998): within 10 % of Francois and Garrison from 100 Hz to 1 MHz, for -6 to 35 degree
 * Celsius, salinity 5 to 50, pH 7.7 to 8.3, depth 0 to 7000 m. Depth in m here; in the paper it is in km. */
struct absorption absorption_simplified(double temperature_c, double salinity, double depth_m, double ph);

/* dB per metre at a frequency in Hz. */
double absorption_db_m(const struct absorption *water, double frequency_hz);

#endif
