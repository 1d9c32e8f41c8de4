/* Rounding to decimals. */
#include "base/round.h"
#include <math.h>

double round_decimals(double x, int decimals)
{
    static const double scale[] = {1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9};
    if (!isfinite(x) || decimals < 0 || decimals > 9)
        return x;
    double rounded = round(x * scale[decimals]) / scale[decimals];
    return rounded == 0 ? 0 : rounded;
}
