/* Central moments of a stretch of sound, which stretches that adjoin add up to, and kurtosis from them.
 *
 * beta = mu4 / mu2^2 over the window [t1, t2] (kurtosis of ISO 18405:2017, 3.1.5.5; a Gaussian has 3). It
 * grows with the window, so it means nothing without its window and band (Mueller, von Benda-Beckmann,
 * Halvorsen and Ainslie, J. Acoust. Soc. Am. 148, 780, 2020). Stretches are merged by the pairwise formulas
 * of Pebay, "Formulas for robust, one-pass parallel computation of covariances and arbitrary-order
 * statistical moments", Sandia report SAND2008-6212, 2008. */
#ifndef LEVEL_MOMENTS_H
#define LEVEL_MOMENTS_H

/* Of n samples: their mean and the sums of the 2nd to 4th power of what differs from it. All zero: none. */
struct moments {
    double n, mean, sum2, sum3, sum4;
};

/* From the sums of y to y^4 over n samples y = x - shift. */
struct moments moments_of_sums(double n, const double sums[4], double shift);
/* Adds the samples behind `more`. */
void moments_add(struct moments *moments, const struct moments *more);
/* NAN where there is no sound or no change in it. */
double moments_kurtosis(const struct moments *moments);

#define MOMENTS_GAUSSIAN 3.0
#define MOMENTS_IMPULSIVE 40.0 /* "fully impulsive" above: Martin, Lucke and Barclay, JASA 147, 2159, 2020   \
                                */

/* What Goley, Song and Kim ("Kurtosis corrected sound pressure level as a noise metric", J. Acoust. Soc. Am.
 * 129, 1475, 2011) add to a level for its kurtosis: 4.02 lg(beta / 3) dB, fitted to chinchillas under
 * A-weighting. Research: no criterion is compared with it. */
double moments_goley_db(double kurtosis);

#endif
