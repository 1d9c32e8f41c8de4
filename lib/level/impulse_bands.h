/* Decidecade SEL of one impulse (bands of IEC 61260-1:2014, level/decidecades.h), for level/impulses.c.
 *
 * The window's samples, less their mean, under raised-cosine ends of 16 ms that keep the cut from leaking,
 * are padded with zeros to a power of two; by Parseval's theorem the power of the bins is the window's
 * energy. Bins at a band's edge count by the part that lies inside. The energy that the background has in a
 * band over the same time is taken off: from quiet stretches before impulses, analysed alike, averaged over
 * the last 8. A band less than 3 dB above its background has no level: below that difference no correction is
 * valid (ISO 17208-1:2016). */
#ifndef LEVEL_IMPULSE_BANDS_H
#define LEVEL_IMPULSE_BANDS_H

#include "base/status.h"
#include "level/level.h"
#include <stdint.h>

#define IMPULSE_BANDS_TAPER_S 0.016

struct impulse_bands;

/* max_frames: of a window, up to 1 << 21. Plans FFTs: at start only. STATUS_BAD_ARGUMENT, STATUS_NO_MEMORY;
 * the caller owns *out. */
enum status impulse_bands_create(double rate_hz, uint32_t max_frames, struct impulse_bands **out);
void impulse_bands_destroy(struct impulse_bands *bands);
/* Forgets the background. */
void impulse_bands_reset(struct impulse_bands *bands);
/* Learns the background from n quiet samples (longer than two tapers) whose mean is mean_pa. */
void impulse_bands_learn(struct impulse_bands *bands, const float *pascals, uint32_t n, double mean_pa);
/* SEL of each band of the rate, dB re 1 uPa2 s; NAN where it does not stand out, and everywhere while no
 * background is known. Bands above the rate's are NAN. */
void impulse_bands_measure(struct impulse_bands *bands, const float *pascals, uint32_t n, double mean_pa,
                           double out_sel_db[LEVEL_MAX_BANDS]);
/* How many bands the rate has. */
uint32_t impulse_bands_count(const struct impulse_bands *bands);

#endif
