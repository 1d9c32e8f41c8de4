/* Ambient noise of the deep sea: spectral density by frequency, wind and distant shipping. */
#ifndef SEA_NOISE_H
#define SEA_NOISE_H

/* Mean-square sound pressure spectral density level, dB re 1 uPa2/Hz, at a frequency (1 Hz to 1 MHz), a wind
 * speed (m/s) and a shipping density (0 none to 1 heavy): the power sum of turbulence, shipping, wind and
 * thermal noise of Coates, "Underwater acoustic systems" (1990), a fit to the curves of Wenz, J. Acoust. Soc.
 * Am. 34, 1936 (1962), as printed by Stojanovic, ACM Mobile Comput. Commun. Rev. 11, 34 (2007). A rough guide
 * at best: measured noise differs by 10 dB and more. */
double sea_noise_db(double frequency_hz, double wind_m_s, double shipping);

#endif
