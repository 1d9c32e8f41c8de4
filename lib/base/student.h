/* Quantiles of Student's t distribution, for intervals of means and slopes. */
#ifndef BASE_STUDENT_H
#define BASE_STUDENT_H

/* P(T <= t) for dof degrees of freedom (above 0, need not be whole; INFINITY: the normal distribution), by
 * the continued fraction of the incomplete beta function (Abramowitz and Stegun, Handbook of Mathematical
 * Functions, 1964, 26.5.8 and 26.7.1). Within 1e-10. */
double student_probability(double t, double dof);

/* The t that is not exceeded with probability p (0 < p < 1); NAN for arguments outside. Within 1e-9 of t. */
double student_quantile(double p, double dof);

#endif
