/* Moments and kurtosis. */
#include "level/moments.h"
#include <math.h>

#define GOLEY_DB 4.02

struct moments moments_of_sums(double n, const double sums[4], double shift)
{
    struct moments out = {.n = n};
    if (!(n > 0))
        return out;
    double a = sums[0] / n, a2 = a * a;
    out.mean = a + shift;
    out.sum2 = fmax(sums[1] - n * a2, 0);
    out.sum3 = sums[2] - 3 * a * sums[1] + 2 * n * a2 * a;
    out.sum4 = fmax(sums[3] - 4 * a * sums[2] + 6 * a2 * sums[1] - 3 * n * a2 * a2, 0);
    return out;
}

void moments_add(struct moments *moments, const struct moments *more)
{
    const struct moments a = *moments, b = *more;
    const double n = a.n + b.n;
    if (!(b.n > 0))
        return;
    const double d = b.mean - a.mean, d2 = d * d, ab = a.n * b.n;
    moments->n = n;
    moments->mean = a.mean + d * b.n / n;
    moments->sum2 = a.sum2 + b.sum2 + d2 * ab / n;
    moments->sum3 =
        a.sum3 + b.sum3 + d2 * d * ab * (a.n - b.n) / (n * n) + 3 * d * (a.n * b.sum2 - b.n * a.sum2) / n;
    moments->sum4 = a.sum4 + b.sum4 + d2 * d2 * ab * (a.n * a.n - ab + b.n * b.n) / (n * n * n) +
                    6 * d2 * (a.n * a.n * b.sum2 + b.n * b.n * a.sum2) / (n * n) +
                    4 * d * (a.n * b.sum3 - b.n * a.sum3) / n;
}

double moments_kurtosis(const struct moments *moments)
{
    if (!(moments->sum2 > 0))
        return NAN;
    return moments->n * moments->sum4 / (moments->sum2 * moments->sum2);
}

double moments_goley_db(double kurtosis)
{
    return GOLEY_DB * log10(kurtosis / MOMENTS_GAUSSIAN);
}
