/* Adaptive background of a spectrum: what each bin holds when nothing calls.
 *
 * Each bin follows a low quantile (0.3) of its power by stochastic approximation (Robbins and Monro 1951; the
 * order statistic after Rohling 1983): a call raises it only while it lasts, by at most 0.5 dB a second, and
 * a bin that calls fill for less than 70 % of the time keeps its level. Steps are ratios, so this is the
 * log-domain tracker without logarithms. The first frames take large steps (it learns in 2 s), later ones
 * small. The quantile is turned into a mean power by the exponential distribution that noise has in a bin of
 * one spectrum. What raises most of a stretch of 32 bins at once (a blow, a shot, a ship that comes near) is
 * broadband and raises their background at once, by the median over frequency (after Gillespie et al. 2013).
 *
 * Where one says that the tail of a known impulse is heard, what it raises teaches the background nothing;
 * its colour (each bin over the median) is learned by itself, so that in the tail each bin is judged by what
 * the tail holds there. */
#ifndef DSP_BACKGROUND_H
#define DSP_BACKGROUND_H

#include "base/status.h"
#include <stdbool.h>
#include <stdint.h>

struct background;

/* STATUS_BAD_ARGUMENT for no bins or a rate that is not positive. */
enum status background_create(uint32_t n_bins, double frames_per_s, struct background **out);
void background_destroy(struct background *background);
/* How fast a bin that is always above goes up, 0.5 dB/s where this is not called: slower for calls that last
 * longer. Before the first push. */
void background_set_rise(struct background *background, double rise_db_s);
/* The mean power of each bin that is expected without a call in this frame, [n_bins], both ways; then learns
 * from the frame. */
void background_push(struct background *background, const float *power, float *out_background);
/* From the next frame on the tail of a known impulse is heard in bins [low, high) (`true`), or no more. */
void background_set_tail(struct background *background, uint32_t low, uint32_t high, bool is_heard);
/* Whether enough frames (1 s, at least 8) were heard for the estimate to be trusted. */
bool background_is_ready(const struct background *background);
/* Takes `power` as the mean of this bin from now on, where it is more: a steady line was recognised. */
void background_raise(struct background *background, uint32_t bin, float power);

#endif
