/* Lines that run beside a contour: the sidebands of what is pulsed, the harmonics of a pulse rate whose own
 * frequency may be too weak to be heard; see tones_trace.h. */
#include "call/tones_field.h"
#include <math.h>

#define NEAREST 3        /* bins: nearer ones are one line with the contour's (Hann) */
#define MOST_BINS 44     /* that are looked at to either side */
#define OVER_BESIDE 1.0F /* ln: 4.3 dB over what lies around, on both sides at once ... */
#define OVER_VALLEY 0.7F /* ... and 3 dB over the least between it and the contour */
#define LEAST_LEVEL 0.3F /* ln over the background's mean; noise alone lies at -0.58 */
#define OF_MAIN (-3.0F)  /* ln: at most 13 dB below the contour's own line */

/* Sums of logarithms, by products: a logarithm is taken only where the product could overflow. */
struct log_sum {
    double product, sum;
    uint32_t count;
};

static inline void add_log(struct log_sum *to, double x)
{
    to->product *= x;
    to->count++;
    if (to->product > 1e200 || to->product < 1e-200) {
        to->sum += log(to->product);
        to->product = 1;
    }
}

/* Mean of ln(power / background) over the contour's frames at offsets from it, [-MOST_BINS..MOST_BINS]; the
 * offsets grow with its frequency, as those of harmonics do. NAN where the band ends in more than half of the
 * frames. */
static void profile(const struct tracer *tracer, uint64_t last, uint32_t n, float *out)
{
    struct log_sum sums[2 * MOST_BINS + 1];
    double middle = 0;
    for (int d = 0; d <= 2 * MOST_BINS; d++)
        sums[d] = (struct log_sum){.product = 1};
    for (uint32_t i = 0; i < n; i++)
        middle += (double)(tracer->first_bin + tracer->trail[i]) / n;
    for (uint32_t i = 0; i < n; i++) {
        const float *snr = tracer->history_snr + (size_t)tracer_row(tracer, last - i) * tracer->stride;
        const int at = (int)tracer->trail[i], n_bins = (int)tracer->n_bins;
        const double scale = (tracer->first_bin + tracer->trail[i]) / middle;
        for (int d = 0; d <= MOST_BINS; d++) {
            const int offset = (int)(d * scale + 0.5);
            if (at + offset < n_bins)
                add_log(&sums[MOST_BINS + d], (double)snr[at + offset] + 1e-6);
            if (d > 0 && at >= offset)
                add_log(&sums[MOST_BINS - d], (double)snr[at - offset] + 1e-6);
        }
    }
    for (int d = 0; d <= 2 * MOST_BINS; d++)
        out[d] = 2 * sums[d].count > n ? (float)((sums[d].sum + log(sums[d].product)) / sums[d].count) : NAN;
}

/* What both sides have at each distance; NAN where only one is in the band. */
static int both_sides(const float *profile, float out[MOST_BINS + 1])
{
    int reach = 0;
    for (int d = 0; d <= MOST_BINS; d++) {
        out[d] = fminf(profile[MOST_BINS + d], profile[MOST_BINS - d]);
        if (isnan(profile[MOST_BINS + d]) || isnan(profile[MOST_BINS - d]))
            break;
        reach = d;
    }
    return reach;
}

static float mean_around(const float *level, int d, int reach)
{
    float sum = 0;
    int n = 0;
    for (int j = d - 6; j <= d + 6; j++)
        if (j >= NEAREST - 1 && j <= reach && (j < d - 1 || j > d + 1)) {
            sum += level[j];
            n++;
        }
    return n ? sum / (float)n : INFINITY;
}

double contour_sideband_hz(const struct tracer *tracer, uint64_t last, uint32_t n)
{
    float course[2 * MOST_BINS + 1], level[MOST_BINS + 1];
    profile(tracer, last, n, course);
    const int reach = both_sides(course, level);
    float valley = INFINITY;
    for (int d = 2; d < reach; d++) {
        bool peak = level[d] > level[d - 1] && level[d] >= level[d + 1];
        if (d >= NEAREST && peak && level[d] > LEAST_LEVEL && level[d] > level[0] + OF_MAIN &&
            level[d] > valley + OVER_VALLEY && level[d] > mean_around(level, d, reach) + OVER_BESIDE) {
            double a = level[d - 1], b = level[d], c = level[d + 1], bend = a - 2 * b + c;
            return (d + (bend < 0 ? 0.5 * (a - c) / bend : 0)) * tracer->bin_hz;
        }
        valley = fminf(valley, level[d]);
    }
    return 0;
}
