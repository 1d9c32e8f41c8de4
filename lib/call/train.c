/* What the pulses of a train look like together. */
#include "call/train.h"
#include "base/median.h"
#include "base/units.h"

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
