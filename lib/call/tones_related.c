/* How two contours stand to each other; see tones_related.h. */
#include "call/tones_related.h"
#include <math.h>

#define HARMONIC_OVERLAP 0.6
#define HARMONIC_ERROR 0.02
#define MAX_HARMONIC 10
#define LOW_MULTIPLES 5 /* higher ones lie so close that any frequency is near one */
#define FIRST_HARMONICS 6.0
#define HIGHEST_OVERTONE 25.0
#define MOSTLY 0.7          /* of the common time */
#define SWEEPS 0.1          /* of its frequency: what has a course that another can keep to */
#define APART_ERROR 0.04    /* beyond which a ratio is not kept ... */
#define APART_MOSTLY 0.5    /* ... for this share of the time */
#define OVERTONE_WEAKER 0.1 /* share of the mean square of the sound in which it lies */
#define FAR_WEAKER 0.01
#define SMOOTH_BINS 5.0    /* mean jump of one line, times the square root of its SNR */
#define BLURRED_WITHIN 0.8 /* of its time */
#define ECHO_S 0.5
#define LEAST_MULTIPLE 1.4 /* any ratio below it rounds to 1 */
#define NEAR_HZ 0.01       /* more than what is lost where a frequency is kept as a float */

double related_duration(const struct contour *c)
{
    return c->end_frame - c->start_frame;
}

double related_overlap(const struct contour *a, const struct contour *b)
{
    return fmin(a->end_frame, b->end_frame) - fmax(a->start_frame, b->start_frame);
}

static double shorter(const struct contour *a, const struct contour *b)
{
    return fmin(related_duration(a), related_duration(b));
}

static double hz_at(const struct contour *c, double frame)
{
    double x = (frame - c->start_frame) / related_duration(c) * (TRACE_POINTS - 1);
    x = fmin(fmax(x, 0), TRACE_POINTS - 1.0);
    uint32_t i = (uint32_t)fmin(x, TRACE_POINTS - 2.0);
    return c->hz[i] + (x - i) * (c->hz[i + 1] - c->hz[i]);
}

/* The frequencies of two contours over the time that they have in common. */
struct common {
    double a[TRACE_POINTS], b[TRACE_POINTS];
};

/* As hz_at, at the middles of equal parts of a time within the contour. */
static void sample(const struct contour *c, double start, double length, double out[TRACE_POINTS])
{
    const double points = (TRACE_POINTS - 1) / related_duration(c), step = length / TRACE_POINTS * points;
    const double first = (start - c->start_frame) * points + step / 2;
    for (uint32_t i = 0; i < TRACE_POINTS; i++) {
        double x = first + i * step;
        x = x > 0 ? x : 0;
        x = x < TRACE_POINTS - 1 ? x : TRACE_POINTS - 1;
        const int at = x < TRACE_POINTS - 2 ? (int)x : TRACE_POINTS - 2;
        out[i] = c->hz[at] + (x - at) * (c->hz[at + 1] - c->hz[at]);
    }
}

static void sample_common(const struct contour *a, const struct contour *b, struct common *out)
{
    const double start = fmax(a->start_frame, b->start_frame), length = related_overlap(a, b);
    sample(a, start, length, out->a);
    sample(b, start, length, out->b);
}

/* Share of the common time in which the frequencies stand as ratio to 1, within the tolerance. */
static double share_in_ratio(const struct common *common, double ratio, double error, double tolerance_hz)
{
    uint32_t good = 0;
    for (uint32_t i = 0; i < TRACE_POINTS; i++) {
        const double wanted = ratio * common->b[i];
        good += fabs(common->a[i] - wanted) < error * wanted + tolerance_hz;
    }
    return good / (double)TRACE_POINTS;
}

/* Mean ratio over the common time, by its logarithm; eight ratios are multiplied before one is taken. */
static double ratio_of(const struct common *common)
{
    double sum = 0;
    for (uint32_t i = 0; i < TRACE_POINTS; i += 8) {
        double product = 1;
        for (uint32_t j = i; j < i + 8; j++)
            product *= common->a[j] / common->b[j];
        sum += log(product);
    }
    return exp(sum / TRACE_POINTS);
}

/* Share of the common time in which they keep their mean ratio; none where it is higher than overtones go. */
static double share_kept(const struct contour *a, const struct contour *b, const struct common *common,
                         double error)
{
    double ratio = ratio_of(common);
    if (ratio > HIGHEST_OVERTONE || ratio < 1 / HIGHEST_OVERTONE)
        return 0;
    return share_in_ratio(common, ratio, error, fmax(a->bin_hz, ratio * b->bin_hz) / 2);
}

/* How far it goes in the common time, as a share of its frequency; 0 where that is no more than least_hz. */
static double sweep_beyond(const double hz[TRACE_POINTS], double least_hz)
{
    double low = hz[0], high = hz[0];
    for (uint32_t i = 1; i < TRACE_POINTS; i++) {
        low = hz[i] < low ? hz[i] : low;
        high = hz[i] > high ? hz[i] : high;
    }
    return high - low > least_hz ? (high - low) / high : 0;
}

static double sweep_within(const struct contour *c, const double hz[TRACE_POINTS])
{
    return sweep_beyond(hz, 4 * c->bin_hz);
}

/* Whether it could sweep enough in any part of it: cheap, before the course is looked at. */
static bool may_sweep(const struct contour *c)
{
    const double extent = c->high_hz - c->low_hz + NEAR_HZ;
    return extent > 2 * c->bin_hz && extent >= SWEEPS * c->high_hz;
}

bool related_is_same_line(const struct contour *a, const struct contour *b)
{
    const double tolerance_hz = 2.5 * fmax(a->bin_hz, b->bin_hz), apart_hz = tolerance_hz + NEAR_HZ;
    if (related_overlap(a, b) < 0.3 * shorter(a, b) || a->low_hz > b->high_hz + apart_hz ||
        b->low_hz > a->high_hz + apart_hz)
        return false;
    struct common common;
    sample_common(a, b, &common);
    return share_in_ratio(&common, 1, 0, tolerance_hz) >= MOSTLY;
}

/* It keeps to one line: noise moves it the less, the stronger it is. What is open is taken to. */
static bool is_smooth(const struct contour *c)
{
    return c->jump_hz * sqrt(c->snr) <= SMOOTH_BINS * c->bin_hz;
}

/* What does not jump needs fewer bins to be seen to sweep. */
static bool sweeps_smoothly(const struct contour *c, const double hz[TRACE_POINTS])
{
    return is_smooth(c) && sweep_beyond(hz, 2 * c->bin_hz) >= SWEEPS;
}

/* They are never near each other. */
static bool never_meet(const struct contour *a, const struct contour *b, const struct common *common)
{
    const double tolerance_hz = 2.5 * fmax(a->bin_hz, b->bin_hz);
    bool meet = false;
    for (uint32_t i = 0; i < TRACE_POINTS; i++)
        meet = meet || fabs(common->a[i] - common->b[i]) < tolerance_hz;
    return !meet;
}

/* One sweeps smoothly through what are now and then multiples of the other, and goes on. */
static bool goes_across(const struct contour *a, const struct contour *b, const struct common *common)
{
    return (sweeps_smoothly(a, common->a) || sweeps_smoothly(b, common->b)) && never_meet(a, b, common) &&
           share_kept(a, b, common, APART_ERROR) < APART_MOSTLY;
}

/* Share of the common time in which a is near a low multiple of b, though it may go from one to the next.
 * What is still open is known to half a bin. */
static double share_at_multiples(const struct common *common, double tolerance_hz)
{
    uint32_t good = 0;
    for (uint32_t i = 0; i < TRACE_POINTS; i++) {
        const double ratio = common->a[i] / common->b[i];
        const int whole = ratio < LOW_MULTIPLES + 1 ? (int)(ratio + 0.5) : 0;
        good += whole >= 2 && whole <= LOW_MULTIPLES &&
                fabs(common->a[i] - whole * common->b[i]) <
                    APART_ERROR * whole * common->b[i] + whole * tolerance_hz;
    }
    return good / (double)TRACE_POINTS;
}

bool related_is_harmonic(const struct contour *a, const struct contour *b)
{
    if (related_overlap(a, b) < HARMONIC_OVERLAP * shorter(a, b))
        return false;
    const struct contour *high = a->hz[TRACE_POINTS / 2] > b->hz[TRACE_POINTS / 2] ? a : b;
    const struct contour *low = high == a ? b : a;
    const bool sweep = may_sweep(a) && may_sweep(b);
    if (!sweep && high->high_hz < LEAST_MULTIPLE * low->low_hz)
        return false; /* nowhere near twice the other */
    double middle = fmax(a->start_frame, b->start_frame) + related_overlap(a, b) / 2;
    double ratio = round(hz_at(high, middle) / hz_at(low, middle));
    struct common common;
    sample_common(high, low, &common);
    if (ratio >= 2 && ratio <= MAX_HARMONIC &&
        share_in_ratio(&common, ratio, HARMONIC_ERROR, low->bin_hz / 2) >= MOSTLY)
        return true;
    const double at_multiples = share_at_multiples(&common, low->contrast > 0 ? 0 : low->bin_hz / 2);
    if (at_multiples >= APART_MOSTLY)
        return at_multiples >= MOSTLY || !goes_across(high, low, &common);
    return sweep && sweep_within(high, common.a) >= SWEEPS && sweep_within(low, common.b) >= SWEEPS &&
           share_in_ratio(&common, ratio_of(&common), HARMONIC_ERROR, low->bin_hz / 2) >= MOSTLY;
}

bool related_is_blurred(const struct contour *blurred, const struct contour *clear)
{
    if (is_smooth(blurred) || !is_smooth(clear) ||
        related_overlap(blurred, clear) < BLURRED_WITHIN * related_duration(blurred))
        return false;
    struct common common;
    sample_common(blurred, clear, &common);
    double low = common.b[0], high = common.b[0];
    for (uint32_t i = 1; i < TRACE_POINTS; i++) {
        low = fmin(low, common.b[i]);
        high = fmax(high, common.b[i]);
    }
    const double tolerance_hz = 2.5 * fmax(blurred->bin_hz, clear->bin_hz);
    return blurred->low_hz > low - tolerance_hz && blurred->high_hz < high + tolerance_hz;
}

bool related_is_apart(const struct contour *a, const struct contour *b)
{
    if (!may_sweep(a) || !may_sweep(b) || !is_smooth(a) || !is_smooth(b))
        return false;
    struct common common;
    sample_common(a, b, &common);
    return sweep_within(a, common.a) >= SWEEPS && sweep_within(b, common.b) >= SWEEPS &&
           share_kept(a, b, &common, APART_ERROR) < APART_MOSTLY;
}

bool related_is_across(const struct contour *a, const struct contour *b)
{
    if (!may_sweep(a) && !may_sweep(b))
        return false;
    struct common common;
    sample_common(a, b, &common);
    return goes_across(a, b, &common);
}

/* It sweeps, and not as the other does (which may stand still), and lies so far above that it is not a path
 * from one of its first harmonics to the next. */
static bool has_own_course(const struct contour *c, const struct contour *other)
{
    if (related_overlap(c, other) <= 0 || !may_sweep(c) ||
        c->high_hz + NEAR_HZ < FIRST_HARMONICS * (other->low_hz - NEAR_HZ))
        return false;
    struct common common;
    sample_common(c, other, &common);
    return sweep_within(c, common.a) >= SWEEPS && ratio_of(&common) > FIRST_HARMONICS &&
           share_kept(c, other, &common, APART_ERROR) < APART_MOSTLY;
}

bool related_is_overtone(double rate_hz, const struct contour *weak, const struct contour *strong)
{
    if (weak->low_hz <= strong->high_hz || weak->mean_square >= OVERTONE_WEAKER * strong->mean_square)
        return false;
    bool within = related_overlap(weak, strong) >= HARMONIC_OVERLAP * related_duration(weak);
    bool begun = weak->start_frame >= strong->start_frame &&
                 weak->start_frame < strong->end_frame + ECHO_S / 2 * rate_hz &&
                 weak->end_frame < strong->end_frame + ECHO_S * rate_hz;
    return (within || (begun && weak->mean_square < FAR_WEAKER * strong->mean_square)) &&
           !has_own_course(weak, strong);
}
