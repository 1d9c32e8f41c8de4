/* What the pieces of the detectors' bench share; see calls.h. */
#include "bench/calls/calls.h"
#include "call/bands.h"
#include "call/pulses.h"
#include "call/tones.h"
#include <math.h>
#include <stdlib.h>

static bool carries(const struct call_class *call_class, double rate_hz)
{
    if (call_class->form == CALL_TONE)
        return call_class->high_hz <= 0.46 * rate_hz;
    return fmax(call_class->high_hz, call_class->train.guard_high_hz) <= BANDS_HIGHEST * rate_hz;
}

double calls_lowest_rate(const struct call_class *call_class)
{
    static const double rates_hz[] = {8000,  16000,  24000,  32000,  48000,  64000,
                                      96000, 128000, 192000, 256000, 384000, 500000};
    for (size_t i = 0; i < sizeof rates_hz / sizeof rates_hz[0]; i++)
        if (carries(call_class, rates_hz[i]))
            return rates_hz[i];
    return 0;
}

json_t *calls_number(double x)
{
    return isfinite(x) ? json_real(round(x * 1e6) / 1e6) : json_null();
}

json_t *calls_numbers(const double *x, uint32_t n)
{
    json_t *array = json_array();
    for (uint32_t i = 0; i < n; i++)
        json_array_append_new(array, calls_number(x[i]));
    return array;
}

static int compare(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

double calls_quantile(double *x, uint32_t n, double p)
{
    if (n == 0)
        return NAN;
    qsort(x, n, sizeof *x, compare);
    return x[(uint32_t)fmin(n - 1, floor(p * n))];
}

uint64_t calls_seed(const struct calls_setup *setup, uint64_t purpose, uint64_t number)
{
    return setup->seed * UINT64_C(1000003) + purpose * 4096 + number;
}

uint32_t calls_trials(const struct calls_setup *setup, uint32_t n, uint32_t least)
{
    return (uint32_t)fmax(least, round(setup->scale * n));
}

bool calls_has_train_of(const struct call_class *call_class, uint32_t n_pulses)
{
    const struct train_shape *train = &call_class->train;
    return call_class->form == CALL_TRAIN && call_class->animal && !train->free_rhythm &&
           train->min_pulses <= n_pulses && train->pulse_s < 0.001;
}

void calls_free_shape(struct call_class *call_class)
{
    struct train_shape *train = &call_class->train;
    train->min_centroid_hz = train->min_bandwidth_hz = train->min_length_s = 0;
    train->max_centroid_hz = train->max_bandwidth_hz = train->max_length_s = train->max_sweep_hz_s = INFINITY;
    train->min_sweep_hz_s = -INFINITY;
}
