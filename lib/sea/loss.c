/* Spreading laws and isopleths; see the header for formulas and sources. */
#include "sea/loss.h"
#include <math.h>

#define NEAREST_M 1e-6
#define HALVINGS 100

static bool in_range(double x, double low, double high)
{
    return isfinite(x) && x >= low && x <= high;
}

static bool above_zero(double x)
{
    return isfinite(x) && x > 0.0;
}

enum status loss_check(const struct loss *loss)
{
    bool good = in_range(loss->absorption_db_m, 0.0, INFINITY);
    switch (loss->law) {
    case LOSS_POWER:
        good = good && above_zero(loss->n_db);
        break;
    case LOSS_TRANSITION:
        good = good && above_zero(loss->transition_m);
        break;
    case LOSS_DAMPED:
        good = good && in_range(loss->damping_db_m, 0.0, INFINITY);
        break;
    case LOSS_ENERGY_FLUX:
        good = good && above_zero(loss->depth_m) && above_zero(loss->critical_rad) &&
               loss->critical_rad <= M_PI / 2.0 && in_range(loss->eta_np_rad, 0.0, INFINITY);
        break;
    default:
        good = false;
    }
    return good ? STATUS_OK : STATUS_OUT_OF_RANGE;
}

bool loss_has_source(const struct loss *loss)
{
    return loss->law != LOSS_DAMPED;
}

static double energy_flux_db(const struct loss *loss, double r)
{
    double x = loss->critical_rad * sqrt(loss->eta_np_rad * r / loss->depth_m);
    double stripped = x < 1e-6 ? 1.0 : sqrt(M_PI) * erf(x) / (2.0 * x);
    double guided = 10.0 * log10(r * loss->depth_m / (2.0 * loss->critical_rad)) - 10.0 * log10(stripped);
    return fmin(guided, 20.0 * log10(r));
}

double loss_db(const struct loss *loss, double range_m)
{
    double absorbed = loss->absorption_db_m * range_m, lg_r = log10(range_m);
    switch (loss->law) {
    case LOSS_TRANSITION:
        return absorbed + 10.0 * lg_r + 10.0 * log10(fmin(range_m, loss->transition_m));
    case LOSS_DAMPED:
        return absorbed + 10.0 * lg_r + loss->damping_db_m * range_m;
    case LOSS_ENERGY_FLUX:
        return absorbed + energy_flux_db(loss, range_m);
    case LOSS_POWER:
    default:
        return absorbed + loss->n_db * lg_r;
    }
}

double loss_between_db(const struct loss *loss, double from_m, double to_m)
{
    return loss_db(loss, to_m) - loss_db(loss, from_m);
}

/* The range whose loss is wanted_db. */
static double range_of_loss(const struct loss *loss, double wanted_db)
{
    if (loss->law == LOSS_POWER && loss->absorption_db_m == 0.0) {
        double r = pow(10.0, wanted_db / loss->n_db);
        return r > LOSS_FARTHEST_M ? (double)INFINITY : r < NEAREST_M ? 0.0 : r;
    }
    if (loss_db(loss, LOSS_FARTHEST_M) < wanted_db)
        return INFINITY;
    if (loss_db(loss, NEAREST_M) > wanted_db)
        return 0.0;
    double low = log(NEAREST_M), high = log(LOSS_FARTHEST_M);
    for (int i = 0; i < HALVINGS && high - low > 1e-9; i++) {
        double middle = 0.5 * (low + high);
        if (loss_db(loss, exp(middle)) < wanted_db)
            low = middle;
        else
            high = middle;
    }
    return exp(0.5 * (low + high));
}

enum status loss_range_m(const struct loss *loss, double level_db, double at_m, double threshold_db,
                         double *out_m)
{
    if (loss_check(loss) != STATUS_OK || !above_zero(at_m) || !isfinite(level_db) || !isfinite(threshold_db))
        return STATUS_OUT_OF_RANGE;
    double wanted_db = loss_db(loss, at_m) + level_db - threshold_db;
    *out_m = range_of_loss(loss, wanted_db);
    return STATUS_OK;
}

enum status loss_source_range_m(const struct loss *loss, double source_db, double threshold_db, double *out_m)
{
    if (loss_check(loss) != STATUS_OK || !loss_has_source(loss) || !isfinite(source_db) ||
        !isfinite(threshold_db))
        return STATUS_OUT_OF_RANGE;
    *out_m = range_of_loss(loss, source_db - threshold_db);
    return STATUS_OK;
}

double loss_damping_db_m(double depth_m, double grazing_rad, double reflection)
{
    return -10.0 * tan(grazing_rad) / depth_m * log10(reflection);
}

double loss_cone_rad(double water_m_s, double pile_m_s)
{
    return asin(water_m_s / pile_m_s);
}

const char *loss_law_text(enum loss_law law)
{
    switch (law) {
    case LOSS_POWER:
        return "N lg r";
    case LOSS_TRANSITION:
        return "spherical then cylindrical";
    case LOSS_DAMPED:
        return "damped cylindrical";
    case LOSS_ENERGY_FLUX:
        return "energy flux";
    }
    return "unknown law";
}
