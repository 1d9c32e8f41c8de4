/* The short-time power of a band whose noise falls or rises through it: the parts of the band are summed with
 * weights that make the background as dense in each as in the others, so that a pulse counts by what it is
 * over the noise around it. The sum of power over density is the locally optimal statistic for a weak
 * Gaussian signal of flat spectrum in coloured noise (the low-energy-coherence case of Van Trees, "Detection,
 * Estimation, and Modulation Theory, Part III", section 4.3). In white noise all weights are 1. A band of one
 * part is passed on as it is.
 *
 * The background of each part is the running median of its windows (window_median.h). */
#ifndef CALL_WHITENED_H
#define CALL_WHITENED_H

#include "base/status.h"
#include "call/bands.h"
#include "call/window_median.h"

struct whitened_setup {
    const struct bands *bands;           /* borrowed */
    struct band_parts parts;             /* aligned (bands_align); 1 or more */
    uint32_t window;                     /* slots */
    double step;                         /* of the medians */
    uint32_t block_slots, history_slots; /* of the bank */
};

struct whitened;

/* STATUS_NO_MEMORY; the caller owns *out. */
enum status whitened_create(const struct whitened_setup *setup, struct whitened **out);
void whitened_reset(struct whitened *whitened);
/* Takes the block that the bank has just taken. */
void whitened_push(struct whitened *whitened);
/* Weighted power of each slot of the block, Pa2, with the slots before it: as bands_get_power. Its mean in
 * the noise is that of the band. Valid until the next push. */
const float *whitened_get_power(const struct whitened *whitened);
/* Takes the window that ends with a slot of the block as one of the first WINDOW_MEDIAN_SETTLE. */
void whitened_settle_on(struct whitened *whitened, int64_t slot, uint32_t number);
/* Learns the weights from these; gives the same windows weighted, out[WINDOW_MEDIAN_SETTLE], and weights what
 * whitened_get_power gives anew. */
void whitened_settle(struct whitened *whitened, float *out);
/* Follows the background with the window that ends there. */
void whitened_follow(struct whitened *whitened, int64_t slot);
/* What the window that ends there holds more than the background, without weights, Pa2 (mean square). */
double whitened_get_excess(const struct whitened *whitened, int64_t slot, double background_pa2);
/* Sum of the power of n slots from `first` on, without weights. */
double whitened_sum(const struct whitened *whitened, int64_t first, uint32_t n);

/* The same of all slots of the block. */
double whitened_block_sum(const struct whitened *whitened);

/* The spectral density of the noise: through the middles of the parts, straight in the logarithms. */
struct noise_density {
    uint32_t n;
    double middle_hz[BANDS_MAX_PARTS], pa2_hz[BANDS_MAX_PARTS];
};
/* background_pa2: mean square of the whole band's noise. */
struct noise_density whitened_get_density(const struct whitened *whitened, double background_pa2);
double noise_density_at(const struct noise_density *density, double hz);
/* From the first to the last middle, dB a decade; 0 where there is one. */
double noise_density_slope(const struct noise_density *density);
void whitened_destroy(struct whitened *whitened);

#endif
