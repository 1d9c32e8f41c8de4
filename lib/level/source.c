/* Received, at 750 m, back-calculated: see the header. */
#include "level/source.h"
#include "base/student.h"
#include <math.h>
#include <stddef.h>

#define DECIDECADE 1.2589254117941673 /* 10^0.1 */

static struct source_number number(double db, double half_db)
{
    return (struct source_number){true, db, db - half_db, db + half_db, ""};
}

static struct source_number none(const char *reason)
{
    return (struct source_number){false, NAN, NAN, NAN, reason};
}

static double half_width(double spread_db)
{
    return student_quantile(0.95, INFINITY) * spread_db;
}

bool source_law_covers(const struct source_law *law, double low_hz, double high_hz)
{
    return low_hz >= law->low_hz / DECIDECADE && high_hz <= law->high_hz * DECIDECADE;
}

struct source_law source_law_of_fit(const struct fitted *fitted, enum criterion_metric metric, double low_hz,
                                    double high_hz)
{
    return (struct source_law){
        .metric = metric,
        .low_hz = low_hz,
        .high_hz = high_hz,
        .loss = {.law = LOSS_POWER, .n_db = fitted->n_db, .absorption_db_m = fitted->absorption_db_m},
        .n_spread_db = 0.5 * (fitted->n_high_db - fitted->n_low_db) / half_width(1.0),
        .scatter_db = fitted->scatter_db,
        .is_fitted = true,
        .fitted = *fitted,
    };
}

double source_range_m(const double source[3], const double hydrophone[3])
{
    double sum = 0.0;
    for (int i = 0; i < 3; i++)
        sum += (source[i] - hydrophone[i]) * (source[i] - hydrophone[i]);
    return isfinite(sum) ? sqrt(sum) : (double)NAN;
}

/* Decades between two ranges that lie outside those of the fit. */
static double decades_outside(const struct fitted *fitted, double from_m, double to_m)
{
    double low = log10(fmin(from_m, to_m)), high = log10(fmax(from_m, to_m));
    double inside = fmin(high, log10(fitted->farthest_m)) - fmax(low, log10(fitted->nearest_m));
    return high - low - fmax(inside, 0.0);
}

/* The spread of N times the decades; of a fit more for those outside its ranges. */
static double spread_between_db(const struct source_law *law, double from_m, double to_m)
{
    double spread = law->n_spread_db * fabs(log10(to_m / from_m));
    if (law->is_fitted)
        spread = hypot(spread, SOURCE_ASSUMED_N_SPREAD_DB * decades_outside(&law->fitted, from_m, to_m));
    return spread;
}

void source_law_between(const struct source_law *law, double from_m, double to_m, double *out_db,
                        double *out_spread_db)
{
    *out_db = loss_between_db(&law->loss, from_m, to_m);
    *out_spread_db = spread_between_db(law, from_m, to_m);
}

void source_sea_between(void *context, double frequency_hz, double from_m, double to_m, double *out_db,
                        double *out_spread_db)
{
    const struct source_sea *sea = context;
    const struct source_law *law = NULL;
    for (uint32_t i = 0; i < sea->n_laws && !law; i++)
        if (source_law_covers(&sea->laws[i], frequency_hz, frequency_hz))
            law = &sea->laws[i];
    struct loss loss = law ? law->loss : (struct loss){.law = LOSS_POWER, .n_db = sea->n_db};
    if (sea->has_water)
        loss.absorption_db_m = absorption_db_m(&sea->water, frequency_hz);
    *out_db = loss_between_db(&loss, from_m, to_m);
    *out_spread_db =
        law ? spread_between_db(law, from_m, to_m) : SOURCE_ASSUMED_N_SPREAD_DB * fabs(log10(to_m / from_m));
}

/* Why nothing but the received level can be given; NULL when more can. */
static const char *received_only(const struct source_measurement *m, const struct source_law *law)
{
    if (m->relative)
        return "the channel is uncalibrated";
    if (!(m->range_m > 0.0) || !isfinite(m->range_m))
        return "the range is unknown";
    if (!law)
        return "no loss law is known";
    if (law->metric != m->metric)
        return "the loss law is of another metric";
    if (!source_law_covers(law, m->low_hz, m->high_hz))
        return "the loss law is of another band";
    return NULL;
}

static struct source_number move_to_750(const struct source_measurement *m, const struct source_law *law)
{
    if (law->is_fitted) {
        double db, low_db, high_db;
        fitted_move(&law->fitted, m->range_m, m->level_db, SOURCE_NORMAL_M, &db, &low_db, &high_db);
        return number(db, hypot(high_db - db, half_width(m->spread_db)));
    }
    double moved = law->n_spread_db * log10(SOURCE_NORMAL_M / m->range_m);
    double spread = hypot(hypot(m->spread_db, law->scatter_db), moved);
    return number(m->level_db - loss_between_db(&law->loss, m->range_m, SOURCE_NORMAL_M), half_width(spread));
}

static struct source_number work_back(const struct source_measurement *m, const struct source_shape *shape,
                                      const struct source_law *law)
{
    if (m->metric == METRIC_PEAK || m->metric == METRIC_PEAK_TO_PEAK)
        return none("a peak does not fall as energy does, and is not worked back");
    if (m->metric != METRIC_SPL && m->metric != METRIC_SEL_SINGLE)
        return none("a sum over many impulses has no source level");
    if (shape->form == SOURCE_LINE)
        return none("a pile is a line source: it has no level of a point source in its near field");
    if (!loss_has_source(&law->loss))
        return none("the loss law does not reach back to 1 m");
    if (shape->form == SOURCE_ARRAY && !isfinite(m->off_axis_deg))
        return none("the direction from the array's axis is unknown");
    if (shape->form == SOURCE_ARRAY && fabs(m->off_axis_deg) > shape->lobe_deg)
        return none("the hydrophone is off the array's axis");
    double far_m = shape->aperture_m * shape->aperture_m * shape->main_hz / m->sound_speed_m_s;
    if (shape->form == SOURCE_ARRAY && !(m->range_m >= far_m))
        return none("the hydrophone is in the array's near field");
    double spread = hypot(hypot(m->spread_db, law->scatter_db), spread_between_db(law, 1.0, m->range_m));
    return number(m->level_db + loss_db(&law->loss, m->range_m), half_width(spread));
}

enum status source_numbers_get(const struct source_measurement *measurement, const struct source_shape *shape,
                               const struct source_law *law, struct source_numbers *out)
{
    const struct source_measurement *m = measurement;
    if (!isfinite(m->level_db) || !isfinite(m->spread_db) || m->spread_db < 0.0 || !(m->low_hz >= 0.0) ||
        !(m->high_hz > m->low_hz) || (law && loss_check(&law->loss) != STATUS_OK))
        return STATUS_OUT_OF_RANGE;
    struct source_numbers result = {.metric = m->metric,
                                    .low_hz = m->low_hz,
                                    .high_hz = m->high_hz,
                                    .range_m = m->range_m > 0.0 ? m->range_m : (double)NAN,
                                    .off_axis_deg = m->off_axis_deg,
                                    .relative = m->relative,
                                    .lower_bound = m->lower_bound,
                                    .received = number(m->level_db, half_width(m->spread_db)),
                                    .model = law ? loss_law_text(law->loss.law) : "",
                                    .n_db = law && law->loss.law == LOSS_POWER ? law->loss.n_db : (double)NAN,
                                    .n_spread_db = law ? law->n_spread_db : (double)NAN,
                                    .is_fitted = law && law->is_fitted};
    const char *reason = received_only(m, law);
    result.measured_at_750_m =
        !m->relative && fabs(m->range_m - SOURCE_NORMAL_M) <= SOURCE_NORMAL_TOLERANCE * SOURCE_NORMAL_M;
    result.at_750_m = reason ? none(reason) : move_to_750(m, law);
    result.back_calculated = reason ? none(reason) : work_back(m, shape, law);
    *out = result;
    return STATUS_OK;
}

const char *source_level_text(enum criterion_metric metric)
{
    return metric == METRIC_SPL ? "source level" : metric == METRIC_SEL_SINGLE ? "energy source level" : "";
}
