/* How far away the source was, and what its impulses come to at one range; see tally_place.h. */
#include "rule/tally_place.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static int by_value(const void *a, const void *b)
{
    float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

static double median_of(float *values, uint32_t n)
{
    if (n == 0)
        return NAN;
    qsort(values, n, sizeof values[0], by_value);
    return n % 2 ? values[n / 2] : 0.5 * ((double)values[n / 2 - 1] + values[n / 2]);
}

static uint32_t count_kept(const struct tally_channel *channel)
{
    return channel->n_impulses < TALLY_KEPT_IMPULSES ? channel->n_impulses : TALLY_KEPT_IMPULSES;
}

double tally_median_db(const struct tally_channel *channel)
{
    float values[TALLY_KEPT_IMPULSES];
    memcpy(values, channel->sel_db, count_kept(channel) * sizeof values[0]);
    return median_of(values, count_kept(channel));
}

uint32_t tally_placed_median(const struct tally_channel *channel, const struct loss *loss,
                             struct source_measurement *out)
{
    float values[TALLY_KEPT_IMPULSES];
    uint32_t n = 0;
    for (uint32_t k = 0; k < count_kept(channel); k++)
        if (channel->range_m[k] > 0)
            values[n++] = channel->range_m[k];
    double to_m = out->range_m = median_of(values, n);
    if (n == 0)
        return 0;
    n = 0;
    for (uint32_t k = 0; k < count_kept(channel); k++)
        if (channel->range_m[k] > 0)
            values[n++] = (float)(channel->sel_db[k] - loss_between_db(loss, channel->range_m[k], to_m));
    out->level_db = median_of(values, n);
    return n;
}

void tally_say_range(const struct tally_channel *channel, uint32_t n_placed, char reason[FLOW_TEXT_SIZE])
{
    size_t n = strlen(reason);
    if (isnan(channel->last_range_m) && *range_from_text(channel->last_from))
        snprintf(reason + n, FLOW_TEXT_SIZE - n, "%s%s", n > 0 ? ": " : "",
                 range_from_text(channel->last_from));
    n = strlen(reason);
    if (n_placed > 0 && n_placed < count_kept(channel))
        snprintf(reason + n, FLOW_TEXT_SIZE - n, "%sthe range of %u of %u impulses is unknown",
                 n > 0 ? "; " : "", count_kept(channel) - n_placed, count_kept(channel));
}
