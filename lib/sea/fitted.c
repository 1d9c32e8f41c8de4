/* Moving levels along a fitted law. */
#include "base/student.h"
#include "sea/fit.h"
#include <math.h>

void fitted_between(const struct fitted *fitted, double from_m, double to_m, double *out_db,
                    double *out_spread_db)
{
    double from = log10(from_m / FIT_REFERENCE_M), to = log10(to_m / FIT_REFERENCE_M);
    double x = to - from, q = to * to - from * from;
    *out_db = -fitted->slope_db * x - fitted->bend_db * q + fitted->absorption_db_m * (to_m - from_m);
    double variance = x * x * fitted->variance[1][1] + 2.0 * x * q * fitted->variance[1][2] +
                      q * q * fitted->variance[2][2];
    *out_spread_db = sqrt(fmax(variance, 0.0));
}

void fitted_move(const struct fitted *fitted, double range_m, double level_db, double to_m, double *out_db,
                 double *out_low_db, double *out_high_db)
{
    double fall_db, spread_db;
    fitted_between(fitted, range_m, to_m, &fall_db, &spread_db);
    double half = hypot(student_quantile(0.95, INFINITY) * fitted->scatter_db, fitted->quantile * spread_db);
    *out_db = level_db - fall_db;
    *out_low_db = *out_db - half;
    *out_high_db = *out_db + half;
}
