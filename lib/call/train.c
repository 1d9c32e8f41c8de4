/* What the pulses of a train look like together. */
#include "call/train.h"
#include "base/median.h"
#include "base/units.h"
#include "call/certainty.h"
#include <math.h>

#define BENEFIT 1.5 /* of the doubt, for one pulse beside the median of many: a judgement, no source */
#define DOUBTS 2.0  /* standard deviations, likewise */

static double snr_of(const struct pulse *pulse)
{
    return pulse->snr;
}
static double centroid_of(const struct pulse *pulse)
{
    return pulse->shape.centroid_hz;
}
static double bandwidth_of(const struct pulse *pulse)
{
    return pulse->shape.bandwidth_hz;
}
static double length_of(const struct pulse *pulse)
{
    return pulse->shape.length_s;
}
static double sweep_of(const struct pulse *pulse)
{
    return pulse->shape.sweep_hz_s;
}

static double median_over(const struct train_pulses *pulses, double *scratch,
                          double (*value_of)(const struct pulse *pulse))
{
    for (uint32_t i = 0; i < pulses->n; i++)
        scratch[i] = value_of(pulses->get(pulses->context, i));
    return median_of(scratch, pulses->n);
}

void train_describe(const struct train_pulses *pulses, double *scratch, double *arrivals, struct train *out)
{
    for (uint32_t i = 0; i < pulses->n; i++)
        arrivals[i] = pulses->get(pulses->context, i)->frame;
    out->arrivals = arrivals;
    const struct pulse *first = pulses->get(pulses->context, 0);
    const struct pulse *last = pulses->get(pulses->context, pulses->n - 1);
    out->start_frame = first->frame;
    out->end_frame = last->frame;
    out->start_energy = first->energy;
    out->end_energy = last->energy;
    out->n_pulses = pulses->n;
    out->snr_db = units_power_db(median_over(pulses, scratch, snr_of));
    out->centroid_hz = median_over(pulses, scratch, centroid_of);
    out->bandwidth_hz = median_over(pulses, scratch, bandwidth_of);
    out->length_s = median_over(pulses, scratch, length_of);
    out->sweep_hz_s = median_over(pulses, scratch, sweep_of);
}

bool train_fits(const struct train *train, const struct train_shape *shape)
{
    return train->centroid_hz >= shape->min_centroid_hz && train->centroid_hz <= shape->max_centroid_hz &&
           train->length_s >= shape->min_length_s && train->length_s <= shape->max_length_s &&
           train->sweep_hz_s >= shape->min_sweep_hz_s && train->sweep_hz_s <= shape->max_sweep_hz_s &&
           train->bandwidth_hz >= shape->min_bandwidth_hz && train->bandwidth_hz <= shape->max_bandwidth_hz;
}

bool train_is_narrow(const struct pulse *pulse, const struct train_shape *shape)
{
    return (double)pulse->shape.bandwidth_hz * BENEFIT < shape->min_bandwidth_hz;
}

/* The Cramer-Rao bound of a sweep rate (Rife and Boorstyn's case of a quadratic phase, from memory: variance
 * 90 / (pi^2 T^4 E/N0) of a rectangular pulse). */
static double sweep_doubt(const struct pulse *pulse, const struct call_class *call_class)
{
    double length_s = pulse->shape.length_s, width_hz = call_class->high_hz - call_class->low_hz;
    double energy = pulse->snr * width_hz * call_class->train.pulse_s; /* over the noise's density */
    return sqrt(90 / fmax(energy, 1e-9)) / (M_PI * fmax(length_s * length_s, 1e-18));
}

bool train_may_have(const struct pulse *pulse, const struct call_class *call_class)
{
    const struct train_shape *shape = &call_class->train;
    double length_s = pulse->shape.length_s, bandwidth_hz = pulse->shape.bandwidth_hz;
    double sweep_hz_s = pulse->shape.sweep_hz_s, doubt = DOUBTS * sweep_doubt(pulse, call_class);
    return !train_is_narrow(pulse, shape) && bandwidth_hz <= shape->max_bandwidth_hz * BENEFIT &&
           length_s * BENEFIT >= shape->min_length_s && length_s <= shape->max_length_s * BENEFIT &&
           sweep_hz_s + doubt >= shape->min_sweep_hz_s && sweep_hz_s - doubt <= shape->max_sweep_hz_s;
}

void train_measure(const struct train *train, const struct call_class *call_class, double out[CALL_MEASURES])
{
    const struct train_shape *shape = &call_class->train;
    out[TRAIN_EXCESS] = log1p(fmax(0, train->excess));
    out[TRAIN_STRAYS] = log(0.1 + train->strays);
    out[TRAIN_JITTER] = log(0.01 + train->jitter / shape->max_jitter);
    out[TRAIN_LIKENESS] = train->likeness;
    out[TRAIN_LENGTH] = fabs(log(fmax(1e-6, train->length_s) / shape->pulse_s));
    out[TRAIN_BANDWIDTH] = log(fmax(1e-3, train->bandwidth_hz / (call_class->high_hz - call_class->low_hz)));
    out[TRAIN_STRENGTH] = fmin(30, train->snr_db - shape->min_snr_db);
}
