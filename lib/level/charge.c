/* The peak of an explosion; see charge.h. */
#include "level/charge.h"
#include <math.h>

#define LOW_BELOW_DB 20.0
#define LEAST_APART_DB 6.0

double charge_peak_db(double weight_kg, double range_m)
{
    if (!(weight_kg > 0) || !(range_m > 0))
        return NAN;
    return 20 * log10(52.4e12) - 1.13 * 20 * log10(range_m / cbrt(weight_kg));
}

struct charge_judgement charge_judge(double peak_db, bool clipped, double range_m, double charge_kg,
                                     double donor_kg)
{
    bool donor = donor_kg > 0;
    struct charge_judgement out = {CHARGE_UNTOLD, charge_peak_db(charge_kg + (donor ? donor_kg : 0), range_m),
                                   NAN};
    out.low_db = donor ? charge_peak_db(donor_kg, range_m) : out.high_db - LOW_BELOW_DB;
    double apart_db = out.high_db - out.low_db, above_db = peak_db - (out.high_db + out.low_db) / 2;
    if (!isfinite(above_db) || !(apart_db >= LEAST_APART_DB))
        return out;
    if (above_db > apart_db / 4)
        out.order = CHARGE_HIGH_ORDER;
    else if (above_db < -apart_db / 4 && !clipped)
        out.order = CHARGE_LOW_ORDER;
    return out;
}

const char *charge_order_text(enum charge_order order)
{
    return order == CHARGE_HIGH_ORDER  ? "high order"
           : order == CHARGE_LOW_ORDER ? "low order"
                                       : "cannot be told";
}
