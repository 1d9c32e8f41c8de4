/* What no detector can beat, in closed form, and the tails and bounds by which rates are judged. */
#ifndef SUPPORT_IDEAL_H
#define SUPPORT_IDEAL_H

#include <stdint.h>

/* Upper tail of chi-square with 2 k degrees of freedom (Erlang's sum). */
double ideal_chi_square_tail(uint32_t k, double x);
/* The same, noncentral by lambda: a Poisson mixture of central ones. With k = 1 it is Marcum's Q1(sqrt
 * lambda, sqrt threshold). */
double ideal_detection(uint32_t k, double lambda, double threshold);
/* The threshold that noise alone exceeds with this probability. */
double ideal_threshold(uint32_t k, double false_alarm);

/* 2E/N0 for detection probability pd at false_per_hour, with W looks a second: of the energy detector that
 * knows the noise, W and T (Urkowitz, "Energy detection of unknown deterministic signals", Proc. IEEE 55,
 * 1967; W T rounded to a whole number), and of the filter matched to the signal but for its phase. */
double ideal_energy_lambda(double w_hz, double t_s, double false_per_hour, double pd);
double ideal_matched_lambda(double w_hz, double false_per_hour, double pd);

/* Upper tail of the gamma law of that shape and scale 1 (series and continued fraction, Abramowitz and Stegun
 * 6.5.29 and 6.5.31). */
double ideal_gamma_tail(double shape, double x);
/* What a gamma variable of whole order n exceeds with the probability p. */
double ideal_gamma_quantile(uint32_t n, double p);

#define IDEAL_TAIL_STEPS 4

/* How often noise exceeds a threshold, as scale * (gamma tail of `shape` at shape * threshold). */
struct ideal_tail {
    double scale, shape;
};

/* Fits the tail to how many of a detector's peaks in so many seconds of noise exceeded each of four rising
 * thresholds (power over mean power), by maximum likelihood of Poisson counts between them. */
struct ideal_tail ideal_tail_fit(const double thresholds[IDEAL_TAIL_STEPS],
                                 const uint64_t counts[IDEAL_TAIL_STEPS], double seconds);
/* Exceedings a second, and the threshold at which there are so many. */
double ideal_tail_rate(const struct ideal_tail *tail, double threshold);
double ideal_tail_threshold(const struct ideal_tail *tail, double per_second);

/* The mean of a Poisson law that n counted events leave possible at most, with that one-sided confidence
 * (Garwood, "Fiducial limits for the Poisson distribution", Biometrika 28, 1936: a quantile of the gamma
 * law). */
double ideal_poisson_upper(uint32_t n, double confidence);

/* Where a rising share crosses 0.9, between the points given, in their order; INFINITY where it does not. */
double ideal_crossing(const double *at, const double *share, uint32_t n);
/* The argument at which the standard normal law reaches p. */
double ideal_normal_quantile(double p);

#endif
