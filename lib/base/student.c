/* Student's t by the incomplete beta function. */
#include "base/student.h"
#include <math.h>

#define MAX_TERMS 400
#define NORMAL_DOF 1e7 /* from here on the normal distribution, within 1e-7 of t */

/* Lentz's way to a continued fraction (Thompson and Barnett, J. Comput. Phys. 64, 490 (1986)). */
static double beta_fraction(double a, double b, double x)
{
    const double tiny = 1e-300;
    double c = 1.0, d = 1.0 - (a + b) * x / (a + 1.0);
    d = 1.0 / (fabs(d) < tiny ? tiny : d);
    double fraction = d;
    for (int m = 1; m <= MAX_TERMS; m++) {
        double change = 1.0;
        for (int odd = 0; odd < 2; odd++) {
            double term = odd ? -(a + m) * (a + b + m) * x / ((a + 2.0 * m) * (a + 2.0 * m + 1.0))
                              : m * (b - m) * x / ((a + 2.0 * m - 1.0) * (a + 2.0 * m));
            d = 1.0 + term * d;
            d = 1.0 / (fabs(d) < tiny ? tiny : d);
            c = 1.0 + term / c;
            c = fabs(c) < tiny ? tiny : c;
            change = c * d;
            fraction *= change;
        }
        if (fabs(change - 1.0) < 1e-15)
            break;
    }
    return fraction;
}

static double incomplete_beta(double a, double b, double x)
{
    if (x <= 0.0)
        return 0.0;
    if (x >= 1.0)
        return 1.0;
    double front = exp(lgamma(a + b) - lgamma(a) - lgamma(b) + a * log(x) + b * log1p(-x));
    if (x < (a + 1.0) / (a + b + 2.0))
        return front * beta_fraction(a, b, x) / a;
    return 1.0 - front * beta_fraction(b, a, 1.0 - x) / b;
}

double student_probability(double t, double dof)
{
    if (dof > NORMAL_DOF)
        return 0.5 * erfc(-t / sqrt(2.0));
    double tail = 0.5 * incomplete_beta(0.5 * dof, 0.5, dof / (dof + t * t));
    return t > 0.0 ? 1.0 - tail : tail;
}

double student_quantile(double p, double dof)
{
    if (!(p > 0.0 && p < 1.0 && dof > 0.0))
        return NAN;
    if (p > 0.5)
        return -student_quantile(1.0 - p, dof);
    double low = -1.0, high = 0.0;
    while (student_probability(low, dof) > p && low > -1e300)
        low *= 2.0;
    for (int i = 0; i < 200 && high - low > 1e-12 * fabs(low); i++) {
        double middle = 0.5 * (low + high);
        if (student_probability(middle, dof) < p)
            low = middle;
        else
            high = middle;
    }
    return 0.5 * (low + high);
}
