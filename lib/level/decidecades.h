/* Decidecade energies of one channel, second by second (IEC 61260-1:2014, base ten, b = 3, fr = 1 kHz).
 *
 * Method. High bands: power spectra of half-overlapped frames under a sine window, whose squares sum to one
 * (Princen and Bradley, 1986), so that the energies of the frames tile the sound without gap or overlap; each
 * band spans at least 16 bins, the bins at its edges count by the part that lies inside. Frames that lie
 * across two seconds are shared out by time. Middle bands: the same on a decimated signal, made from the
 * lowest bins of the frames by inverse transform, the sine window again, and overlap-add (Crochiere, "A
 * weighted overlap-add method of short-time Fourier analysis/synthesis", IEEE Trans. ASSP 28, 1980). Low
 * bands: at 1.2 to 2.4 kHz, Butterworth band-pass filters of order 4, narrowed so that their noise bandwidth
 * is the band's; they delay energy by 0.85 / bandwidth (0.37 s at 10 Hz), which is not undone. */
#ifndef LEVEL_DECIDECADES_H
#define LEVEL_DECIDECADES_H

#include "base/status.h"
#include "level/level.h"
#include <stdint.h>

struct decidecades;

/* Mean squares of one second's bands. */
struct decidecade_sums {
    double energy[LEVEL_MAX_BANDS]; /* mean square times frames */
    double frames[LEVEL_MAX_BANDS]; /* that the energy stands for */
};

/* Exact edges of decidecade n in Hz. */
double decidecades_low_hz(int n);
double decidecades_high_hz(int n);
/* Bands whose upper edge lies below 0.94 of the Nyquist frequency, from LEVEL_FIRST_BAND up. */
uint32_t decidecades_count(double rate_hz);

/* rate_hz 8,000 to 1,000,000. Plans FFTs: at start only. */
enum status decidecades_create(uint32_t rate_hz, struct decidecades **out);
void decidecades_destroy(struct decidecades *decidecades);
/* Forgets the past; the next frame to be pushed has this number. */
void decidecades_reset(struct decidecades *decidecades, uint64_t next_frame);
/* How many frames one push takes, always. */
uint32_t decidecades_get_hop(const struct decidecades *decidecades);
void decidecades_push(struct decidecades *decidecades, const float *pascals);
/* Every band is complete up to this frame. At most 0.4 s before the last frame pushed. */
uint64_t decidecades_get_complete(const struct decidecades *decidecades);
/* Gives the sums of the second [second * rate, (second + 1) * rate) and clears them. The last four seconds
 * are held. */
void decidecades_take(struct decidecades *decidecades, uint64_t second, struct decidecade_sums *out);

#endif
