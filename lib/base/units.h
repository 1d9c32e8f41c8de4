/* The one home of decibel arithmetic. Pascals inside; dB re 1 uPa, 1 uPa2 s, 1 uPa2 m2 s outside (ISO 18405).
 */
#ifndef BASE_UNITS_H
#define BASE_UNITS_H

/* SPL, dB re 1 uPa, of a mean-square pressure in Pa2; -INFINITY for 0. */
double units_spl_db(double mean_square_pa2);
/* SEL, dB re 1 uPa2 s, of a sound exposure in Pa2 s; -INFINITY for 0. */
double units_sel_db(double exposure_pa2_s);
/* Zero-to-peak sound pressure level, dB re 1 uPa, of a pressure in Pa. */
double units_peak_db(double peak_pa);
/* Ratio of powers and of amplitudes in dB, and back. */
double units_power_db(double power_ratio);
double units_amplitude_db(double amplitude_ratio);
double units_power_ratio(double db);
double units_amplitude_ratio(double db);
/* The level of the sum of two incoherent sounds. */
double units_sum_db(double a_db, double b_db);

#endif
