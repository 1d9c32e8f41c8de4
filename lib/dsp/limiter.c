/* The limiter; see limiter.h. */
#include "dsp/limiter.h"
#include <math.h>
#include <stdlib.h>

/* The least of the last `window` values that were pushed. */
struct least {
    size_t *at; /* [window] positions whose values ascend, as a ring */
    double *value;
    size_t window, first, n;
};

static double least_push(struct least *least, size_t position, double value)
{
    while (least->n > 0 && least->value[(least->first + least->n - 1) % least->window] >= value)
        least->n--;
    size_t end = (least->first + least->n++) % least->window;
    least->at[end] = position;
    least->value[end] = value;
    while (least->at[least->first] + least->window <= position) {
        least->first = (least->first + 1) % least->window;
        least->n--;
    }
    return least->value[least->first];
}

/* The mean of the last `window` values, of fewer at the ends. The sum of those that are in force is kept
 * exactly enough by adding it up anew once a window. */
struct mean {
    double *value; /* [window] */
    double sum;
    size_t window, n, next;
};

static void mean_push(struct mean *mean, double value)
{
    if (mean->n == mean->window)
        mean->sum -= mean->value[mean->next];
    else
        mean->n++;
    mean->value[mean->next] = value;
    mean->sum += value;
    mean->next = (mean->next + 1) % mean->window;
    if (mean->next == 0) {
        mean->sum = 0;
        for (size_t i = 0; i < mean->n; i++)
            mean->sum += mean->value[i];
    }
}

static void mean_drop(struct mean *mean)
{
    mean->sum -= mean->value[(mean->next + mean->window - mean->n) % mean->window];
    mean->n--;
}

static double need(double x, double ceiling)
{
    double loud = fabs(x);
    return loud > ceiling ? ceiling / loud : 1;
}

/* Writes sample i once all that its gain depends on is known. */
static void write_one(float *samples, size_t i, double gain, double ceiling, const struct mean *mean)
{
    double y = samples[i] * gain * fmin(1, mean->sum / (double)mean->n);
    samples[i] = (float)fmax(-ceiling, fmin(ceiling, y)); /* the sum's last digits */
}

static void limit(float *samples, size_t n, double gain, double ceiling, size_t reach, struct least *least,
                  struct mean *mean)
{
    size_t written = 0, n_means = 0;
    /* Positions beyond the end need no gain; `least` lags by reach, the mean by reach more. */
    for (size_t i = 0; i < n + reach; i++) {
        double lowest = least_push(least, i, i < n ? need(samples[i] * gain, ceiling) : 1);
        if (i < reach)
            continue;
        mean_push(mean, lowest);
        if (++n_means > reach)
            write_one(samples, written++, gain, ceiling, mean);
    }
    while (written < n) {
        if (mean->n > 1 && written > reach)
            mean_drop(mean);
        write_one(samples, written++, gain, ceiling, mean);
    }
}

enum status limiter_apply(float *samples, size_t n, double gain, double ceiling, size_t reach)
{
    if (reach < 1 || !(ceiling > 0) || !isfinite(gain))
        return STATUS_BAD_ARGUMENT;
    size_t window = 2 * reach + 1;
    struct least least = {.at = malloc(window * sizeof *least.at),
                          .value = malloc(window * sizeof *least.value),
                          .window = window};
    struct mean mean = {.value = malloc(window * sizeof *mean.value), .window = window};
    enum status status = least.at && least.value && mean.value ? STATUS_OK : STATUS_NO_MEMORY;
    if (status == STATUS_OK)
        limit(samples, n, gain, ceiling, reach, &least, &mean);
    free(least.at);
    free(least.value);
    free(mean.value);
    return status;
}
