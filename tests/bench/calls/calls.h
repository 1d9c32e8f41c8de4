/* The measuring bench of the detectors: pieces that drive the real detectors with the real catalogue and give
 * what they measured as JSON. `make bench-calls` runs them and prints one table; tests/scenario/calls_*.c run
 * short forms of them against limits. Signal-to-noise ratios, as every row states:
 *   pulse: 2E/N0, and 20 lg(envelope's peak / standard deviation of the noise in the class's band);
 *   tone:  mean over the contour of the call's cell power over the noise's mean (in seas: median) in the same
 *          bin, Hann window, half overlap, FFT size stated. */
#ifndef BENCH_CALLS_H
#define BENCH_CALLS_H

#include "base/random.h"
#include "call/catalogue.h"
#include "flow.h"
#include "scene/scene.h"
#include <jansson.h>
#include <stdbool.h>
#include <stdint.h>

#define CALLS_STRETCH_S 1200.0 /* a confounder's sea is another one after so long */

struct calls_setup {
    const struct catalogue *catalogue; /* borrowed */
    uint64_t seed;
    double scale; /* of the trials and lengths of the bench: 1; less in a test */
};

/* Each gives a new object {"rows": [...], ...}, or NULL without memory or where something failed. */
json_t *calls_pulses(const struct calls_setup *setup);
json_t *calls_trains(const struct calls_setup *setup);
json_t *calls_tones(const struct calls_setup *setup);
json_t *calls_voices(const struct calls_setup *setup);
json_t *calls_costs(const struct calls_setup *setup);
/* One sea (calls_seas_count of them), and one confounder (calls_confounders_count) for `hours`. */
json_t *calls_sea(const struct calls_setup *setup, uint32_t number);
json_t *calls_confounder(const struct calls_setup *setup, uint32_t number, double hours);
uint32_t calls_seas_count(void);
uint32_t calls_confounders_count(void);
const char *calls_confounder_name(uint32_t number);
/* The lowest rate that carries it and what it could be taken for. */
double calls_confounder_rate(uint32_t number);
/* Adds it to a scene, with ranges and rhythms drawn. */
void calls_confounder_fill(uint32_t number, struct scene *scene, struct random *random);
/* A sea drawn by its number: rate, confounders (none to two), kinds of calls and their SNR. */
json_t *calls_mixed(const struct calls_setup *setup, uint32_t number);

/* The lowest usual sampling rate at which the class can be heard whole; 0 where none is. */
double calls_lowest_rate(const struct call_class *call_class);
/* null where it is not finite. */
json_t *calls_number(double x);
json_t *calls_numbers(const double *x, uint32_t n);
/* The p quantile of x[n], which it sorts; NAN of none. */
double calls_quantile(double *x, uint32_t n, double p);
/* Another seed for each purpose. */
uint64_t calls_seed(const struct calls_setup *setup, uint64_t purpose, uint64_t number);
/* How many trials of `n`, at least `least`. */
uint32_t calls_trials(const struct calls_setup *setup, uint32_t n, uint32_t least);

/* Classes of animals that pulses and trains of 8 are measured of: short pulses, a rhythm, no more pulses than
 * the train has. */
bool calls_has_train_of(const struct call_class *call_class, uint32_t n_pulses);
/* Frees a class of limits on what a pulse looks like: the pulse that fills its band and length is no
 * animal's. */
void calls_free_shape(struct call_class *call_class);

#endif
